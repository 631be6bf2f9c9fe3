"""Quality flags: read by their meanings, never by bare number, and mapped to one vocabulary (QARTOD).

The same number means different things in different networks: 2 is "not evaluated" (QARTOD), "probably good"
(OceanSITES), "questionable" (NDBC currents, where 3 is good and 1 failed). So a table of numbers and meanings
is taken from the file, or from the convention the file names in words, or from the recipe; without any of
these the flags are refused.

QARTOD: U.S. Integrated Ocean Observing System, manuals for real-time quality control: 1 pass, 2 not
evaluated, 3 suspect or of high interest, 4 fail, 9 missing data. OceanSITES data format reference manual 1.4,
reference table 2.

How OceanSITES becomes QARTOD (stated choice, the standards do not give one): 0 unknown -> 2; 1 good -> 1; 2
probably good -> 1 (or 3 by the recipe); 3 potentially correctable bad -> 4; 4 bad -> 4; 7 nominal -> 2; 8
interpolated -> 3, since an interpolated value is no independent sample; 9 missing -> 9.
"""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any, Literal

import numpy as np

from lespost.errors import RecordError
from lespost.findings import Finding

PASS, NOT_EVALUATED, SUSPECT, FAIL, MISSING = 1, 2, 3, 4, 9
NUMBER_OF_WORD: Mapping[str, int] = {
    "pass": PASS,
    "not_evaluated": NOT_EVALUATED,
    "suspect": SUSPECT,
    "fail": FAIL,
    "missing": MISSING,
}

_PROBABLY_GOOD = ("probably_good", "probably_good_data", "probably_good_value")

#: The vocabularies of the networks, normalised, by what their words are in QARTOD terms.
_WORDS: Mapping[int, str] = {
    PASS: "pass passed good good_data good_value correct correct_value ok " + " ".join(_PROBABLY_GOOD),
    NOT_EVALUATED: (
        "not_evaluated unknown no_qc no_qc_performed no_quality_control not_qced unchecked unflagged "
        "not_checked "
        "nominal nominal_value not_used spare reserved not_applicable not_evaluated_or_unknown "
        "not_evaluated_not_available_or_unknown"
    ),
    SUSPECT: (
        "suspect suspect_or_of_high_interest of_high_interest questionable questionable_suspect "
        "questionable_or_suspect doubtful changed changed_value value_changed interpolated "
        "interpolated_value "
        "estimated estimated_value below_detection_limit value_below_detection value_in_excess"
    ),
    FAIL: (
        "fail failed bad bad_data bad_value erroneous rejected probably_bad probably_bad_data "
        "probably_bad_value "
        "potentially_correctable_bad_data potentially_correctable_bad bad_data_correctable "
        "bad_data_that_are_potentially_correctable probably_bad_data_that_are_potentially_correctable"
    ),
    MISSING: "missing missing_data missing_value no_data value_missing missing_data_point",
}

#: Words met in flag_meanings, normalised, and what they are in QARTOD terms.
VOCABULARY: Mapping[str, int] = {word: flag for flag, words in _WORDS.items() for word in words.split()}

#: Tables a file may name in words instead of spelling them out.
SCHEMES: Mapping[str, Mapping[int, str]] = {
    "qartod": {1: "pass", 2: "not_evaluated", 3: "suspect", 4: "fail", 9: "missing"},
    "oceansites": {
        0: "unknown",
        1: "good_data",
        2: "probably_good_data",
        3: "potentially_correctable_bad_data",
        4: "bad_data",
        7: "nominal_value",
        8: "interpolated_value",
        9: "missing_value",
    },
    "ndbc": {0: "not_evaluated", 1: "failed", 2: "questionable", 3: "good", 9: "missing"},
}


@dataclass(frozen=True)
class FlagTable:
    """Numbers of a flag variable and their meaning in QARTOD terms.

    words: the file's word of each number. to_qartod: the QARTOD flag of each number. masks: True where the
    numbers are bits that may be set together. evidence: where the meanings were read.
    """

    words: Mapping[int, str]
    to_qartod: Mapping[int, int]
    evidence: str
    masks: bool = False
    findings: tuple[Finding, ...] = field(default=())


def normalise(word: str) -> str:
    """A meaning in lower case with underscores: "Probably good data" -> "probably_good_data"."""
    return re.sub(r"[^a-z0-9]+", "_", word.lower()).strip("_")


def _vocabulary(extra: Mapping[str, str], probably_good: Literal["pass", "suspect"]) -> dict[str, int]:
    words = dict(VOCABULARY)
    words.update(dict.fromkeys(_PROBABLY_GOOD, NUMBER_OF_WORD[probably_good]))
    words.update({normalise(word): NUMBER_OF_WORD[meaning] for word, meaning in extra.items()})
    return words


def split_meanings(text: str, count: int, vocabulary: Mapping[str, int]) -> tuple[str, ...] | None:
    """The `count` meanings in `text`, or None where they cannot be told apart in exactly one way.

    Words are joined where the file broke a meaning in two ("potentially_correctable bad_data"): among all
    ways to cut the words into `count` runs, the one in which every run is a known meaning, if there is just
    one.
    """
    for separator in (r"[,;|]", r"\s+"):
        parts = [p for p in re.split(separator, text.strip()) if p.strip()]
        if len(parts) == count:
            return tuple(normalise(p) for p in parts)
    words = [normalise(w) for w in re.split(r"[\s,;|]+", text.strip()) if normalise(w)]
    if len(words) < count:
        return None
    # solutions[i] holds up to two ways to cut the first i words into runs, by number of runs: two are enough
    # to refuse
    solutions: list[dict[int, list[tuple[str, ...]]]] = [{} for _ in range(len(words) + 1)]
    solutions[0][0] = [()]
    for end in range(1, len(words) + 1):
        for start in range(max(0, end - 8), end):
            run = "_".join(words[start:end])
            if run not in vocabulary:
                continue
            for runs, ways in solutions[start].items():
                kept = solutions[end].setdefault(runs + 1, [])
                kept.extend((*way, run) for way in ways[: 2 - len(kept)])
    ways = solutions[len(words)].get(count, [])
    return ways[0] if len(ways) == 1 else None


def _numbers(value: Any, where: str) -> tuple[int, ...]:
    """Integers from a flag_values attribute: an array, or a text such as "1b, 2b"."""
    if isinstance(value, str):
        parts = [p for p in re.split(r"[\s,;]+", value.strip("[]() ")) if p]
        try:
            return tuple(int(float(p.rstrip("bBsSlLuU"))) for p in parts)
        except ValueError:
            raise RecordError(
                f'{where}: flag_values "{value}" are not numbers; name flag_scheme in the recipe.'
            ) from None
    array = np.atleast_1d(np.asarray(value))
    if (
        array.dtype.kind not in "iuf"
        or not np.all(np.isfinite(array))
        or not np.all(array == np.round(array))
    ):
        raise RecordError(
            f"{where}: flag_values {value!r} are not whole numbers; name flag_scheme in the recipe."
        )
    return tuple(int(v) for v in array)


def named_scheme(texts: Sequence[str]) -> tuple[str, str] | None:
    """(scheme, text) of the first text that names a flag convention in words, or None."""
    for text in texts:
        for scheme, pattern in (
            ("oceansites", r"ocean\s*sites"),
            ("qartod", r"qartod"),
            ("ndbc", r"\bndbc\b"),
        ):
            if re.search(pattern, text, re.IGNORECASE):
                return scheme, text
    return None


def scheme_table(
    scheme: str,
    evidence: str,
    extra: Mapping[str, str] | None = None,
    probably_good: Literal["pass", "suspect"] = "pass",
    findings: tuple[Finding, ...] = (),
) -> FlagTable:
    """The table of a named scheme ("qartod", "oceansites", "ndbc")."""
    words = SCHEMES[scheme]
    vocabulary = _vocabulary(extra or {}, probably_good)
    return FlagTable(dict(words), {n: vocabulary[w] for n, w in words.items()}, evidence, False, findings)


def flag_table(
    attributes: Mapping[str, Any],
    where: str,
    context: Sequence[str] = (),
    scheme: str = "auto",
    extra: Mapping[str, str] | None = None,
    probably_good: Literal["pass", "suspect"] = "pass",
) -> FlagTable:
    """The table of a flag variable from its attributes.

    where: file and variable, for messages. context: global texts that may name the flag convention. scheme:
    as in the recipe. Raises RecordError where the meanings are absent, unknown, or cannot be matched to the
    numbers.
    """
    extra = extra or {}
    if scheme not in ("auto", "none"):
        return scheme_table(scheme, f'flag_scheme = "{scheme}" in the recipe', extra, probably_good)
    vocabulary = _vocabulary(extra, probably_good)
    own = [
        str(attributes[k]) for k in ("conventions", "comment", "references", "long_name") if k in attributes
    ]
    named = named_scheme([*own, *context])
    meanings = attributes.get("flag_meanings")
    numbers = attributes.get("flag_values", attributes.get("flag_masks"))
    if meanings is None or numbers is None:
        if named is None:
            raise RecordError(
                f"{where}: quality flags without flag_values and flag_meanings; a bare number means "
                "different things in "
                'different networks. Write flag_scheme = "qartod", "oceansites" or "ndbc" (or "none" to '
                "ignore the flags)."
            )
        note = Finding(
            "flag-meanings-absent",
            "warning",
            f"{where}: no flag_meanings; the {named[0]} table was taken because the file says "
            f'"{named[1][:80]}".',
        )
        return scheme_table(named[0], f'convention named in "{named[1][:80]}"', extra, probably_good, (note,))
    if not isinstance(meanings, str):
        meanings = " ".join(str(m) for m in np.atleast_1d(meanings))
    values = _numbers(numbers, where)
    if len(set(values)) != len(values):
        raise RecordError(f"{where}: flag_values {values} repeat a number; name flag_scheme in the recipe.")
    words = split_meanings(meanings, len(values), vocabulary)
    findings: tuple[Finding, ...] = ()
    if words is None:
        raise RecordError(
            f'{where}: {len(values)} flag_values but the meanings "{meanings}" do not divide into as many; '
            "name flag_scheme "
            "in the recipe."
        )
    if len(words) != len(meanings.split()):
        findings += (
            Finding(
                "flag-meanings-split",
                "note",
                f'{where}: flag_meanings "{meanings}" were cut into {", ".join(words)} to match '
                f"{len(values)} values.",
                len(meanings.split()),
                len(values),
            ),
        )
    masks = "flag_values" not in attributes
    if masks:
        # a set bit names the test that failed unless its word says something milder
        mapping = {n: vocabulary.get(w, FAIL) for n, w in zip(values, words, strict=True)}
        return FlagTable(
            dict(zip(values, words, strict=True)), mapping, "flag_masks of the file", True, findings
        )
    unknown = [w for w in words if w not in vocabulary]
    if unknown:
        raise RecordError(
            f"{where}: flag meaning {', '.join(unknown)} is in no known vocabulary; say what it is: "
            f'flag_meanings = {{ {unknown[0]} = "suspect" }} (pass, not_evaluated, suspect or fail).'
        )
    table = dict(zip(values, words, strict=True))
    mapping = {n: vocabulary[w] for n, w in table.items()}
    if named is not None:
        standard = scheme_table(named[0], "", extra, probably_good).to_qartod
        clash = [n for n, flag in mapping.items() if n in standard and standard[n] != flag]
        if clash:
            findings += (
                Finding(
                    "flag-meanings-clash",
                    "warning",
                    f"{where}: the file names {named[0]} flags but gives {clash[0]} the meaning "
                    f"{table[clash[0]]}; its own "
                    "meanings were followed.",
                ),
            )
    return FlagTable(table, mapping, "flag_meanings of the file", False, findings)


def to_qartod(
    values: np.ndarray, table: FlagTable, where: str, ignore: Sequence[str] = ()
) -> tuple[np.ndarray, tuple[Finding, ...]]:
    """QARTOD flags (int8, same shape) of a flag variable's values.

    NaN (fill) is "not evaluated"; a number outside the table is "fail", and reported. ignore: words of bits
    to set aside (tables of masks only).
    """
    numbers = np.asarray(values)
    if numbers.dtype.kind not in "iufb":
        raise RecordError(
            f'{where}: quality flags are not numbers; name another variable or flag_scheme = "none".'
        )
    absent = ~np.isfinite(numbers.astype(np.float64))
    whole = np.where(absent, 0, numbers)
    fractional = whole != np.round(whole)
    whole = np.where(fractional | (np.abs(whole) > 2**31), -(2**31), whole).astype(np.int64)
    if table.masks:
        flags = np.full(numbers.shape, PASS, dtype=np.int8)
        for bit, word in table.words.items():
            if not any(normalise(i) in word for i in ignore):
                flags = np.where(
                    (whole & bit) != 0, worst(flags, np.int8(table.to_qartod[bit])), flags
                ).astype(np.int8)
    else:
        flags = np.full(numbers.shape, 0, dtype=np.int8)
        for number, flag in table.to_qartod.items():
            flags[whole == number] = flag
    flags[absent] = NOT_EVALUATED
    stray = (flags == 0) & ~absent
    findings: tuple[Finding, ...] = ()
    if stray.any():
        seen = ", ".join(str(v) for v in np.unique(numbers[stray])[:5])
        flags[stray] = FAIL
        findings = (
            Finding(
                "flag-number-unknown",
                "warning",
                f"{where}: {int(stray.sum())} flags ({seen}) are not in the table of meanings and count as "
                "fail.",
                float(stray.sum()),
            ),
        )
    return flags, findings


#: Position of each QARTOD flag from best to worst; "pass" outranks "not evaluated" when tests are combined,
#: as one test that was run says more than one that was not.
_SEVERITY = np.zeros(10, dtype=np.int8)
_SEVERITY[[NOT_EVALUATED, PASS, SUSPECT, FAIL, MISSING]] = [0, 1, 2, 3, 4]


def worst(first: Any, second: Any) -> Any:
    """The worse of two QARTOD flags, elementwise: missing > fail > suspect > pass > not evaluated."""
    a, b = np.asarray(first), np.asarray(second)
    return np.where(_SEVERITY[a] >= _SEVERITY[b], a, b).astype(np.int8)


def set_aside(aggregate: np.ndarray, ignored: np.ndarray, others: np.ndarray) -> np.ndarray:
    """The aggregate flag with the verdict of ignored tests taken back.

    ignored, others: worst flag of the tests to ignore and of all other tests. The aggregate changes only
    where an ignored test explains it and no other test is as severe; a verdict that no listed test explains
    (a manual one) stands.
    """
    explained = (_SEVERITY[ignored] >= _SEVERITY[aggregate]) & (_SEVERITY[others] < _SEVERITY[aggregate])
    explained &= np.isin(aggregate, (SUSPECT, FAIL))
    return np.where(explained, others, aggregate).astype(np.int8)

"""Flags are read by their meanings, whatever numbers carry them."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from lespost.errors import RecordError
from lespost.records.flags import (
    FAIL,
    MISSING,
    NOT_EVALUATED,
    PASS,
    SUSPECT,
    VOCABULARY,
    flag_table,
    set_aside,
    split_meanings,
    to_qartod,
    worst,
)


def test_numbers_follow_the_files_own_meanings_not_any_convention() -> None:
    attributes = {
        "flag_values": np.array([0, 1, 2, 3, 9]),
        "flag_meanings": "not_evaluated failed questionable good missing",
    }
    table = flag_table(attributes, "file")
    flags, findings = to_qartod(np.array([0, 1, 2, 3, 9]), table, "file")
    assert flags.tolist() == [NOT_EVALUATED, FAIL, SUSPECT, PASS, MISSING]
    assert findings == ()


def test_the_manuals_nine_words_for_eight_values_are_cut_right() -> None:
    # the OceanSITES manual 1.4 breaks "potentially_correctable_bad_data" in its own TEMP example
    meanings = (
        "unknown good_data probably_good_data potentially_correctable bad_data bad_data nominal_value "
        "interpolated_value "
        "missing_value"
    )
    attributes = {"flag_values": np.array([0, 1, 2, 3, 4, 7, 8, 9], "i1"), "flag_meanings": meanings}
    table = flag_table(attributes, "file")
    assert table.words[3] == "potentially_correctable_bad_data"
    assert table.words[4] == "bad_data"
    assert table.words[9] == "missing_value"
    assert [f.code for f in table.findings] == ["flag-meanings-split"]


def test_meanings_with_spaces_or_commas_are_read() -> None:
    words = ("good_data", "probably_good_data", "bad_data")
    assert split_meanings("good data probably good data bad data", 3, VOCABULARY) == words
    assert split_meanings("Good data, Probably good data, Bad data", 3, VOCABULARY) == words


def test_meanings_that_cannot_be_divided_are_refused() -> None:
    with pytest.raises(RecordError, match="do not divide"):
        flag_table({"flag_values": np.array([1, 2, 3]), "flag_meanings": "good bad"}, "file")
    # no way to cut these four words into three known meanings
    assert split_meanings("good bad_data bad good", 3, VOCABULARY) is None


def test_bare_numbers_are_refused_unless_a_convention_is_named() -> None:
    with pytest.raises(RecordError, match="flag_scheme"):
        flag_table({}, "file")
    named = flag_table({"comment": "OceanSITES Standard QC Flags"}, "file")
    assert named.to_qartod[4] == FAIL
    assert [f.code for f in named.findings] == ["flag-meanings-absent"]
    told = flag_table({}, "file", scheme="ndbc")
    assert told.to_qartod[3] == PASS


def test_a_file_that_names_one_convention_and_spells_another_is_reported() -> None:
    attributes = {
        "conventions": "QARTOD", "flag_values": np.array([1, 3]), "flag_meanings": "failed good",
    }  # fmt: skip
    table = flag_table(attributes, "file")
    assert table.to_qartod == {1: FAIL, 3: PASS}
    assert [f.code for f in table.findings] == ["flag-meanings-clash"]


def test_unknown_words_are_refused_until_explained() -> None:
    attributes = {"flag_values": np.array([1, 2]), "flag_meanings": "good dodgy"}
    with pytest.raises(RecordError, match="dodgy"):
        flag_table(attributes, "file")
    assert flag_table(attributes, "file", extra={"dodgy": "suspect"}).to_qartod[2] == SUSPECT


def test_flag_values_as_text_and_as_floats() -> None:
    assert flag_table({"flag_values": "1b, 4b", "flag_meanings": "good bad"}, "f").to_qartod == {
        1: PASS,
        4: FAIL,
    }
    assert flag_table({"flag_values": [1.0, 4.0], "flag_meanings": "good bad"}, "f").to_qartod == {
        1: PASS,
        4: FAIL,
    }
    with pytest.raises(RecordError, match="not whole numbers"):
        flag_table({"flag_values": [1.5, 4.0], "flag_meanings": "good bad"}, "f")


def test_a_number_outside_the_table_counts_as_fail_and_is_reported() -> None:
    table = flag_table({"flag_values": [1, 4], "flag_meanings": "good bad"}, "f")
    flags, findings = to_qartod(np.array([1.0, 7.0, np.nan, 1.5]), table, "f")
    assert flags.tolist() == [PASS, FAIL, NOT_EVALUATED, FAIL]
    assert [f.code for f in findings] == ["flag-number-unknown"]


def test_bit_flags_fail_where_a_bit_is_set_and_bits_can_be_ignored() -> None:
    table = flag_table({"flag_masks": [1, 2], "flag_meanings": "tilt_test vertical_velocity_test"}, "f")
    assert to_qartod(np.array([0, 1, 2, 3]), table, "f")[0].tolist() == [PASS, FAIL, FAIL, FAIL]
    ignoring = to_qartod(np.array([0, 1, 2, 3]), table, "f", ignore=["vertical velocity"])[0]
    assert ignoring.tolist() == [PASS, FAIL, PASS, FAIL]


def test_setting_a_test_aside_never_lifts_another_tests_verdict() -> None:
    aggregate = np.array([SUSPECT, FAIL, SUSPECT, FAIL, PASS])
    ignored = np.array([SUSPECT, SUSPECT, SUSPECT, PASS, PASS])
    others = np.array([PASS, FAIL, SUSPECT, PASS, PASS])
    # the fourth is a verdict that no listed test explains: it stands
    assert set_aside(aggregate, ignored, others).tolist() == [PASS, FAIL, SUSPECT, FAIL, PASS]


@given(st.sampled_from([1, 2, 3, 4, 9]), st.sampled_from([1, 2, 3, 4, 9]), st.sampled_from([1, 2, 3, 4, 9]))
def test_worst_is_commutative_associative_idempotent(a: int, b: int, c: int) -> None:
    assert worst(a, b) == worst(b, a)
    assert worst(worst(a, b), c) == worst(a, worst(b, c))
    assert worst(a, a) == a


@given(st.permutations(list(range(5))))
def test_the_order_of_the_table_does_not_matter(order: list[int]) -> None:
    values, words = [1, 2, 3, 4, 9], ["pass", "not_evaluated", "suspect", "fail", "missing"]
    attributes = {
        "flag_values": [values[i] for i in order],
        "flag_meanings": " ".join(words[i] for i in order),
    }
    assert flag_table(attributes, "f").to_qartod == {1: 1, 2: 2, 3: 3, 4: 4, 9: 9}

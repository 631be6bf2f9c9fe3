"""Flag vocabularies as their standards state them.

QARTOD: U.S. Integrated Ocean Observing System, Manual for Real-Time Quality Control of In-Situ Current
Observations. OceanSITES: data format reference manual 1.4, reference table 2 (a retyped copy was read). NDBC:
layout of current-meter text files of the U.S. National Data Buoy Center (nine-digit flags).
"""

from __future__ import annotations

import pytest

from lespost.records.flags import SCHEMES, scheme_table


def test_qartod_numbers() -> None:
    assert SCHEMES["qartod"] == {1: "pass", 2: "not_evaluated", 3: "suspect", 4: "fail", 9: "missing"}
    assert scheme_table("qartod", "").to_qartod == {1: 1, 2: 2, 3: 3, 4: 4, 9: 9}


@pytest.mark.parametrize(
    ("number", "word", "qartod"),
    [
        # words: OceanSITES 1.4 table 2; the QARTOD side is this package's stated choice (the standards give
        # none)
        (0, "unknown", 2),
        (1, "good_data", 1),
        (2, "probably_good_data", 1),
        (3, "potentially_correctable_bad_data", 4),
        (4, "bad_data", 4),
        (7, "nominal_value", 2),
        (8, "interpolated_value", 3),
        (9, "missing_value", 9),
    ],
)
def test_oceansites_numbers(number: int, word: str, qartod: int) -> None:
    assert SCHEMES["oceansites"][number] == word
    assert scheme_table("oceansites", "").to_qartod[number] == qartod


def test_oceansites_has_no_five_and_six() -> None:
    assert set(SCHEMES["oceansites"]) == {0, 1, 2, 3, 4, 7, 8, 9}


def test_probably_good_can_be_held_suspect() -> None:
    assert scheme_table("oceansites", "", probably_good="suspect").to_qartod[2] == 3


def test_ndbc_numbers_clash_with_qartod() -> None:
    # 0 not evaluated, 1 failed, 2 questionable, 3 good, 9 missing
    assert scheme_table("ndbc", "").to_qartod == {0: 2, 1: 4, 2: 3, 3: 1, 9: 9}

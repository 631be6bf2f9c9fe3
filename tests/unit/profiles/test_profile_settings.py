"""Recipe sections [profiles] and [windows]."""

from __future__ import annotations

import pytest
from pydantic import ValidationError

from lespost.profiles.settings import ProfilesSettings, WindowsSettings

TIMES = [600.0 * n for n in range(13)]  # 0 to 7200 s


def spans(settings: WindowsSettings) -> list[tuple[str, float, float]]:
    return [(w.name, w.start, w.end) for w in settings.over(TIMES)]


def test_one_window_over_the_whole_run_by_default() -> None:
    assert spans(WindowsSettings()) == [("all", 0.0, 7200.0)]


def test_spin_up_is_left_out() -> None:
    assert spans(WindowsSettings(spin_up="0.5 h")) == [("all", 1800.0, 7200.0)]
    assert WindowsSettings(spin_up="3 h").over(TIMES) == ()


def test_windows_of_a_length_share_no_snapshot() -> None:
    found = spans(WindowsSettings(length="1 h"))
    assert found == [("part 1", 0.0, 3000.0), ("part 2", 3600.0, 7200.0)]
    found = spans(WindowsSettings(length="50 min"))
    assert [(a, b) for _, a, b in found] == [(0.0, 2400.0), (3000.0, 5400.0), (6000.0, 7200.0)]


def test_windows_by_hand() -> None:
    settings = WindowsSettings(intervals=[{"name": "peak", "start": "0.5 h", "end": 3600}], spin_up=100)
    assert spans(settings) == [("peak", 1800.0, 3600.0)]


@pytest.mark.parametrize(
    "wrong",
    [
        {"intervals": [{"name": "a", "start": 10, "end": 5}]},
        {"intervals": [{"name": "a", "start": 1, "end": 5}, {"name": "a", "start": 6, "end": 9}]},
        {"intervals": [{"name": "a", "start": 1, "end": 5}], "length": 10},
        {"spin_up": "-1 h"}, {"length": "0 s"}, {"length": "3 m"}, {"spinup": 3},
    ],
)  # fmt: skip
def test_impossible_windows_are_refused(wrong: dict) -> None:
    with pytest.raises(ValidationError):
        WindowsSettings(**wrong)


def test_profiles_defaults() -> None:
    settings = ProfilesSettings()
    assert (settings.tiles, settings.higher_moments, settings.prandtl_number) == (4, True, None)
    with pytest.raises(ValidationError):
        ProfilesSettings(tiles=0)

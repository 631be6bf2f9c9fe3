"""Tables of scales: units, names, order, and every bad table refused in one clear paragraph."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from lespost.errors import DataError, LespostError, RequestError, UnitError
from lespost.scaling.analyse import analyse
from lespost.scaling.laws import require_positive
from lespost.scaling.settings import ScalingSettings
from lespost.scaling.table import read_table


def write(folder: Path, text: str) -> Path:
    path = folder / "scales.csv"
    path.write_text(text)
    return path


def test_units_in_names_or_in_a_second_row(tmp_path: Path) -> None:
    one = read_table(write(tmp_path, "time (h),V (cm/s),u* (m s-1),us (m s-1),V_se (cm/s),station\n"
                           "0,3.0,0.006,0.06,0.1,a\n1,4.0,0.007,0.07,0.1,b\n2,5.0,0.008,0.08,0.1,c\n"))
    assert one.columns["velocity"] == pytest.approx([0.03, 0.04, 0.05])
    assert one.errors["velocity"] == pytest.approx([0.001] * 3)
    assert one.time == pytest.approx([0, 3600, 7200])
    assert one.velocity_name == "V"
    assert 'column "station" is not used' in one.left_out
    two = read_table(write(tmp_path, "time,velocity,ustar,us0\n,cm/s,m s-1,m s-1\n# remark\n2020-01-01T01:00,4,0.007,0.07\n"
                           "2020-01-01T00:00,3,0.006,\n2020-01-01T02:00,5,0.008,0.08\n"))
    assert two.columns["velocity"] == pytest.approx([0.03, 0.04, 0.05])  # in order of time
    assert np.isnan(two.columns["us0"][0])
    assert two.time == pytest.approx([0, 3600, 7200])


HEADER = "time (h),velocity (m s-1),ustar (m s-1),us0 (m s-1)\n"


@pytest.mark.parametrize(("text", "error", "words"), [
    ("", DataError, "empty"),
    (HEADER + "0,0.03,0.006,0.06\n1,0.04,0.007,0.07\n", DataError, "2 rows are too few"),
    ("time (h),velocity,ustar (m s-1)\n0,1,1\n1,2,2\n2,3,3\n", UnitError, '"velocity" has no unit'),
    ("time,velocity (m s-1)\n0,1\n1,2\n2,3\n", UnitError, "without a unit"),
    ("velocity (kg),ustar (m s-1)\n1,1\n2,2\n3,3\n", UnitError, "does not convert"),
    ("velocity (s m-1),ustar (m s-1)\n1,1\n2,2\n3,3\n", UnitError, "reciprocal"),
    (HEADER + "0,0.03,0.006,0.06\n0,0.04,0.007,0.07\n2,0.05,0.008,0.08\n", DataError, "rows 1 and 2 have the same time"),
    (HEADER + "0,0.03,0.006\n1,0.04,0.007,0.07\n2,0.05,0.008,0.08\n", DataError, "has 3 cells"),
    (HEADER + "0,0.03,0.006,0.06\n1,x,0.007,0.07\n2,0.05,0.008,0.08\n", DataError, '"x" is not a number'),
    (HEADER + "0,0.03,0.006,0.06\n1,9.97e36,0.007,0.07\n2,0.05,0.008,0.08\n", DataError, "not a possible value"),
    (HEADER + "0,0.03,0.006,0.06\nyesterday,0.04,0.007,0.07\n2,0.05,0.008,0.08\n", DataError, "neither a number nor an ISO date"),
    (HEADER + "0,0.03,0.006,0.06\n,0.04,0.007,0.07\n2,0.05,0.008,0.08\n", DataError, "has no time"),
    ("ustar (m s-1),us0 (m s-1)\n1,1\n2,2\n3,3\n", DataError, "no column for the velocity"),
    ("V (m s-1),w_rms (m s-1)\n1,1\n2,2\n3,3\n", DataError, 'columns "V" and "w_rms" both'),
    ("V (m s-1),V_se (m s-1)\n1,-1\n2,2\n3,3\n", DataError, "negative standard error"),
    ("V (m s-1),us0_se (m s-1)\n1,1\n2,2\n3,3\n", DataError, "error of a column that is not there"),
])
def test_bad_tables(tmp_path: Path, text: str, error: type[LespostError], words: str) -> None:
    with pytest.raises(error) as caught:
        read_table(write(tmp_path, text))
    assert words in str(caught.value)
    assert "\n" not in str(caught.value)


def test_a_table_that_is_not_there_or_not_text(tmp_path: Path) -> None:
    with pytest.raises(RequestError, match="no such table"):
        read_table(tmp_path / "nothing.csv")
    path = tmp_path / "picture.csv"
    path.write_bytes(b"\x89\xff\xfe\x00" * 20)
    with pytest.raises(DataError, match="not a text file"):
        read_table(path)


def test_zeros_and_negatives_have_no_logarithm(tmp_path: Path) -> None:
    body = "".join(f"{i},{0.03 + i / 1000},{0.006 + i / 5000},{0.06 if i else 0.0}\n" for i in range(6))
    table = read_table(write(tmp_path, HEADER + body))
    with pytest.raises(DataError, match="column us0: 1 values are zero or negative"):
        require_positive(table, ("us0",), False)
    kept = require_positive(table, ("us0",), True)
    assert len(kept) == 5
    assert any("1 rows left out: us0" in remark for remark in kept.left_out)
    with pytest.raises(DataError, match="zero or negative"):
        analyse(table, ScalingSettings(bootstrap_samples=100, permutations=100))


def test_forcing_that_never_changes_is_refused(tmp_path: Path) -> None:
    table = read_table(write(tmp_path, HEADER + "".join(f"{i},{0.03 + i / 1000},0.006,0.06\n" for i in range(6))))
    with pytest.raises(DataError, match="the same in all rows"):
        analyse(table, ScalingSettings())


def test_velocities_that_cannot_test_a_law(tmp_path: Path) -> None:
    quick = ScalingSettings(bootstrap_samples=100, permutations=100)
    table = read_table(write(tmp_path, HEADER + "".join(f"{i},0.03,{0.006 + i / 1000},{0.06 + i / 100}\n" for i in range(6))))
    with pytest.raises(DataError, match="nothing for a law to explain"):
        analyse(table, quick)
    table = read_table(write(tmp_path, HEADER + "".join(f"{i},{0.6 + i / 10},{0.006 + i % 3 / 1000},{0.06 + i / 100}\n" for i in range(6))))
    with pytest.raises(DataError, match="without any scatter"):
        analyse(table, quick)


def test_missing_errors_take_the_usual_one(tmp_path: Path) -> None:
    body = "".join(f"{0.03 + i / 1000 * (1 + i % 2)},{'' if i == 2 else 0.1 * (0.03 + i / 1000 * (1 + i % 2)):},{0.006 + i / 5000}\n"
                   for i in range(6))
    table = read_table(write(tmp_path, "V (m s-1),V_se (m s-1),ustar (m s-1)\n" + body))
    full = require_positive(table, ("ustar",), False)
    assert full.errors["velocity"] == pytest.approx(0.1 * full.columns["velocity"])
    assert any("1 rows have no error of velocity: the usual one, 10.0 %" in remark for remark in full.left_out)


def test_three_rows_say_little(tmp_path: Path) -> None:
    table = read_table(write(tmp_path, HEADER + "0,0.01,0.005,0.05\n1,0.02,0.007,0.09\n2,0.03,0.009,0.11\n"))
    found = analyse(table, ScalingSettings(bootstrap_samples=100, permutations=100))
    assert not any(item.guard.beats_chance for item in found.tested)
    assert found.tested[0].free.slope.high - found.tested[0].free.slope.low > 1

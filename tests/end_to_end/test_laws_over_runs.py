"""A recipe over several runs: their windows make one table, and the laws are tested on it."""

from __future__ import annotations

from pathlib import Path

import pandas as pd
import pytest

from tests.end_to_end.command_line import lespost


def recipe(folder: Path, store: Path, name: str, more: str = "") -> Path:
    path = folder / f"{name}.toml"
    path.write_text(f'[fields]\npath = "{store}"\n{more}')
    return path


@pytest.fixture(scope="module")
def runs(repository: Path, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A folder with the results of the shear and the convective store."""
    folder = tmp_path_factory.mktemp("runs")
    for name in ("shear", "convective"):
        lespost("run", recipe(folder, repository / "toy_fields" / "data" / f"{name}.zarr", name))
    return folder


def test_windows_of_three_runs_make_a_table(repository: Path, runs: Path) -> None:
    store = repository / "toy_fields" / "data" / "langmuir.zarr"
    more = '[scaling]\nresults = ["shear_out", "convective_out"]\nlaws = ["ustar"]\nbootstrap_samples = 200\npermutations = 200\n'
    lespost("run", recipe(runs, store, "langmuir", more))
    table = pd.read_csv(runs / "langmuir_out" / "scaling.csv")
    assert set(table["rows"]) == {3}
    assert set(table["law"]) == {"ustar"}
    assert (runs / "langmuir_out" / "figures" / "laws.svg").exists()


def test_one_window_cannot_carry_a_law_and_says_so(repository: Path, runs: Path) -> None:
    store = repository / "toy_fields" / "data" / "shear.zarr"
    done = lespost("run", recipe(runs, store, "alone", "[scaling]\n"))
    assert "no law could be tested" in done.stdout
    assert not (runs / "alone_out" / "scaling.csv").exists()
    assert "scaling-not-possible" in (runs / "alone_out" / "run.json").read_text()

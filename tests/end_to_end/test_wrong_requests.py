"""What a user sees who asks wrongly: one short paragraph, the right exit code, nothing left behind that looks whole."""

from __future__ import annotations

from pathlib import Path

import pytest

from tests.end_to_end.command_line import assert_one_paragraph, lespost

STORE = "toy_fields/data/langmuir.zarr"


def recipe(repository: Path, folder: Path, extra: str = "", path: str | None = None) -> Path:
    """A recipe on a shipped store with `extra` lines appended."""
    target = folder / "case.toml"
    target.write_text(f'[fields]\npath = "{path or repository / STORE}"\n{extra}\n')
    return target


@pytest.mark.parametrize(
    ("extra", "words"),
    [
        ("[profile]\n", ("[profile]", "profiles")),
        ("[regime]\nbootstrap_samples = 'many'\n", ("line 4", "regime")),
        ("[run]\ntitle = 3\n", ("[run].title", "3")),
        ("[compute]\nmemory = \"2 m\"\n", ("memory",)),
        ("[compute]\nthreads = -1\n", ("threads", "-1")),
        ("[comparison]\nconfidence = 1.2\n", ("confidence", "1.2")),
        ("[forcing]\nmixed_layer_depth = -3.0\n", ("mixed_layer_depth", "-3")),
        ("[forcing]\nfriction_velocity = 0.006\nstress = 0.1\n", ("friction_velocity", "stress")),
        ("[run\n", ("TOML", "line 3")),
    ],
)
def test_a_wrong_recipe_is_named_by_key_and_exits_2(
    repository: Path, tmp_path: Path, extra: str, words: tuple[str, ...]
) -> None:
    done = lespost("run", recipe(repository, tmp_path, extra), "--out", tmp_path / "out", expect=2)
    assert_one_paragraph(done)
    assert "case.toml" in done.stderr
    for word in words:
        assert word in done.stderr
    assert not (tmp_path / "out").exists()


def test_all_faults_of_a_recipe_are_told_at_once(repository: Path, tmp_path: Path) -> None:
    path = recipe(repository, tmp_path, "[compute]\nthreads = -1\nthread = 3\n[regimes]\n")
    done = lespost("run", path, expect=2)
    assert "threads" in done.stderr and "thread:" in done.stderr and "[regimes]" in done.stderr


def test_a_path_that_does_not_exist(repository: Path, tmp_path: Path) -> None:
    done = lespost("run", recipe(repository, tmp_path, path="nowhere.nc"), "--out", tmp_path / "out", expect=None)
    assert done.returncode in (2, 3)
    assert_one_paragraph(done)
    assert "nowhere.nc" in done.stderr


def test_a_recipe_that_does_not_exist(tmp_path: Path) -> None:
    done = lespost("run", tmp_path / "none.toml", expect=2)
    assert_one_paragraph(done)


def test_a_picture_given_as_fields(repository: Path, tmp_path: Path) -> None:
    picture = tmp_path / "run.nc"
    picture.write_bytes(b"\x89PNG\r\n\x1a\n" + bytes(2000))
    for arguments in (("inspect", picture), ("run", recipe(repository, tmp_path, path=str(picture)))):
        done = lespost(*arguments, expect=3)
        assert_one_paragraph(done)
        assert "run.nc" in done.stderr


def test_unknown_command_and_option() -> None:
    assert lespost("analyse", expect=2).stderr
    assert "No such option" in lespost("run", "--nope", "x", expect=2).stderr


def test_page_of_a_folder_that_is_not_a_results_folder(tmp_path: Path) -> None:
    done = lespost("page", tmp_path, expect=3)
    assert_one_paragraph(done)


def test_versions_are_told() -> None:
    text = lespost("--version").stdout
    for package in ("lespost", "numpy", "xarray", "zarr", "netCDF4"):
        assert package in text

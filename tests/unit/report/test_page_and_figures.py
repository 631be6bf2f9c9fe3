"""The page says what the files say, escapes what it is given, needs no network; figures are reproducible files."""

from __future__ import annotations

import re
from html.parser import HTMLParser
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from lespost.errors import DataError
from lespost.report.build import build_report
from lespost.report.page import number_text, probability_text
from lespost.report.triangle_figure import ternary
from tests.unit.report.results_folder import make_results


@pytest.fixture(scope="module")
def page(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return build_report(make_results(tmp_path_factory.mktemp("results") / "out", title='<script>alert("x")</script>'))


class Reader(HTMLParser):
    """Collects tags with their attributes, and the text."""

    def __init__(self) -> None:
        super().__init__()
        self.tags: list[tuple[str, dict[str, str | None]]] = []
        self.text: list[str] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append((tag, dict(attrs)))

    def handle_data(self, data: str) -> None:
        self.text.append(data)


def read(path: Path) -> Reader:
    reader = Reader()
    reader.feed(path.read_text(encoding="utf-8"))
    return reader


def test_the_answer_comes_first_with_its_probability(page: Path) -> None:
    text = " ".join(" ".join(read(page).text).split())
    assert text.index("Langmuir") < text.index("Evidence")
    assert "probability 0.97" in text
    assert "friction velocity 0.61 cm s⁻¹" in text
    assert "4.0–16.0 m" in text


def test_what_is_given_is_escaped(page: Path) -> None:
    reader = read(page)
    assert "script" not in {tag for tag, _ in reader.tags}
    assert '<script>alert("x")</script>' in "".join(reader.text)


def test_the_page_stands_alone(page: Path) -> None:
    for tag, attributes in read(page).tags:
        for name in ("src", "href"):
            value = attributes.get(name)
            assert value is None or value.startswith(("data:image/", "#")), (tag, value)
    assert "@import" not in page.read_text() and "url(" not in page.read_text().split("</style>")[0]


def test_every_figure_has_words_and_every_table_heads(page: Path) -> None:
    reader = read(page)
    images = [attributes for tag, attributes in reader.tags if tag == "img"]
    assert len(images) >= 4
    assert all(attributes.get("alt") for attributes in images)
    tags = [tag for tag, _ in reader.tags]
    assert tags.count("table") == tags.count("caption") >= 3
    assert all(attributes.get("scope") == "col" for tag, attributes in reader.tags if tag == "th")


def test_verdicts_are_counted(page: Path) -> None:
    text = " ".join(" ".join(read(page).text).split())
    assert "Of 6 claims: 2 agrees, 2 differs, 2 cannot tell" in text


def test_the_same_results_make_the_same_files(tmp_path: Path) -> None:
    first = make_results(tmp_path / "one")
    second = make_results(tmp_path / "two")
    one, two = build_report(first).read_bytes(), build_report(second).read_bytes()
    assert one == two
    for figure in (first / "figures").iterdir():
        assert figure.read_bytes() == (second / "figures" / figure.name).read_bytes(), figure.name


def test_figures_are_vector_and_bitmap_without_dates(page: Path) -> None:
    names = {path.name for path in (page.parent / "figures").iterdir()}
    for name in ("profiles_whole", "triangle_whole", "regime_plane", "plan_views", "comparison_profiler_mooring"):
        assert {f"{name}.svg", f"{name}.png"} <= names
    assert not [name for name in names if ".part" in name]
    assert not re.search(r"<dc:date>", (page.parent / "figures" / "profiles_whole.svg").read_text())


def test_without_a_record_there_is_no_comparison(tmp_path: Path) -> None:
    text = build_report(make_results(tmp_path / "out", with_comparison=False)).read_text()
    assert "Model against record" not in text


def test_an_incomplete_folder_is_told(tmp_path: Path) -> None:
    folder = make_results(tmp_path / "out")
    (folder / "regime.csv").unlink()
    with pytest.raises(DataError, match=r"regime\.csv missing"):
        build_report(folder)


@pytest.mark.parametrize(
    ("value", "text"),
    [(0.0061, "0.0061"), (np.nan, ""), (None, ""), (123456.0, "1.23·10^5"), (-2.5, "−2.5"), (4.5e-7, "4.50·10^−7"), (0.0, "0"),
     (33.0, "33")],
)
def test_numbers_are_written_for_reading(value: float | None, text: str) -> None:
    assert number_text(value) == text


@pytest.mark.parametrize(("value", "text"), [(1.0, "above 0.999"), (0.998, "0.998"), (0.97, "0.97"), (np.nan, ""), (None, "")])
def test_probabilities_are_never_certain(value: float | None, text: str) -> None:
    assert probability_text(value) == text


def test_corners_and_centre_of_the_triangle() -> None:
    x, y = ternary(np.array([1.0, 0.0, 0.0, 1 / 3]), np.array([0.0, 1.0, 0.0, 1 / 3]), np.array([0.0, 0.0, 1.0, 1 / 3]))
    np.testing.assert_allclose(x, [0.0, 1.0, 0.5, 0.5], atol=1e-15)
    np.testing.assert_allclose(y, [0.0, 0.0, np.sqrt(3) / 2, np.sqrt(3) / 6], atol=1e-15)


def test_empty_cells_stay_empty(page: Path) -> None:
    regime = pd.read_csv(page.parent / "regime.csv")
    assert np.isnan(regime["wstar"]).all()
    assert "nan" not in " ".join(read(page).text).lower().split()

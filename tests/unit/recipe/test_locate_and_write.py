"""Line numbers of keys, and recipes that load again to what was written."""

from __future__ import annotations

import tomllib

from hypothesis import given
from hypothesis import strategies as st

from lespost.recipe.locate import key_lines, line_of
from lespost.recipe.write import Entry, Section, recipe_text

TEXT = """\
[run]
title = "a"

[fields]
path = "x"
[fields.names]
u = "U"
[[instrument]]
name = "one"
[[instrument]]
name = "two"
depth = 3
"""


def test_every_key_has_its_line() -> None:
    lines = key_lines(TEXT)
    assert lines["run", "title"] == 2
    assert lines["fields", "names", "u"] == 7
    assert lines["instrument", 0, "name"] == 9
    assert lines["instrument", 1, "depth"] == 12


def test_a_missing_key_points_to_its_table() -> None:
    lines = key_lines(TEXT)
    assert line_of(lines, ("instrument", 1, "heading")) == 10
    assert line_of(lines, ("nothing",)) is None


NAMES = st.from_regex(r"[a-z][a-z_]{0,8}", fullmatch=True)
VALUES = st.one_of(st.booleans(), st.integers(-10**6, 10**6), st.floats(allow_nan=False, allow_infinity=False),
                   st.text(st.characters(codec="utf-8", exclude_categories=["Cc", "Cs"]), max_size=20),
                   st.lists(st.integers(0, 9), max_size=4))


@given(st.dictionaries(NAMES, st.dictionaries(NAMES, VALUES, max_size=4), min_size=1, max_size=4))
def test_what_is_written_loads_again(tree: dict[str, dict[str, object]]) -> None:
    sections = [Section(name, [Entry(key, value, "from the file") for key, value in table.items()])
                for name, table in tree.items()]
    assert tomllib.loads(recipe_text(sections, "heading")) == tree


def test_unknown_values_are_left_for_the_user() -> None:
    text = recipe_text([Section("forcing", [Entry("latitude", None, "not in the files", "45.0")])])
    assert "# latitude = 45.0" in text
    assert tomllib.loads(text) == {"forcing": {}}

"""Where in a TOML file a key stands, so that an error of meaning can name its line.

`tomllib` gives positions only for errors of syntax; this index is built by reading the lines once, which is enough
for the plain tables and arrays of tables that recipes are made of.
"""

from __future__ import annotations

import re
from collections import Counter

_HEADER = re.compile(r"^\s*(\[\[?)\s*([^\]]+?)\s*\]\]?\s*(?:#.*)?$")
_KEY = re.compile(r"^\s*([A-Za-z0-9_\-\.\"']+)\s*=")

Location = tuple[str | int, ...]


def key_lines(text: str) -> dict[Location, int]:
    """Line numbers (from 1) of every table header and key in the TOML `text`.

    Keys of the result are paths such as ("fields", "path") and, for arrays of tables, ("instrument", 0, "name").
    """
    lines: dict[Location, int] = {}
    arrays: Counter[tuple[str, ...]] = Counter()
    prefix: Location = ()
    for number, line in enumerate(text.splitlines(), start=1):
        header = _HEADER.match(line)
        if header:
            parts = tuple(_bare(part) for part in header.group(2).split("."))
            if header.group(1) == "[[":
                prefix = (*_within_arrays(parts[:-1], arrays), parts[-1], arrays[parts])
                arrays[parts] += 1
                lines.setdefault(prefix[:-1], number)
            else:
                prefix = _within_arrays(parts, arrays)
            lines.setdefault(prefix, number)
            continue
        key = _KEY.match(line)
        if key:
            lines.setdefault((*prefix, *(_bare(part) for part in key.group(1).split("."))), number)
    return lines


def line_of(lines: dict[Location, int], location: Location) -> int | None:
    """The line of `location`, or of the nearest enclosing key that stands in the file."""
    for length in range(len(location), 0, -1):
        if location[:length] in lines:
            return lines[location[:length]]
    return None


def _bare(part: str) -> str:
    return part.strip().strip("\"'")


def _within_arrays(parts: tuple[str, ...], arrays: Counter[tuple[str, ...]]) -> Location:
    """`parts` with the index of the latest element after each part that is an array of tables."""
    location: list[str | int] = []
    for depth, part in enumerate(parts, start=1):
        location.append(part)
        if arrays[parts[:depth]]:
            location.append(arrays[parts[:depth]] - 1)
    return tuple(location)

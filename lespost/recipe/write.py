"""Writes a recipe as a person would: sections in order, a comment beside each value that says where it came from."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any


@dataclass(frozen=True)
class Entry:
    """One line of a recipe. A value of None writes the key commented out, for the user to fill in."""

    key: str
    value: Any
    comment: str = ""
    example: str = ""


@dataclass(frozen=True)
class Section:
    """One table of a recipe; `array` makes it an element of an array of tables such as [[instrument]]."""

    name: str
    entries: Sequence[Entry]
    comment: str = ""
    array: bool = False
    commented_out: bool = field(default=False)


def recipe_text(sections: Sequence[Section], heading: str = "") -> str:
    """The TOML text of `sections`, with their comments; it loads again to the same values."""
    import tomli_w

    lines = [f"# {line}" for line in heading.splitlines()]
    for section in sections:
        mark = "# " if section.commented_out else ""
        lines.append("")
        lines += [f"# {line}" for line in section.comment.splitlines()]
        lines.append(f"{mark}[[{section.name}]]" if section.array else f"{mark}[{section.name}]")
        for entry in section.entries:
            comment = f"  # {entry.comment}" if entry.comment else ""
            if entry.value is None:
                lines.append(f"# {entry.key} = {entry.example}{comment}")
                continue
            written = tomli_w.dumps({entry.key: _inline(entry.value)}).strip()
            if "\n" in written:
                lines += [f"{mark}{line}" for line in written.splitlines()]
            else:
                lines.append(f"{mark}{written}{comment}")
    return "\n".join(lines).lstrip("\n") + "\n"


def _inline(value: Any) -> Any:
    """Plain Python values: numpy scalars and arrays become numbers and lists."""
    if hasattr(value, "tolist"):
        return value.tolist()
    if isinstance(value, tuple):
        return [_inline(item) for item in value]
    return value

"""What a record file holds before anything is decided about it: variables, attributes, faults found on the
way.

`cf.py` and `csv_table.py` make a `RawRecord`; `describe.py` reports it; `series.py` turns it into the
canonical series.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np

from lespost.findings import Finding


@dataclass(frozen=True)
class RawVariable:
    """One variable of a file.

    values: unpacked; floats with NaN where missing, integers as stored, texts as an object array of str.
    stored_dtype: numpy dtype name in the file. missing: how many values are fill, or beyond 1e30 in modulus.
    """

    name: str
    dims: tuple[str, ...]
    values: np.ndarray
    attributes: Mapping[str, Any]
    stored_dtype: str
    missing: int = 0

    @property
    def units(self) -> str | None:
        """The unit text, None where the file has none."""
        text = self.attributes.get("units")
        return None if text is None else str(text)

    @property
    def standard_name(self) -> str:
        """The standard name without a modifier, in lower case; empty where there is none."""
        words = str(self.attributes.get("standard_name", "")).split()
        return words[0].lower() if words else ""

    @property
    def is_quality(self) -> bool:
        """Whether the variable holds quality flags rather than data."""
        name = self.name.lower()
        words = str(self.attributes.get("standard_name", "")).lower().split()
        return (
            (bool(words) and (words[-1].endswith("quality_flag") or words[-1] == "status_flag"))
            or "flag_meanings" in self.attributes
            or name.endswith(("_qc", "_flag", "_flags", "_quality_flag", "_qc_agg", "_qc_tests"))
            or name.startswith("qartod_")
            or "_qartod_" in name
        )

    @property
    def is_text(self) -> bool:
        """Whether the values are texts."""
        return self.values.dtype.kind in "OSU"


@dataclass(frozen=True)
class RawRecord:
    """A file as read: `layout` in words, variables by name, global attributes, faults found so far."""

    path: Path
    layout: str
    feature_type: str
    dimensions: Mapping[str, int]
    variables: Mapping[str, RawVariable]
    attributes: Mapping[str, Any]
    findings: tuple[Finding, ...] = field(default=())

"""Small frozen objects that carry what was found, and on what evidence, between the floors."""

from __future__ import annotations

from dataclasses import asdict, dataclass
from typing import Any, Literal


@dataclass(frozen=True)
class Finding:
    """One result of a check: printed, stored in run.json and shown on the page.

    code: short stable identifier in words joined by hyphens, e.g. "mean-w".
    severity: "note" (worth knowing), "warning" (a result may mislead), "error" (results cannot be trusted).
    message: one sentence with the number, the limit and what to do.
    value, limit: the measured number and the threshold it was held against, in `units`.
    """

    code: str
    severity: Literal["note", "warning", "error"]
    message: str
    value: float | None = None
    limit: float | None = None
    units: str = ""

    def to_dict(self) -> dict[str, Any]:
        """Plain dict for JSON."""
        return asdict(self)


@dataclass(frozen=True)
class Hint:
    """A quantity that the files themselves state (attribute or variable), in the package's units.

    value: a float, or a numpy array over `dims` (time and/or z).
    evidence: where it was read, e.g. 'attribute "ustar"'.
    """

    value: Any
    units: str
    evidence: str
    dims: tuple[str, ...] = ()


@dataclass(frozen=True)
class Decision:
    """One thing about the layout that was decided: printed by inspect, stored in run.json.

    subject: what was decided, e.g. "w position".
    choice: the answer, e.g. "z faces, surface face present".
    how: "recipe", "metadata" or "detected".
    evidence: the reason in words with its numbers (margin of the runner-up where it was a contest).
    """

    subject: str
    choice: str
    how: Literal["recipe", "metadata", "detected", "default"]
    evidence: str

    def to_dict(self) -> dict[str, Any]:
        """Plain dict for JSON."""
        return asdict(self)

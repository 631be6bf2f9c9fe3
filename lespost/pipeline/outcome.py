"""What a run tells its user at the end: a few lines on a terminal, or the same as JSON."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import pandas as pd

from lespost.findings import Finding

_REGIME_KEYS = ("window", "z_bottom", "z_top", "regime", "p_shear", "p_convective", "p_langmuir", "ustar", "la_t", "h",
                "forcing_regime", "agreement", "note")


@dataclass(frozen=True)
class Outcome:
    """The results of a run. tasks: counts of blocks (total, reused from an earlier run, computed now)."""

    folder: Path
    page: Path
    regime: pd.DataFrame
    comparison: pd.DataFrame | None
    findings: tuple[Finding, ...]
    tasks: Mapping[str, int]
    timings: Mapping[str, float] = field(default_factory=dict)

    def summary(self) -> dict[str, Any]:
        """The outcome as plain values for JSON."""
        regime = self.regime[[key for key in _REGIME_KEYS if key in self.regime]]
        verdicts = None if self.comparison is None else {
            str(name): int(count) for name, count in self.comparison["verdict"].value_counts().items()}
        return {"out": str(self.folder), "page": str(self.page), "regime": regime.to_dict("records"), "verdicts": verdicts,
                "warnings": [finding.to_dict() for finding in self.findings if finding.severity != "note"],
                "tasks": dict(self.tasks), "timings": dict(self.timings)}

    def text(self) -> str:
        """The outcome in lines for a reader."""
        lines = [""]
        for _, row in self.regime.iterrows():
            probability = row.get(f"p_{row['regime']}", float("nan"))
            sure = f", probability {probability:.2f}" if pd.notna(probability) else ""
            lines.append(f"{row['window']}, {-row['z_top']:.1f} to {-row['z_bottom']:.1f} m: {row['regime']}{sure}")
        if self.comparison is not None:
            counts = self.comparison["verdict"].value_counts()
            told = ", ".join(f"{counts.get(verdict, 0)} {verdict}" for verdict in ("agrees", "differs", "cannot tell"))
            lines.append(f"comparison: {len(self.comparison)} claims: {told}")
        for finding in self.findings:
            if finding.severity != "note":
                lines.append(f"{finding.severity}: {finding.message}")
        lines.append(f"page: {self.page}")
        return "\n".join(lines)

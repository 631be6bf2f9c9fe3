"""The page: one self-contained HTML file that gives the answer first, then the evidence, the checks and the provenance.

Everything that comes from files or recipes is escaped by the template engine; figures are embedded; no script, no
network. The figures are made by `figures`; the numbers come from the results folder and are only formatted here.
"""

from __future__ import annotations

import base64
import json
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pandas as pd

from lespost.report import style
from lespost.report.figures import FigureFile
from lespost.report.results import Results

#: Names of the regimes and layers as a reader sees them.
REGIME_WORD = {"shear": "shear", "convective": "convective", "langmuir": "Langmuir", "mixed": "mixed",
               "undetermined": "undetermined"}

#: Numbers shown beside each answer: column of regime.csv, label, unit, factor.
ANSWER_NUMBERS = (("ustar", "friction velocity", "cm s⁻¹", 100.0), ("la_t", "turbulent Langmuir number", "", 1.0),
                  ("wstar", "convective velocity", "cm s⁻¹", 100.0), ("us0", "surface Stokes drift", "cm s⁻¹", 100.0),
                  ("h", "boundary-layer depth", "m", 1.0), ("h_over_l_langmuir", "h/L_L", "", 1.0),
                  ("axis_deg", "cell axis from +x", "°", 1.0))


@dataclass(frozen=True)
class Cell:
    """One cell of a table on the page."""

    text: str
    number: bool


@dataclass(frozen=True)
class Table:
    """A table on the page."""

    caption: str
    heads: list[str]
    rows: list[list[Cell]]


def write_page(results: Results, figures: list[FigureFile]) -> Path:
    """Writes `report.html` into the results folder and returns its path."""
    import jinja2

    environment = jinja2.Environment(
        loader=jinja2.FileSystemLoader(Path(__file__).parent), autoescape=True, trim_blocks=True, lstrip_blocks=True,
        undefined=jinja2.StrictUndefined,
    )
    run = results.run
    findings = run.get("findings", [])
    text = environment.get_template("page.html").render(
        title=run.get("title") or "Large-eddy simulation of the ocean surface boundary layer",
        subtitle=_subtitle(run),
        css=(Path(__file__).parent / "page.css").read_text(encoding="utf-8"),
        answers=_answers(results),
        warnings=[finding for finding in findings if finding["severity"] != "note"],
        findings=sorted(findings, key=lambda finding: ("error", "warning", "note").index(finding["severity"])),
        figures=[_embedded(figure) for figure in figures if figure.section == "evidence"],
        regime_table=frame_table(results.regime, "Regime of each window and depth band (regime.csv)"),
        comparison=_comparison(results, figures),
        decision_table=_decision_table(run),
        provenance_table=_provenance_table(run),
        cautions=run.get("cautions", []),
        recipe=json.dumps(run.get("recipe", {}), indent=2, ensure_ascii=False),
        version=run.get("versions", {}).get("lespost", ""),
    )
    path = results.folder / "report.html"
    temporary = results.folder / ".report.part.html"
    temporary.write_text(text, encoding="utf-8")
    temporary.replace(path)
    return path


def number_text(value: Any, digits: int = 3) -> str:
    """A number with `digits` significant digits; empty for what is not known."""
    if value is None or pd.isna(value):
        return ""
    number = float(value)
    if number == 0 or 1e-3 <= abs(number) < 1e5:
        text = f"{number:.{digits}g}" if abs(number) < 10**digits else f"{number:.0f}"
        return text.replace("-", "−")
    mantissa, exponent = f"{number:.{digits - 1}e}".split("e")
    return f"{mantissa}·10^{int(exponent)}".replace("-", "−")


def probability_text(probability: Any) -> str:
    """A bootstrap probability for reading: never 1, which no finite number of replicates shows; empty if unknown."""
    if probability is None or pd.isna(probability):
        return ""
    return "above 0.999" if float(probability) > 0.999 else f"{float(probability):.3g}"


def frame_table(frame: pd.DataFrame, caption: str) -> Table:
    """A data frame as a table of the page; numbers are rounded for reading, the files keep all digits."""
    rows = []
    for record in frame.itertuples(index=False):
        cells = []
        for value in record:
            numeric = isinstance(value, int | float) and not isinstance(value, bool)
            cells.append(Cell(number_text(value) if numeric else ("" if pd.isna(value) else str(value)), numeric))
        rows.append(cells)
    return Table(caption, [str(name).replace("_", " ") for name in frame.columns], rows)


def _text_table(caption: str, heads: list[str], rows: list[list[str]]) -> Table:
    return Table(caption, heads, [[Cell(text, False) for text in row] for row in rows])


def _subtitle(run: dict[str, Any]) -> str:
    paths = run.get("input", {}).get("paths", [])
    names = ", ".join(Path(path).name for path in paths[:4]) + (" …" if len(paths) > 4 else "")
    return f"{names}; made {run.get('created', '')}"


def _answers(results: Results) -> list[dict[str, Any]]:
    answers = []
    for window, rows in results.regime.groupby("window", sort=False):
        first = rows.iloc[0]
        regime = str(first["regime"])
        probability = first.get(f"p_{regime}") if f"p_{regime}" in rows else None
        why = [f"Shares of velocity variance: along {_percent(first['fraction_along'])}, cross "
               f"{_percent(first['fraction_cross'])}, vertical {_percent(first['fraction_vertical'])} "
               f"({first['axis_kind']} axes)."]
        if isinstance(first.get("agreement"), str):
            why.append(f"Witnesses: {first['agreement']}.")
        if isinstance(first.get("note"), str):
            why.append(f"{first['note'][:1].upper()}{first['note'][1:].rstrip('.')}.")
        below = [f"{-row['z_top']:.0f}–{-row['z_bottom']:.0f} m {REGIME_WORD.get(row['regime'], row['regime'])}"
                 for _, row in rows.iloc[1:].iterrows()]
        if below:
            why.append("Other bands: " + "; ".join(below) + ".")
        answers.append({
            "window": f"{window} ({first['t_start'] / 3600:.2f}–{first['t_end'] / 3600:.2f} h)",
            "layer": f"{-first['z_top']:.1f}–{-first['z_bottom']:.1f} m",
            "regime": REGIME_WORD.get(regime, regime),
            "colour": style.REGIME_COLOUR.get(regime, "#767676"),
            "probability": probability_text(probability),
            "why": " ".join(why),
            "numbers": [{"label": label, "text": f"{number_text(first[column] * factor)} {unit}".strip()}
                        for column, label, unit, factor in ANSWER_NUMBERS
                        if column in rows and pd.notna(first[column])],
        })
    return answers


def _percent(share: Any) -> str:
    return "unknown" if pd.isna(share) else f"{100 * float(share):.0f} %"


def _comparison(results: Results, figures: list[FigureFile]) -> dict[str, Any] | None:
    table = results.comparison
    if table is None:
        return None
    counts = table["verdict"].value_counts()
    summary = ", ".join(f"{counts.get(verdict, 0)} {verdict}" for verdict in ("agrees", "differs", "cannot tell"))
    pairs = table[["instrument", "record"]].drop_duplicates()
    several = [] if len(pairs) == 1 else ["instrument", "record"]
    columns = [*several, "quantity", "units", "depth", "record_value", "record_se", "model_value",
               "model_se", "ratio", "ratio_low", "ratio_high", "p_adjusted", "verdict", "note"]
    return {
        "summary": f"Of {len(table)} claims: {summary}. Both sides went through the same processing; intervals are "
                   "95 %, and p values are adjusted for the number of claims.",
        "figures": [_embedded(figure) for figure in figures if figure.section == "comparison"],
        "table": frame_table(table[[column for column in columns if column in table]],
                             "Comparison (comparison.csv holds every column)"),
    }


def _decision_table(run: dict[str, Any]) -> Table:
    rows = [[item["subject"], item["choice"], item["how"], item["evidence"]] for item in run.get("decisions", [])]
    return _text_table("Layout, conventions and sources of numbers", ["subject", "choice", "how", "evidence"], rows)


def _provenance_table(run: dict[str, Any]) -> Table:
    rows = [[name, str(number)] for name, number in run.get("versions", {}).items()]
    rows += [["recipe file", str(run.get("recipe_path", ""))], ["made", str(run.get("created", ""))]]
    rows += [["input", str(path)] for path in run.get("input", {}).get("paths", [])]
    rows += [["input fingerprint", str(run.get("input", {}).get("fingerprint", ""))]]
    rows += [[f"time for {name}", f"{seconds:.2f} s"] for name, seconds in run.get("timings", {}).items()]
    return _text_table("Software, input and timings", ["what", "value"], rows)


def _embedded(figure: FigureFile) -> dict[str, Any]:
    svg = figure.paths[0]
    png = figure.paths[1]
    # A vector figure that carries an image is heavier than its bitmap: embed whichever is smaller.
    chosen, kind = (svg, "image/svg+xml") if svg.stat().st_size <= png.stat().st_size else (png, "image/png")
    source = f"data:{kind};base64,{base64.b64encode(chosen.read_bytes()).decode('ascii')}"
    return {"source": source, "alt": figure.alt, "title": figure.title, "caption": figure.caption,
            "width": int(figure.width_inch * 140)}

"""The comparison table for a manuscript: a booktabs table, one line per row, numbers to the digits their
errors allow."""

from __future__ import annotations

import math
import os
from pathlib import Path

import pandas as pd

_ESCAPES = {
    "\\": r"\textbackslash{}", "&": r"\&", "%": r"\%", "$": r"\$", "#": r"\#", "_": r"\_", "{": r"\{", "}": r"\}",
    "~": r"\textasciitilde{}", "^": r"\textasciicircum{}",
}  # fmt: skip

#: How a quantity is written in mathematics.
SYMBOLS = {
    "u_mean": r"$\overline{u}$",
    "v_mean": r"$\overline{v}$",
    "w_mean": r"$\overline{w}$",
    "speed": r"$\overline{|\mathbf{u}_h|}$",
    "temperature_mean": r"$\overline{\theta}$",
    "uu": r"$\overline{u'u'}$",
    "vv": r"$\overline{v'v'}$",
    "ww": r"$\overline{w'w'}$",
    "uv": r"$\overline{u'v'}$",
    "uw": r"$\overline{u'w'}$",
    "vw": r"$\overline{v'w'}$",
    "tke": r"$\frac{1}{2}\overline{u_i'u_i'}$",
    "error_velocity_variance": r"$\overline{e'e'}$",
    "temperature_variance": r"$\overline{\theta'\theta'}$",
}


def escape(text: str) -> str:
    """Text with the characters that LaTeX reserves made literal."""
    return "".join(_ESCAPES.get(c, c) for c in text)


def unit_text(units: str) -> str:
    """A unit such as "m2 s-2" in upright type with raised powers."""
    words = []
    for word in units.split():
        base = word.rstrip("0123456789-")
        power = word[len(base) :]
        words.append(rf"\mathrm{{{base}}}" + (f"^{{{power}}}" if power else ""))
    return "$" + r"\,".join(words) + "$" if words else ""


def with_error(value: float, error: float) -> str:
    """A number with its standard error, both to two digits of the error: 1.234e-4 +- 5.6e-6 becomes (1.234 +-
    0.056) x 10^-4."""
    if not math.isfinite(value):
        return ""
    if not math.isfinite(error) or error <= 0:
        return f"${value:.3g}$" if "e" not in f"{value:.3g}" else _scientific(value)
    scale = math.floor(math.log10(max(abs(value), error)))
    digits = min(max(scale - math.floor(math.log10(error)) + 1, 0), 8)
    if -2 <= scale <= 3:
        places = max(digits - scale, 0)
        return f"${value:.{places}f} \\pm {error:.{places}f}$"
    return (
        f"$({value / 10.0**scale:.{digits}f} \\pm {error / 10.0**scale:.{digits}f}) \\times 10^{{{scale}}}$"
    )


def _scientific(value: float) -> str:
    mantissa, exponent = f"{value:.2e}".split("e")
    return f"${mantissa} \\times 10^{{{int(exponent)}}}$"


def to_latex(table: pd.DataFrame) -> str:
    """The table as LaTeX text (needs the package booktabs); an empty table gives an empty body."""
    lines = [
        "% needs \\usepackage{booktabs}",
        r"\begin{tabular}{lllrlllll}",
        r"\toprule",
        r"record & instrument & quantity & depth (m) & window & record value & model value & ratio & verdict \\",
        r"\midrule",
    ]
    for _, row in table.iterrows():
        ratio = ""
        if math.isfinite(float(row["ratio"])):
            ratio = f"${row['ratio']:.2f}$ [${row['ratio_low']:.2f}$, ${row['ratio_high']:.2f}$]"
        quantity = SYMBOLS.get(str(row["quantity"]), escape(str(row["quantity"])))
        cells = [
            escape(str(row["record"])),
            escape(str(row["instrument"])),
            f"{quantity} ({unit_text(str(row['units']))})",
            f"{row['depth']:.2f}",
            escape(str(row["window"])),
            with_error(float(row["record_value"]), float(row["record_se"])),
            with_error(float(row["model_value"]), float(row["model_se"])),
            ratio,
            escape(str(row["verdict"])),
        ]
        lines.append(" & ".join(cells) + r" \\")
    lines += [r"\bottomrule", r"\end{tabular}", ""]
    return "\n".join(lines)


def write_latex(table: pd.DataFrame, path: Path) -> Path:
    """Write the table as LaTeX, atomically; returns the path."""
    path = Path(path)
    partial = path.with_name(path.name + ".part")
    partial.write_text(to_latex(table), encoding="utf-8")
    os.replace(partial, path)
    return path

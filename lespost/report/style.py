"""How every figure looks: one style, one palette, widths of journal columns, deterministic files.

The palette is the eight-colour set of Wong (2011, Nature Methods 8, 441), which readers with colour-vision deficiencies
can tell apart; each series also differs in dash or marker, so that a figure survives grey printing. Images use
perceptually uniform maps of cmocean (Thyng et al. 2016, Oceanography 29, 9).
"""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import matplotlib

matplotlib.use("Agg")  # never a window: figures are made in batch jobs without a display

import matplotlib.pyplot as plt
from matplotlib.figure import Figure

#: Width of one and of two journal columns [inch].
ONE_COLUMN, TWO_COLUMNS = 3.5, 7.2

COMPONENT_COLOUR = {"along": "#0072B2", "cross": "#D55E00", "vertical": "#009E73"}
COMPONENT_DASH: dict[str, Any] = {"along": "-", "cross": (0, (5, 1.5)), "vertical": (0, (1.2, 1.2))}

REGIME_COLOUR = {"shear": "#0072B2", "convective": "#D55E00", "langmuir": "#009E73", "mixed": "#CC79A7",
                 "undetermined": "#767676"}
REGIME_MARKER = {"shear": "s", "convective": "^", "langmuir": "o", "mixed": "D", "undetermined": "X"}

VERDICT_COLOUR = {"agrees": "#009E73", "differs": "#D55E00", "cannot tell": "#767676"}
VERDICT_MARKER = {"agrees": "o", "differs": "X", "cannot tell": "D"}

#: Line dashes for successive windows, and colours where the component does not set them.
SEQUENCE = ("#000000", "#0072B2", "#D55E00", "#009E73", "#CC79A7", "#E69F00", "#56B4E9")

_SETTINGS: dict[Any, Any] = {
    "font.family": "sans-serif",
    "font.sans-serif": ["DejaVu Sans"],
    "font.size": 8,
    "axes.labelsize": 8,
    "axes.titlesize": 8.5,
    "axes.titlelocation": "left",
    "axes.linewidth": 0.6,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "xtick.labelsize": 7,
    "ytick.labelsize": 7,
    "xtick.major.width": 0.6,
    "ytick.major.width": 0.6,
    "legend.fontsize": 7,
    "legend.frameon": False,
    "lines.linewidth": 1.3,
    "lines.markersize": 4,
    "figure.constrained_layout.use": True,
    "savefig.dpi": 300,
    "pdf.fonttype": 42,
    "ps.fonttype": 42,
    "svg.fonttype": "path",
    "svg.hashsalt": "lespost",
    "path.simplify": True,
}


@contextmanager
def house_style() -> Iterator[None]:
    """Within it, figures take the house style whatever the user's own matplotlib settings are."""
    with plt.rc_context():
        matplotlib.rcdefaults()
        matplotlib.use("Agg")
        plt.rcParams.update(_SETTINGS)
        yield


def save(figure: Figure, folder: Path, name: str) -> list[Path]:
    """Writes `figure` as folder/name.svg and .png (300 dpi) without dates, so that equal data make equal files."""
    paths = []
    for suffix, metadata in ((".svg", {"Date": None, "Creator": None}), (".png", {"Software": None})):
        path = folder / f"{name}{suffix}"
        temporary = folder / f".{name}.part{suffix}"
        figure.savefig(temporary, metadata=metadata)
        temporary.replace(path)
        paths.append(path)
    plt.close(figure)
    return paths


def colour_map(name: str) -> Any:
    """The cmocean map called `name`, e.g. "balance" for signed and "deep" for depth."""
    import warnings

    with warnings.catch_warnings():
        # cmocean builds its maps with an argument that newer matplotlib deprecates; the maps are the same.
        warnings.simplefilter("ignore", DeprecationWarning)
        import cmocean
    return getattr(cmocean.cm, name)

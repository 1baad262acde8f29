"""One style for every figure: colours, dashes and matplotlib settings, applied only while a figure is made.

The colours were chosen for contrast with white (4.5 to 1 and more, so that labels in them can be read) and for
distance from one another as seen with normal sight and with each of the three kinds of colour blindness; they
also differ in grey. Tests measure all of it. A line is never told by colour alone: each has a dash and a label.
"""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from typing import Any

INK = "#11183c"
COLOURS = {
    "target": INK,
    "bottomhole": "#cf4b0e",
    "sandface": "#4a7a86",
    "rate": "#6a3fc0",
    "limit": "#7a1030",
}
GREY = "#595f6b"
GRID = "#dfe2e7"
BACK_FLOW = "#efe3c4"  # fill under the hatching, where the rate is below zero

DASHES: dict[str, Any] = {
    "target": "-",
    "bottomhole": (0, (5, 1.6)),
    "sandface": (0, (1.2, 1.4)),
    "rate": "-",
    "planned": (0, (4, 2)),
    "limit": (0, (7, 2, 1.4, 2)),
}

WIDTH = 7.2  # inches: the text width of an A4 page with margins

_SETTINGS: dict[str, Any] = {
    "font.family": "DejaVu Sans",  # comes with matplotlib, and has every sign used here
    "font.size": 8.5,
    "axes.titlesize": 9.5,
    "axes.titleweight": "bold",
    "axes.titlelocation": "left",
    "axes.labelsize": 8.5,
    "axes.labelcolor": INK,
    "axes.edgecolor": GREY,
    "axes.linewidth": 0.7,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.grid": True,
    "axes.axisbelow": True,
    "axes.formatter.useoffset": False,
    "axes.formatter.limits": (-9, 12),
    "axes.formatter.use_mathtext": False,
    "axes.xmargin": 0.0,
    "axes.ymargin": 0.06,
    "grid.color": GRID,
    "grid.linewidth": 0.6,
    "grid.linestyle": "-",
    "lines.linewidth": 1.6,
    "lines.solid_capstyle": "butt",
    "lines.dash_capstyle": "butt",
    "patch.linewidth": 0.6,
    "hatch.linewidth": 0.5,
    "xtick.labelsize": 8,
    "ytick.labelsize": 8,
    "xtick.color": GREY,
    "ytick.color": GREY,
    "xtick.labelcolor": INK,
    "ytick.labelcolor": INK,
    "text.color": INK,
    "legend.frameon": False,
    "legend.fontsize": 8,
    "figure.dpi": 110,
    "figure.facecolor": "white",
    "figure.constrained_layout.use": True,
    "savefig.dpi": 180,
    "savefig.facecolor": "white",
    "svg.fonttype": "path",  # looks the same without our font installed
    "svg.hashsalt": "flatplan",  # the same figure gives the same file
    "path.simplify": True,
}


@contextmanager
def house_style() -> Iterator[None]:
    """Within this context figures are made in the style; everything is as it was afterwards."""
    import matplotlib as mpl

    # matplotlib types the keys one by one; a plain dictionary is as good
    settings: Any = _SETTINGS
    with mpl.rc_context(settings):
        yield

"""A plan's series term by term: how the terms fall, where the series was cut, and what is left out.

Loaded only when something is drawn, because it imports matplotlib.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter, LogLocator, MaxNLocator

from flatplan.flat.terms import Terms
from flatplan.show.axes import plain_ticks
from flatplan.show.figure import panels
from flatplan.show.numbers import power_of_ten, significant
from flatplan.show.style import COLOURS, DASHES, GREY, INK

_BELOW, _FURTHEST = 1e-4, 1e-16  # the axis ends so far under the tolerance, or under what is left out, down to the second
# Shares of the axis: the fall to the cut, the terms and the tolerance stay within, so that the words find room beyond.
_CUT_WITHIN, _TERMS_WITHIN, _TOLERANCE_WITHIN = 0.72, 0.88, 0.62
_MOST_MARKERS = 90


def plot_terms(terms: Terms, axes: Any) -> Figure:
    """Size, bound and running tail of every term over the peak of the channel, on a logarithmic axis."""
    figure, (panel,) = panels(axes, (1.0,), 3.4)
    peak = terms.peak or 1.0
    k = terms.order
    size, bound, tail = (np.where((v > 0.0) & np.isfinite(v), v / peak, np.nan) for v in (terms.size, terms.bound, terms.tail))
    _scale(panel, terms, [size, bound, tail])
    panel.plot(k, tail, color=COLOURS["bottomhole"], linestyle=DASHES["bottomhole"], label="bound on all later terms together", zorder=4)
    panel.plot(k, bound, color=COLOURS["sandface"], linestyle="-", linewidth=1.2, label="bound on the term", zorder=3)
    panel.plot(
        k, size, linestyle="none", marker="o", markersize=4.2 if k.size <= 40 else 3.0, markevery=-(-k.size // _MOST_MARKERS),
        markerfacecolor="white", markeredgecolor=INK, markeredgewidth=1.0, label="largest size of the term", zorder=5,
    )  # fmt: skip
    _tolerance_line(panel, terms)
    _cut_line(panel, terms)
    handles, labels = panel.get_legend_handles_labels()
    panel.legend(handles[::-1], labels[::-1], loc="upper right", ncols=3, handlelength=2.8, columnspacing=1.6, borderaxespad=0.0)
    return figure


def _scale(axes: Axes, terms: Terms, curves: list[np.ndarray]) -> None:
    """Decades from a little under the tolerance to the largest value; terms until the last one that shows."""
    peak = terms.peak or 1.0
    share = terms.left_out / peak
    floor = max(_BELOW * min(terms.tolerance, share or terms.tolerance), _FURTHEST * terms.tolerance)
    ceiling = max(1.0, *(float(np.nanmax(curve, initial=0.0)) for curve in curves))
    up = max(np.log(ceiling / floor) / _TERMS_WITHIN, np.log(terms.tolerance / floor) / _TOLERANCE_WITHIN)
    axes.set_yscale("log")
    axes.set_ylim(floor, floor * np.exp(up))
    # a line is followed to where it leaves the axis
    showing = np.flatnonzero(np.any([curve >= floor for curve in curves], axis=0))
    low, cut = -0.4, terms.cut + 0.5
    last = min(int(showing.max(initial=0)) + 1, int(terms.order[-1]))
    axes.set_xlim(low, max(last + 0.4, low + (cut - low) / _CUT_WITHIN))
    axes.yaxis.set_major_locator(LogLocator(base=10.0, numticks=8))
    axes.yaxis.set_major_formatter(FuncFormatter(lambda value, _: power_of_ten(value)))
    axes.yaxis.minorticks_off()
    axes.xaxis.set_major_locator(MaxNLocator(nbins=9, steps=[1, 2, 5, 10], integer=True))
    plain_ticks(axes.xaxis)
    axes.set_xlabel("term k")
    axes.set_ylabel(f"size over the peak\n{terms.words} [-]")


def _tolerance_line(axes: Axes, terms: Terms) -> None:
    axes.axhline(terms.tolerance, color=COLOURS["limit"], linestyle=DASHES["limit"], linewidth=1.3, zorder=2)
    # behind the cut everything is below the tolerance, so that nothing but words stands above it there
    axes.annotate(
        f"tolerance {significant(terms.tolerance, 2)}", (1.0, terms.tolerance), xycoords=("axes fraction", "data"),
        xytext=(-4.0, 2.5), textcoords="offset points", ha="right", va="bottom", color=COLOURS["limit"], fontsize="small",
    )  # fmt: skip


def _cut_line(axes: Axes, terms: Terms) -> None:
    """An upright line behind the last term used, with what is left out beside it."""
    at = terms.cut + 0.5
    axes.axvline(at, ymax=_TERMS_WITHIN, color=GREY, linestyle=DASHES["planned"], linewidth=1.2, zorder=2)
    share = terms.left_out / (terms.peak or 1.0)
    left_out = f"left out: at most\n{significant(share, 2)} of the peak" if share else "nothing is left out"
    axes.annotate(
        f"last term used: k = {terms.cut}\n{left_out}", (at, _TERMS_WITHIN), xycoords=("data", "axes fraction"),
        xytext=(5.0, 0.0), textcoords="offset points", ha="left", va="top", color=INK, fontsize="small",
    )  # fmt: skip

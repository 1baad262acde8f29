"""What every panel shares: a time axis, an axis with a unit, labels beside the lines, limits, back-flow.

Loaded only when something is drawn, because it imports matplotlib.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.ticker import MaxNLocator, MultipleLocator, ScalarFormatter

from flatplan.show.numbers import reading_unit, significant, time_unit
from flatplan.show.style import BACK_FLOW, COLOURS, DASHES, GREY, INK

_HOURS = (1, 2, 3, 6, 12, 24)
_MOST_TICKS = 9
# where a limit's name may stand on its line, the first that is free: (place as a share of the axis, shift in points)
_SIDES = {"right": (1.0, -4.0), "left": (0.0, 4.0), "center": (0.5, 0.0)}
_TOO_THIN = 0.004  # of the axis: about a line's width
_BEHIND_TEXT = {"facecolor": "white", "edgecolor": "none", "pad": 0.8, "alpha": 0.85}


@dataclass(frozen=True)
class EndLabel:
    """A line's name, to be written at its right end."""

    text: str
    x: float
    y: float
    colour: str


@dataclass(frozen=True)
class Curve:
    """Points of a drawn line in axis units, for what must keep clear of them."""

    x: np.ndarray
    y: np.ndarray
    filled: bool = False


def plain_ticks(axis: Any) -> None:
    """Numbers in full, without an offset or a power of ten at the end of the axis."""
    formatter = ScalarFormatter(useOffset=False, useMathText=False)
    formatter.set_scientific(False)
    axis.set_major_formatter(formatter)


def time_axis(axes: Axes, start: float, end: float, word: str = "time since start") -> float:
    """Set up a time axis from ``start`` to ``end`` [s]; returns the seconds in one unit of it."""
    unit, label = time_unit(end - start)
    axes.set_xlim(start / unit, end / unit)
    axes.set_xlabel(f"{word} [{label}]")
    span = (end - start) / unit
    if label == "h":
        step = next((h for h in _HOURS if span / h <= _MOST_TICKS), 24)
        axes.xaxis.set_major_locator(MultipleLocator(step))
    else:
        axes.xaxis.set_major_locator(MaxNLocator(nbins=_MOST_TICKS, steps=[1, 2, 5, 10]))
    plain_ticks(axes.xaxis)
    return unit


def value_axis(axes: Axes, words: str, kind: str, system: str) -> float:
    """Label a vertical axis with its unit; returns the SI units in one unit of it."""
    factor, label = reading_unit(kind, system)
    axes.set_ylabel(f"{words} [{label or '-'}]")
    axes.yaxis.set_major_locator(MaxNLocator(nbins=7, steps=[1, 2, 2.5, 5, 10]))
    plain_ticks(axes.yaxis)
    return factor


def room_for(axes: Axes, values: Sequence[np.ndarray], limits: Sequence[float] = ()) -> tuple[float, float]:
    """Set the vertical range to all values and to the limits that are near enough to show; returns the range of the values.

    A limit further off than the values themselves span would squash them into a strip; it is named at the edge instead.
    """
    low = min(float(np.min(v)) for v in values)
    high = max(float(np.max(v)) for v in values)
    span = high - low
    if span <= 1e-9 * max(abs(low), abs(high)):
        span = max(abs(high), 1.0) * 0.02
    near = [limit for limit in limits if low - 1.2 * span <= limit <= high + 1.2 * span]
    bottom, top = min([low, *near]), max([high, *near])
    pad = 0.07 * max(top - bottom, span)
    # a limit at the edge, or beyond it, needs room for its name
    below = any(limit < bottom + pad for limit in limits)
    above = any(limit > top - pad for limit in limits)
    axes.set_ylim(bottom - pad * (1.8 if below else 1.0), top + pad * (1.8 if above else 1.0))
    return low, high


def limit_line(axes: Axes, limit: float, words: str, unit: str, above: bool, curves: Sequence[Curve] = ()) -> None:
    """Draw a limit with its name and number; one that is off the axis is named at the edge it lies beyond.

    The name stands at the right end of the line, at its left or in its middle, wherever the fewest points of the curves lie.
    """
    low, high = axes.get_ylim()
    text = f"{words} {significant(limit)} {unit}".strip()
    inside = low <= limit <= high
    upwards = above if inside else limit < low
    if inside:
        axes.axhline(limit, color=COLOURS["limit"], linestyle=DASHES["limit"], linewidth=1.3, zorder=3)
    else:
        text = f"{'▲' if limit > high else '▼'} {text}, off this axis"
    at = min(max(limit, low), high)
    side = min(_SIDES, key=lambda name: _crowd(axes, curves, at, upwards, *_reach(axes, text, name)))
    x, shift = _SIDES[side]
    axes.annotate(
        text, (x, at), xycoords=("axes fraction", "data"), xytext=(shift, 2.5 if upwards else -3.5), textcoords="offset points",
        ha=side, va="bottom" if upwards else "top", color=COLOURS["limit"], fontsize="small", bbox=_BEHIND_TEXT, zorder=6,
    )  # fmt: skip


def _reach(axes: Axes, text: str, side: str) -> tuple[float, float]:
    """The part of the axis, as shares of its length, that words at a side take up (a letter is about 4.8 points wide)."""
    share = min((4.8 * len(text) + 8.0) * axes.figure.dpi / 72.0 / axes.get_window_extent().width, 1.0)
    middle = {"right": 1.0 - 0.5 * share, "left": 0.5 * share, "center": 0.5}[side]
    return middle - 0.5 * share, middle + 0.5 * share


def _crowd(axes: Axes, curves: Sequence[Curve], at: float, upwards: bool, first: float, last: float) -> float:
    """Share of the points of the curves that lie where a limit's name would stand, from ``first`` to ``last`` of the axis."""
    if axes.get_yscale() != "linear":
        return 0.0
    low, high = axes.get_ylim()
    start, end = axes.get_xlim()
    tall = 0.11 * (high - low)
    # a curve that only touches the limit is no neighbour
    bottom, top = (at + 0.1 * tall, at + tall) if upwards else (at - tall, at - 0.1 * tall)
    found = 0.0
    for curve in curves:
        place = (curve.x - start) / (end - start)
        # a filled area reaches from the curve to zero where the rate is below it
        most = np.where(curve.y < 0.0, 0.0, curve.y) if curve.filled else curve.y
        within = (place >= first) & (place <= last) & (most >= bottom) & (curve.y <= top)
        found += float(np.mean(within)) if curve.x.size else 0.0
    return found


def back_flow(axes: Axes, times: np.ndarray, rates: np.ndarray, floor: float, limits: Sequence[float] = ()) -> list[Curve]:
    """The zero line, and hatching with a name where the rate is below zero by more than ``floor``.

    Returns where the name stands, so that other words keep clear of it.
    """
    axes.axhline(0.0, color=GREY, linewidth=0.9, zorder=2)
    below = rates < -abs(floor)
    if not np.any(below):
        return []
    axes.fill_between(
        times, 0.0, np.minimum(rates, 0.0), where=below, facecolor=BACK_FLOW, edgecolor=GREY, hatch="////", linewidth=0.0, zorder=1
    )
    low, high = axes.get_ylim()
    deepest = int(np.argmin(rates))
    if -rates[deepest] < _TOO_THIN * (high - low):
        return []  # a name without anything to be seen would puzzle; the verdict and the report state the amount
    when, depth = _middle(times, rates, below, deepest)
    # the name stands inside where the area is deep enough to hold it, else below it, where room is made
    inside = -depth > 0.16 * (high - low)
    if not inside:
        axes.set_ylim(min(low, depth - 0.12 * (high - low)), high)
    away = max((0.45, 0.3, 0.6, 0.72), key=lambda share: min((abs(share * depth - limit) for limit in limits), default=0.0))
    place = away * depth if inside else depth - 0.05 * (high - low)
    axes.annotate("back-flow", (when, place), ha="center", va="center", fontsize="small", color=INK, zorder=6, bbox=_BEHIND_TEXT)
    span = float(times[-1] - times[0])
    return [Curve(np.linspace(when - 0.06 * span, when + 0.06 * span, 9), np.full(9, place))]


def _middle(times: np.ndarray, rates: np.ndarray, below: np.ndarray, deepest: int) -> tuple[float, float]:
    """(time, rate) at the centre of the stretch of back-flow that holds the deepest point."""
    breaks = np.flatnonzero(~below)
    first = int(breaks[breaks < deepest].max(initial=-1)) + 1
    last = int(breaks[breaks > deepest].min(initial=len(rates)))
    part, depth = times[first:last], -rates[first:last]
    volumes = 0.5 * (depth[1:] + depth[:-1]) * np.diff(part)
    middles = 0.5 * (part[1:] + part[:-1])
    when = float(middles @ volumes / volumes.sum()) if volumes.sum() > 0.0 else float(times[deepest])
    return when, float(np.interp(when, part, -depth))


def rate_limits(axes: Axes, stated: dict[str, float], factor: float, system: str, curves: Sequence[Curve]) -> None:
    """The limits of the injection rate that are stated."""
    for name, above, words in (("max_rate", True, "largest allowed rate"), ("min_rate", False, "smallest allowed rate")):
        if name in stated:
            limit_line(axes, stated[name] / factor, words, reading_unit("rate", system)[1], above, curves)


def spread_out(wanted: Sequence[float], gap: float, low: float = 0.0, high: float = 1.0) -> list[float]:
    """Positions as near as possible (least squares) to those wanted, at least ``gap`` apart, within bounds; order kept.

    >>> [round(v, 3) for v in spread_out([0.5, 0.5, 0.9], 0.1)]
    [0.45, 0.55, 0.9]
    """
    order = np.argsort(wanted, kind="stable")
    gap = min(gap, (high - low) / max(len(order) - 1, 1))
    # without the gaps this is the nearest increasing sequence: pool neighbours that are out of order
    blocks: list[list[float]] = []
    for i, at in enumerate(order):
        blocks.append([wanted[at] - i * gap, 1.0])
        while len(blocks) > 1 and blocks[-2][0] > blocks[-1][0]:
            mean, count = blocks.pop()
            blocks[-1] = [(blocks[-1][0] * blocks[-1][1] + mean * count) / (blocks[-1][1] + count), blocks[-1][1] + count]
    level = np.repeat([b[0] for b in blocks], [int(b[1]) for b in blocks])
    level = np.clip(level, low, high - (len(order) - 1) * gap) + np.arange(len(order)) * gap
    out = np.empty(len(order))
    out[order] = level
    return [float(v) for v in out]


def end_labels(axes: Axes, labels: Sequence[EndLabel]) -> None:
    """Write each line's name beside its right end, moved apart where they would overlap, with a thin leader."""
    if not labels:
        return
    low, high = axes.get_ylim()
    points = axes.get_window_extent().height * 72.0 / axes.figure.dpi
    places = spread_out([(label.y - low) / (high - low) for label in labels], 12.0 / max(points, 40.0), 0.03, 0.97)
    for label, place in zip(labels, places, strict=True):
        axes.annotate(
            label.text, (label.x, label.y), xycoords="data", xytext=(1.035, place), textcoords="axes fraction", ha="left", va="center",
            color=label.colour, fontsize="small", annotation_clip=False,
            arrowprops={"arrowstyle": "-", "color": label.colour, "linewidth": 0.7, "shrinkA": 1.0, "shrinkB": 0.0, "relpos": (0.0, 0.5)},
        )  # fmt: skip

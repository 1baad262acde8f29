"""Timing by turns, and the table that every subject adds its rows to."""

from __future__ import annotations

import gc
import math
import statistics
import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

EXTRAPOLATED = "≈"  # marks a figure that was not measured in full
_SLOW = 0.1  # seconds from which a first call counts like any other


@dataclass(frozen=True)
class Row:
    """One line of the table.

    Attributes
    ----------
    what : str
        What of ours is measured, and on which job.
    against : str
        What it is compared with.
    ours, other : str
        The two figures, as printed.
    ratio : str
        Their ratio, as printed.
    agreement : str
        Largest difference of the results, relative to the peak; "" where there is none to state.
    aim : str
        The figure aimed at; "" for information only.
    reached : bool or None
        Whether the aim is reached.
    """

    what: str
    against: str
    ours: str
    other: str
    ratio: str
    agreement: str = ""
    aim: str = ""
    reached: bool | None = None


def by_turns(sides: Sequence[Callable[[], object]], repeats: int, budget: float = 30.0, shortest: float = 5e-3) -> list[float]:
    """Median seconds of each side, the sides taking turns.

    Parameters
    ----------
    sides : sequence of callable
        Each does its whole job once per call.
    repeats : int
        Turns; fewer where they would take longer than ``budget``, but at least one.
    budget : float
        Processor seconds for all turns together.
    shortest : float
        A side that is quicker than this is called several times per turn [s].

    Returns
    -------
    list of float
        Processor seconds per call.
    """
    first = [_turn(side, 1) for side in sides]  # warms caches, which matters where little time is spent
    calls = [max(1, math.ceil(shortest / max(seconds, 1e-9))) for seconds in first]
    cost = sum(max(seconds, shortest) for seconds in first)
    turns = min(repeats, int(budget / cost))
    if turns < 1:
        return first
    found: list[list[float]] = [[seconds] if seconds > _SLOW else [] for seconds in first]
    for _ in range(turns):
        for seconds, side, count in zip(found, sides, calls, strict=True):
            seconds.append(_turn(side, count))
    return [statistics.median(seconds) for seconds in found]


def _turn(side: Callable[[], object], calls: int) -> float:
    gc.collect()
    begin = time.process_time()
    for _ in range(calls):
        side()
    return (time.process_time() - begin) / calls


def exponent(sizes: Sequence[float], seconds: Sequence[float]) -> float:
    """Slope of ``log(seconds)`` over ``log(sizes)``, least squares."""
    return float(np.polyfit(np.log(sizes), np.log(seconds), 1)[0])


def duration(seconds: float) -> str:
    """Seconds in words."""
    for size, unit in ((1e-3, "µs"), (1.0, "ms"), (120.0, "s"), (7200.0, "min"), (172800.0, "h")):
        if seconds < size:
            return f"{seconds / {'µs': 1e-6, 'ms': 1e-3, 's': 1.0, 'min': 60.0, 'h': 3600.0}[unit]:.3g} {unit}"
    return f"{seconds / 86400.0:.3g} d"


def plain(value: float) -> str:
    """Three digits, thousands apart, no exponent below a billion."""
    if value >= 1e9:
        return f"{value:.1e}"
    return f"{value:,.0f}" if value >= 100.0 else f"{value:.3g}"


def faster(
    what: str,
    against: str,
    ours: float,
    other: float,
    *,
    agreement: float | None = None,
    least: float | None = None,
    extrapolated: bool = False,
) -> Row:
    """A row that says how many times faster ours is than the other (seconds each)."""
    mark = EXTRAPOLATED if extrapolated else ""
    ratio = other / ours
    return Row(
        what,
        against,
        duration(ours),
        mark + duration(other),
        f"{mark}{plain(ratio)} × faster",
        "" if agreement is None else f"{agreement:.0e}",
        "" if least is None else f"≥ {plain(least)} × faster",
        None if least is None else ratio >= least,
    )


def at_most(what: str, against: str, ours: float, other: float, most: float | None, *, agreement: float | None = None) -> Row:
    """A row that says how many times as long ours takes as the other (seconds each)."""
    ratio = ours / other
    return Row(
        what,
        against,
        duration(ours),
        duration(other),
        f"{ratio:.2g} × its time",
        "" if agreement is None else f"{agreement:.0e}",
        "" if most is None else f"≤ {most:g} × its time",
        None if most is None else ratio <= most,
    )


def markdown(rows: Sequence[Row]) -> str:
    """The table."""
    head = ("measured", "against", "ours", "theirs", "ratio", "agreement", "aim", "reached")
    lines = ["| " + " | ".join(head) + " |", "|" + "---|" * len(head)]
    for r in rows:
        reached = "" if r.reached is None else ("yes" if r.reached else "**no**")
        lines.append("| " + " | ".join((r.what, r.against, r.ours, r.other, r.ratio, r.agreement, r.aim, reached)) + " |")
    return "\n".join(lines)

"""Largest and smallest value of a channel over a plan, located on the zeros of its derivative.

The derivative of a channel is again a series, so its zeros are found to rounding level by Newton's
method; nothing is read off a grid. The grid only separates one extreme from the next: on every corner it
has several points for each oscillation that the highest derivative used can bring.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from flatplan.flat import Plan

_CANDIDATES = 4  # largest few of the grid's local extremes that are refined
_NEWTON_STEPS = 4  # from the vertex of a parabola on a fine grid: at rounding level after three


@dataclass(frozen=True)
class Extremes:
    """Least and largest value of a function of time, and when.

    Attributes
    ----------
    least, least_at, largest, largest_at : float
        Values in SI, times in seconds.
    """

    least: float
    least_at: float
    largest: float
    largest_at: float

    @property
    def size(self) -> tuple[float, float]:
        """(largest absolute value, when)."""
        if abs(self.least) > abs(self.largest):
            return abs(self.least), self.least_at
        return abs(self.largest), self.largest_at


def time_grid(plan: Plan) -> np.ndarray:
    """Times that separate the extremes of every channel [s]."""
    points = 200 + 6 * plan.certificate.terms
    parts = [plan.knots, np.linspace(0.0, plan.end, 400)]
    for rise in plan.target.rises:
        parts.extend(np.linspace(start, start + rise.width, points) for start, _ in rise.corners)
    return np.unique(np.concatenate(parts))


def extremes(plan: Plan, channel: str, derivative: int = 0) -> Extremes:
    """Extremes over the plan of a channel (pressures: of the change) or of a time derivative of it.

    Parameters
    ----------
    plan : Plan
    channel : str
        A name of `Channels`.
    derivative : int
        Order of the time derivative.

    Returns
    -------
    Extremes
    """
    return all_extremes(plan, ((channel, derivative),))[0]


def all_extremes(plan: Plan, wanted: Sequence[tuple[str, int]]) -> list[Extremes]:
    """`extremes` of several (channel, derivative) pairs, all refined together in a few passes of the series."""
    pairs = list(wanted)
    grid = time_grid(plan)
    values = plan.rows(pairs, grid)
    # every local maximum of ±value worth refining: (row, sign, place on the grid)
    candidates = [(row, sign, at) for row in range(len(pairs)) for sign in (1.0, -1.0) for at in _peaks(sign * values[row])]
    # below this a difference is noise where the function is flat, and the first place it is met counts
    noise = 1e-14 * np.abs(values).max(axis=1)
    best = {(row, sign): _first_largest(sign * values[row], grid, noise[row]) for row in range(len(pairs)) for sign in (1.0, -1.0)}
    if candidates:
        times, refined = _refine(plan, pairs, grid, values, candidates)
        for (row, sign, _), when, value in zip(candidates, times, refined, strict=True):
            if sign * value > best[row, sign][0] + noise[row]:
                best[row, sign] = (sign * float(value), float(when))
    return [
        Extremes(least=-best[row, -1.0][0], least_at=best[row, -1.0][1], largest=best[row, 1.0][0], largest_at=best[row, 1.0][1])
        for row in range(len(pairs))
    ]


def _first_largest(values: np.ndarray, grid: np.ndarray, noise: float) -> tuple[float, float]:
    at = int(np.argmax(values >= values.max() - noise))
    return float(values[at]), float(grid[at])


def _peaks(values: np.ndarray) -> np.ndarray:
    """Places of the largest few local maxima inside the grid."""
    inner = np.flatnonzero((values[1:-1] >= values[:-2]) & (values[1:-1] > values[2:])) + 1
    return inner[np.argsort(values[inner])[::-1][:_CANDIDATES]]


def _refine(plan: Plan, pairs: list, grid: np.ndarray, values: np.ndarray, candidates: list) -> tuple[np.ndarray, np.ndarray]:
    """Newton's method on the zero of the slope from the vertex of a parabola, kept inside its bracket."""
    rows = np.array([row for row, _, _ in candidates])
    at = np.array([place for _, _, place in candidates])
    low, high = grid[at - 1], grid[at + 1]
    y0, y1, y2 = values[rows, at - 1], values[rows, at], values[rows, at + 1]
    left, right = (y1 - y0) / (grid[at] - low), (y2 - y1) / (high - grid[at])
    with np.errstate(divide="ignore", invalid="ignore"):
        vertex = 0.5 * (low + grid[at]) - left * 0.5 * (high - low) / (right - left)
    times = np.clip(np.where(np.isfinite(vertex), vertex, grid[at]), low, high)
    own = np.arange(len(candidates))
    slopes = [(channel, derivative + 1) for channel, derivative in pairs]
    bends = [(channel, derivative + 2) for channel, derivative in pairs]
    for _ in range(_NEWTON_STEPS):
        both = plan.rows(slopes + bends, times)
        slope, bend = both[rows, own], both[rows + len(pairs), own]
        with np.errstate(divide="ignore", invalid="ignore"):
            step = np.where(bend != 0.0, slope / bend, 0.0)
        times = np.clip(times - np.where(np.isfinite(step), step, 0.0), low, high)
    return times, plan.rows(pairs, times)[rows, own]


def bracketed_zeros(function: Callable[[np.ndarray], np.ndarray], low: np.ndarray, high: np.ndarray) -> np.ndarray:
    """A zero of ``function`` in each [low, high] where it changes sign; the middle where it does not.

    All brackets advance together (Chandrupatla's method, as in scipy).
    """
    from scipy.optimize import elementwise

    ends = function(low), function(high)
    crossing = np.flatnonzero(ends[0] * ends[1] < 0.0)
    out = 0.5 * (low + high)
    if crossing.size:
        found = elementwise.find_root(
            lambda t: function(np.atleast_1d(t)), (low[crossing], high[crossing]), tolerances={"xrtol": 1e-14, "fatol": 0.0, "frtol": 0.0}
        )
        out[crossing] = found.x
    return out

"""Targets made of one step shifted along a common clock: every channel is linear in the levels, by one prepared matrix.

The change at the target is ``Σ_j (u_j - u_(j-1)) Φ((t - jδ)/w)`` with the levels ``u_j``, j = 0 … N - 1, ``u_(-1) = 0``; w is a whole
number of spacings δ. A level acts through the difference of two neighbouring steps, which is over after ``w + δ``: the matrices are
banded. The step's answer is computed once, on a grid of 400 points of w, and moved along.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from scipy import sparse

from flatplan.decide.limits import Limits
from flatplan.decide.move_shape import POINTS, coefficients, move_shape
from flatplan.decide.physical import DEMANDS, Demand
from flatplan.flat import Move
from flatplan.flat.rise import Rise
from flatplan.site import Medium

ORDER = 1.83  # of every step: mild derivatives, and a series that falls fast enough
# Spacings for each width; they divide the grid.
RATIOS = (2, 4, 5, 8, 10, 16, 20, 25)
# Heights below this share of the largest are left out.
_NOTHING = 1e-10


@dataclass(frozen=True, eq=False)
class ShiftedSteps:
    """N steps of one width, `ratio` of their spacings long.

    Attributes
    ----------
    medium : Medium
    width : float
        [s].
    ratio, count : int
        Spacings for each width; number N of levels.
    """

    medium: Medium
    width: float
    ratio: int
    count: int

    @property
    def spacing(self) -> float:
        """[s]."""
        return self.width / self.ratio

    @property
    def end(self) -> float:
        """When the last step is over [s]."""
        return (self.count - 1) * self.spacing + self.width

    @property
    def times(self) -> np.ndarray:
        """The fine grid [s], `POINTS` intervals for each width."""
        per = POINTS // self.ratio
        return np.arange((self.count - 1) * per + POINTS + 1) * (self.width / POINTS)

    def matrix(self, channel: str, shift: int = 0) -> sparse.csr_matrix | None:
        """Levels to a channel (or a derivative of it) on the fine grid, shape (len(times), count); None where not resolved."""
        answer = move_shape(ORDER, 1.0).channel(coefficients(self.medium, channel), self.medium.travel_time, self.width, shift)
        if answer is None:
            return None
        per, rows = POINTS // self.ratio, len(self.times)
        # after the step everything is steady; an integral goes on in proportion to the steady rate
        slope = answer[-1] - answer[-2] if shift < 0 else 0.0
        long = np.concatenate([answer, answer[-1] + slope * np.arange(1, rows - POINTS)]) if rows > POINTS + 1 else answer[:rows]
        apart = long.copy()
        apart[per:] -= long[: rows - per]
        used = rows if slope else min(rows, POINTS + per + 1)
        columns = []
        for j in range(self.count):
            own = (long if j == self.count - 1 else apart)[: rows - j * per]
            own = own if j == self.count - 1 else own[:used]
            columns.append(np.column_stack([np.full(len(own), j), np.arange(len(own)) + j * per, own]))
        entries = np.concatenate(columns)
        where = (entries[:, 1].astype(np.int64), entries[:, 0].astype(np.int64))
        return sparse.csr_matrix((entries[:, 2], where), shape=(rows, self.count))

    def target_matrix(self, times: np.ndarray) -> np.ndarray:
        """Levels to the change at the target at any ``times`` [s], shape (len(times), count)."""
        one = Rise(0.0, self.width, 0.0, 1.0, 1.0 / (ORDER - 1.0))
        steps = np.column_stack([one.low_order(times - j * self.spacing, 0) for j in range(self.count)])
        steps[:, :-1] -= steps[:, 1:]
        return steps

    def moves(self, levels: np.ndarray) -> tuple[Move, ...]:
        """The steps as moves of a target, those that change next to nothing left out."""
        heights = np.diff(levels, prepend=0.0)
        kept = np.abs(heights) > _NOTHING * np.abs(heights).max(initial=0.0)
        return tuple(
            Move(j * self.spacing, self.width, float(h), ORDER, 1.0) for j, (h, keep) in enumerate(zip(heights, kept, strict=True)) if keep
        )


@dataclass(frozen=True, eq=False)
class LimitRows:
    """One limit as rows ``matrix @ levels ≤ bound`` on the fine grid, scaled so that the bound's room is about 1."""

    demand: Demand
    matrix: sparse.csr_matrix
    bound: np.ndarray
    scale: float


def limit_rows(steps: ShiftedSteps, limits: Limits, level: float, volume: float, rest_pressure: float) -> list[LimitRows] | None:
    """Every stated limit for moves that start at rest at ``level`` with ``volume`` injected so far; None where not resolved."""
    out: list[LimitRows] = []
    medium, times = steps.medium, steps.times
    steady = medium.equilibrium(level)
    if steps.matrix("injection_rate") is None:
        return None
    for demand in DEMANDS:
        limit = getattr(limits, demand.name)
        if limit is None:
            continue
        name, shift = ("injection_rate", -1) if demand.channel == "injected_volume" else (demand.channel, demand.derivative)
        matrix = steps.matrix(name, shift)
        if matrix is None:
            return None
        base = np.zeros(len(times))
        if demand.channel == "injection_rate" and not demand.derivative:
            base += steady.rate
        elif demand.channel == "injected_volume":
            base += volume + steady.rate * times
        elif demand.channel == "bottomhole_pressure":
            base += rest_pressure + steady.bottomhole_change
        scale = float(np.max(np.abs(limit - base))) or abs(limit) or limits.max_rate or 1.0
        for sign in {"largest": (1.0,), "least": (-1.0,), "size": (1.0, -1.0)}[demand.side]:
            room = limit - sign * base if demand.side == "size" else sign * (limit - base)
            out.append(LimitRows(demand, matrix * (sign / scale), room / scale, scale))
    return out


def chosen(rows: Iterable[LimitRows], picked: list[np.ndarray], back_off: float) -> tuple[sparse.csr_matrix | None, np.ndarray]:
    """The picked rows of every limit stacked, their bounds drawn in by ``back_off``."""
    parts, bounds = [], []
    for one, at in zip(rows, picked, strict=True):
        parts.append(one.matrix[at])
        bounds.append(one.bound[at] - np.minimum(back_off, 0.5 * np.abs(one.bound[at])))
    if not parts:
        return None, np.empty(0)
    return sparse.vstack(parts, format="csr"), np.concatenate(bounds)


def exceeding(rows: list[LimitRows], levels: np.ndarray, picked: list[np.ndarray], allowed: float) -> tuple[list[np.ndarray], float]:
    """``picked`` with the local maxima of what exceeds its bound on the fine grid added, and the worst excess."""
    worst, out = 0.0, []
    for one, at in zip(rows, picked, strict=True):
        excess = one.matrix @ levels - one.bound
        worst = max(worst, float(excess.max()))
        padded = np.concatenate([[-np.inf], excess, [-np.inf]])
        peaks = np.flatnonzero((excess > allowed) & (excess >= padded[:-2]) & (excess >= padded[2:]))
        around = np.concatenate([peaks, peaks - 1, peaks + 1])
        out.append(np.union1d(at, around[(around >= 0) & (around < len(excess))]))
    return out, worst

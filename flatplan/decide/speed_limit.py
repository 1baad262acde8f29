"""The physical limit: how soon any rate history at all, of whatever shape, could take a medium from rest to rest.

With ``Q`` between two rates, ``λ_n`` the decay rates of the medium and ``Q_0``, ``Q_1`` the steady rates of the two levels, every
mode must have settled at the end T:

    ∫_0^T λ_n e^(-λ_n (T - t)) (Q(t) - Q_0) dt = Q_1 - Q_0,      and where nothing leaks    ∫_0^T Q dt = V  for λ_0 = 0.

For a given T the largest share θ of the move that can be settled is a linear program, and T is enough when θ reaches 1.

*From above*: rates constant over steps that are graded towards the end, the slowest modes only: the program itself.
*From below*: its multipliers μ (scaled so that they give the right-hand side 1) prove ``θ ≤ ∫ max over Q of h(t) (Q - Q_0) dt`` with
``h = Σ μ_n λ_n e^(-λ_n (T - t))`` for every rate history, in continuous time and with all the modes: weak duality
([Luenberger1969], chapter 8), and modes left out could only add conditions. Where that bound is below 1, T is too
short, and so is every shorter time, since a medium at rest can wait. The decay rates are those of the independent model
(`flatplan.numeric`), taken as exact: two meshes agree on them to a relative 1e-7.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from flatplan.numeric import Mesh, discrete_model
from flatplan.site import Medium

MODES = 40
STEPS = 240
_FIRST_STEP = 1e-4  # the last step before the end, in travel times
_MESH = Mesh(48, 2)
_AGREE = 1e-7  # decay rates of two meshes, relative
_CLOSE = 1e-4  # relative accuracy of the duration from above
_MOST_TRIES = 12
_LONGEST = 1e4


@dataclass(frozen=True)
class SpeedLimit:
    """Between which durations the shortest of all rest-to-rest moves lies.

    Attributes
    ----------
    lower : float
        No rate history within the limits is quicker [s].
    upper : float
        A rate constant over each of `STEPS` steps settles the slowest `MODES` modes in this time [s].
    """

    lower: float
    upper: float


def speed_limit(medium: Medium, before: float, after: float, least: float, most: float) -> SpeedLimit | None:
    """Bracket of the shortest move between two levels for rates from ``least`` to ``most``.

    Parameters
    ----------
    medium : Medium
    before, after : float
        Changes at the target at which everything is at rest [Pa] (held face [m³/s]).
    least, most : float
        Injection rates [m³/s]; ``-inf`` or ``inf`` where not limited.

    Returns
    -------
    SpeedLimit or None
        None where the rates on one side are not limited and the slowest mode alone says nothing.
    """
    first, last = medium.equilibrium(before), medium.equilibrium(after)
    low, high = least - first.rate, most - first.rate
    if last.stored_volume < first.stored_volume:  # a move down is the same move up with the rates turned round
        low, high = -high, -low
    if not math.isfinite(high) or high <= 0.0:
        return None
    decay = decay_rates(medium)
    t_d = medium.travel_time
    change = abs(last.rate - first.rate)
    volume = abs(last.stored_volume - first.stored_volume)
    one_sided = not math.isfinite(low)
    if one_sided:
        decay = decay[:1]  # the only combination of modes known to be nowhere negative
    size = volume / (high * t_d) if not medium.leaks else change / high
    if one_sided:
        least_time = _Program(decay * t_d, size, -1.0).slowest()
        return SpeedLimit(least_time * t_d, math.inf) if math.isfinite(least_time) else None
    for count in (len(decay), len(decay) // 2, len(decay) // 4):  # fewer conditions where so many cannot be told apart
        try:
            found = _Program(decay[: max(count, 1)] * t_d, size, low / high).bracket()
        except ArithmeticError:
            continue
        return None if found is None else SpeedLimit(found[0] * t_d, found[1] * t_d)
    return None


def decay_rates(medium: Medium, count: int = MODES) -> np.ndarray:
    """The slowest decay rates [1/s] on which two meshes agree to a relative 1e-7, at most ``count``; at least one."""
    coarse, fine = discrete_model(medium, _MESH).decay, discrete_model(medium, _MESH.finer()).decay
    few = min(count, len(coarse))
    apart = np.abs(coarse[:few] - fine[:few]) > _AGREE * np.abs(fine[:few])
    good = int(np.argmax(apart)) if np.any(apart) else few
    return fine[: max(good, 1)]


class _Program:
    """The linear program, with times in travel times and rates in units of the largest.

    ``size`` is the volume V of the move over ``q t_D`` where nothing leaks, else the change of the steady rate over q.
    """

    def __init__(self, decay: np.ndarray, size: float, least: float) -> None:
        self.decay, self.size, self.least = decay, size, least
        self.sealed = decay[0] == 0.0
        self.right = np.zeros(len(decay)) if self.sealed else np.full(len(decay), size)
        if self.sealed:
            self.right[0] = size

    def slowest(self) -> float:
        """Least time that the slowest mode alone needs."""
        if self.sealed:
            return self.size
        return -math.log1p(-self.size) / float(self.decay[0]) if self.size < 1.0 else math.inf

    def _kept(self, before_end: np.ndarray) -> np.ndarray:
        """Integral of each mode's weight from the end back to ``before_end``, shape (modes, n)."""
        kept = -np.expm1(-np.outer(self.decay, before_end))
        if self.sealed:
            kept[0] = before_end
        return kept

    def share(self, duration: float) -> tuple[float, np.ndarray]:
        """(θ, multipliers) for a duration."""
        from scipy.optimize import linprog

        back = np.concatenate([[0.0], np.geomspace(min(_FIRST_STEP, 1e-3 * duration), duration, STEPS)])
        rows = np.diff(self._kept(back), axis=1)
        scale = np.abs(rows).sum(axis=1)
        matrix = np.column_stack([rows / scale[:, None], -self.right / scale])
        cost = np.zeros(STEPS + 1)
        cost[-1] = -1.0
        bounds = [(self.least, 1.0)] * STEPS + [(0.0, None)]
        found = linprog(cost, A_eq=matrix, b_eq=np.zeros(len(rows)), bounds=bounds, method="highs")
        if found.status != 0:
            raise ArithmeticError(f"the program for the physical limit did not settle: {found.message}")
        return -float(found.fun), np.asarray(found.eqlin.marginals) / scale

    def most(self, duration: float, multipliers: np.ndarray) -> float:
        """Upper bound on θ for every rate history, from multipliers of any origin."""
        asked = float(multipliers @ self.right)
        if asked == 0.0:
            return math.inf
        mu = multipliers / asked
        back = np.concatenate([[0.0], np.geomspace(1e-3 * _FIRST_STEP, duration, 4000)])
        back = np.unique(np.minimum(back, duration))
        weight = self.decay if not self.sealed else np.concatenate([[1.0], self.decay[1:]])
        density = (mu * weight) @ np.exp(-np.outer(self.decay, back))
        turns = np.flatnonzero(density[1:] * density[:-1] < 0.0)
        # a turn that is misplaced costs the bound its square only
        at = back[turns] - density[turns] * (back[turns + 1] - back[turns]) / (density[turns + 1] - density[turns])
        pieces = np.diff(mu @ self._kept(np.concatenate([[0.0], at, [duration]])))
        return float(np.sum(np.maximum(pieces, self.least * pieces)))

    def bracket(self) -> tuple[float, float] | None:
        """(from below, from above), or None where no duration was found to be enough."""
        from scipy.optimize import brentq

        low = self.slowest()
        if not math.isfinite(low):
            return None
        high = low + 0.5
        while self.share(high)[0] < 1.0:
            low, high = high, 2.0 * high
            if high > _LONGEST * (1.0 + self.size):
                return None
        above = float(brentq(lambda d: self.share(d)[0] - 1.0, low, high, xtol=_CLOSE * low)) if self.share(low)[0] < 1.0 else low
        below, step = above, 2.0 * _CLOSE
        for _ in range(_MOST_TRIES):
            below = max(above * (1.0 - step), self.slowest())
            if below == self.slowest() or self.most(below, self.share(below)[1]) < 1.0:
                return below, above * (1.0 + _CLOSE)
            step *= 2.0
        return self.slowest(), above * (1.0 + _CLOSE)

"""The quickest move of free shape: levels of shifted steps by linear program, bisected over the duration.

For a duration and a width the largest share θ of the change that the steps can settle within the limits is a linear program; the
duration is enough when θ reaches 1. A few widths are tried. Limits are asked at some times and added where they are exceeded on the
fine grid of `flatplan.decide.shifted`; what remains between its points is found on the plan, and the move stretched.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import sparse

from flatplan.decide.limits import Limits
from flatplan.decide.shifted import LimitRows, ShiftedSteps, chosen, exceeding, limit_rows
from flatplan.site import Medium

WIDTHS = (0.36, 0.42, 0.5, 0.65, 0.85)  # of the steps, in travel times
_RATIOS = (10, 8, 5, 4, 2)
_MOST_STEPS = 48
_BACK_OFF = 1e-4  # what limits are drawn in by, as a share of their room
_EVERY = 10
_ROUNDS = 6
_CLOSE = 1e-3  # relative accuracy of the duration
_MOST_TRIES = 14


@dataclass(frozen=True, eq=False)
class FreeMove:
    """Steps and levels that settle the whole change.

    Attributes
    ----------
    steps : ShiftedSteps
    levels : ndarray
        The last one is the change.
    binding : tuple of str
        Limits that it uses up.
    """

    steps: ShiftedSteps
    levels: np.ndarray
    binding: tuple[str, ...]


def free_move(
    medium: Medium, change: float, limits: Limits, level: float, volume: float, rest_pressure: float, within: float
) -> FreeMove | None:
    """The quickest free move found that is shorter than ``within`` [s], the best eased ramp's duration; None where there is none.

    Parameters
    ----------
    medium : Medium
    change : float
        [Pa] (held face [m³/s]).
    limits : Limits
    level, volume, rest_pressure : float
        Where the move starts from.
    within : float
        [s].
    """
    best: FreeMove | None = None
    seen: set[tuple[int, int]] = set()
    for share in WIDTHS:
        width = share * medium.travel_time
        # spacings for each width: as many as keep the number of steps moderate
        ratio = next((r for r in _RATIOS if r * (within / width - 1.0) + 1 <= _MOST_STEPS), _RATIOS[-1])
        count = min(round(ratio * (within / width - 1.0)) + 1, _MOST_STEPS)
        if count < 3 or (ratio, count) in seen:
            continue
        seen.add((ratio, count))

        def settled(duration: float, ratio: int = ratio, count: int = count) -> tuple[float, FreeMove] | None:
            steps = ShiftedSteps(medium, duration * ratio / (count - 1 + ratio), ratio, count)
            rows = limit_rows(steps, limits, level, volume, rest_pressure)
            return None if rows is None else _most_settled(steps, rows, change)

        # what is best so far is the mark: a width that cannot do it by then is put aside after one look
        high = (best.steps.end if best else within) * (1.0 - _CLOSE)
        at_high = settled(high)
        if at_high is None or at_high[0] < 1.0:
            continue
        best, low = at_high[1], 0.4 * high
        for _ in range(_MOST_TRIES):
            if high <= low * (1.0 + _CLOSE):
                break
            # θ is close to a straight line of the duration, so aim a little above where it meets 1, else halve
            middle = max(high * (1.0 - 0.9 * (1.0 - 1.0 / at_high[0])), 0.5 * (low + high)) if at_high[0] > 1.02 else 0.5 * (low + high)
            middle = min(middle, high * (1.0 - 0.5 * _CLOSE))
            found = settled(middle)
            if found is not None and found[0] >= 1.0:
                high, at_high, best = middle, found, found[1]
            else:
                low = middle
    return best


def _most_settled(steps: ShiftedSteps, rows: list[LimitRows], change: float) -> tuple[float, FreeMove] | None:
    """(largest θ, the move with θ = 1 taken from it); None where the solver gives up or nothing limits."""
    from scipy.optimize import linprog

    picked = [np.arange(0, len(one.bound), _EVERY) for one in rows]
    n = steps.count
    cost = np.zeros(n)
    cost[-1] = -1.0
    levels = np.zeros(n)
    for _ in range(_ROUNDS):
        limited, bound = chosen(rows, picked, _BACK_OFF)
        if limited is None:
            return None
        # a level may swing beyond the ends, but not without measure
        bounds = [(-20.0, 20.0)] * (n - 1) + [(0.0, 20.0)]
        found = linprog(cost, A_ub=sparse.csr_matrix(limited * change), b_ub=bound, bounds=bounds, method="highs")
        if found.status != 0:
            return None
        levels = found.x * change
        picked, worst = exceeding(rows, levels, picked, 0.0)
        if worst <= 0.0:
            break
    share = -float(found.fun)
    if share <= 0.0:
        return 0.0, FreeMove(steps, levels, ())
    # where more than the whole can be settled, a smaller share of it keeps the limits too: they hold at rest, and the set is convex
    levels = levels / share if share > 1.0 else levels
    binding = tuple(dict.fromkeys(one.demand.name for one in rows if float((one.matrix @ levels - one.bound).max()) >= -5e-3))
    return share, FreeMove(steps, levels, binding)

"""What would do instead, when a series needs more terms than are held: the duration, or the order."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace

import numpy as np

from flatplan import units
from flatplan.flat.generating import scaled_coefficients
from flatplan.flat.rise import Rise
from flatplan.flat.tail import MOST_BOUNDED, MOST_TERMS, tail_table
from flatplan.site import Medium

_LONGEST = 1e4  # times the duration asked


def too_many_terms(medium: Medium, rise: Rise, tolerance: float, least_order: float) -> str:
    """The sentence for a rise whose series cannot be held, with a duration and an order that would do."""

    ways = []

    def fits(candidate: Rise) -> bool:
        shifts = (0, -1, 1)
        tails = tail_table(medium, candidate, tuple(("injection_rate", s) for s in shifts), MOST_BOUNDED)[:, MOST_TERMS]
        return bool(np.all(tails <= 0.25 * tolerance * _least_peaks(medium, candidate)))

    def stretched(factor: float) -> Rise:
        return replace(rise, width=rise.width * factor, ramp=rise.ramp * factor)

    def of_order(order: float) -> Rise:
        return replace(rise, gamma=1.0 / (order - 1.0))

    factor = _bisected(lambda f: fits(stretched(math.exp(f))), math.log(_LONGEST), 0.0)
    if factor is not None:
        ways.append(f"a duration of {units.text(math.exp(factor) * (rise.width + rise.ramp) * 1.001, 'time')} or more at this order")
    # very low orders need many terms too: the nearest below that fits, then as near as it goes
    lower = next((o for o in np.arange(rise.order - 0.03, least_order, -0.06) if fits(of_order(float(o)))), None)
    if lower is not None:
        order = _bisected(lambda o: fits(of_order(o)), float(lower), min(float(lower) + 0.06, rise.order), steps=4)
        ways.append(f"an order of {math.floor((order or lower) * 100.0) / 100.0:g} or somewhat less at this duration")
    x = medium.travel_time / rise.width
    return (
        f"target: at order {rise.order:.4g} and an eased corner of {units.text(rise.width, 'time')} "
        f"(travel time over corner {x:.3g}) the series needs more than {MOST_TERMS} terms"
        + (f"; {', or '.join(ways)} would do." if ways else "; take a longer duration, a larger easing or a lower order.")
    )


def past_the_threshold(medium: Medium, rise: Rise) -> str:
    """The sentence for a move of order 2 that is too fast for it."""
    x = medium.travel_time / rise.width
    least = 0.5 * x * (rise.width + rise.ramp)
    return (
        f"target: at order 2 the series converges only while the travel time is below 2 eased corners, and here it is {x:.4g} of them "
        f"({units.text(medium.travel_time, 'time')} over {units.text(rise.width, 'time')}); "
        f"a duration above {units.text(least, 'time')}, or an order below 2, would do."
    )


def _least_peaks(medium: Medium, rise: Rise) -> np.ndarray:
    """What rate, volume and change of rate reach at least: the mean rate, the volume of the move, and the mean rate over its duration."""
    hats = scaled_coefficients(medium, "injection_rate", 1)
    steady, stored = float(hats[0]), float(hats[1]) * medium.travel_time / 2.0
    duration = rise.width + rise.ramp
    volume = abs(rise.weight) * max(stored, steady * duration / 2.0)
    return np.array([volume / duration, volume, volume / duration**2])


def _bisected(fits: Callable[[float], bool], good: float, bad: float, steps: int = 12) -> float | None:
    """The place nearest to ``bad`` found to fit, or None where not even ``good`` does."""
    if not fits(good):
        return None
    for _ in range(steps):
        middle = 0.5 * (good + bad)
        good, bad = (middle, bad) if fits(middle) else (good, middle)
    return good

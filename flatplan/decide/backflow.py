"""Back-flow: how much of a plan runs out of the ground, when, and what leaving it out would cost.

In a medium that is sealed and does not leak, no rate history that is never negative moves the pressure from
rest to rest in finite time: every decaying mode (rate λ_n, not zero at the well) would need
``∫ e^(λ_n t) Q(t) dt = 0``, and the integrand is never negative. So the exact landing of any upward move has
some back-flow near its end, however little.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from flatplan.decide.extremes import bracketed_zeros, time_grid
from flatplan.flat import Plan


@dataclass(frozen=True)
class BackFlow:
    """Where the injection rate of a plan is below zero.

    Attributes
    ----------
    volume : float
        Volume that flows back, summed over all stretches [m³], not negative.
    peak : float
        Largest back-flow rate [m³/s], not negative.
    peak_at : float
        When [s].
    stretches : tuple of (float, float)
        Start and end of each stretch [s].
    """

    volume: float
    peak: float
    peak_at: float
    stretches: tuple[tuple[float, float], ...]

    @property
    def main(self) -> tuple[tuple[float, float], ...]:
        """The three longest stretches, in order of time."""
        return tuple(sorted(sorted(self.stretches, key=lambda s: s[0] - s[1])[:3]))


def back_flow(plan: Plan, least: float, least_at: float) -> BackFlow:
    """Back-flow of a plan whose smallest rate and its time are known.

    Stretches smaller than the plan's own error bound are not counted.
    """
    floor = plan.certificate.tail["injection_rate"] + plan.certificate.rounding["injection_rate"]
    if least >= -floor:
        return BackFlow(0.0, 0.0, least_at, ())
    grid = time_grid(plan)
    grid = np.unique(np.append(grid, least_at))
    below = plan.rate(grid) < -floor
    change = np.flatnonzero(below[1:] != below[:-1])
    edges = bracketed_zeros(lambda t: plan.rate(t) + floor, grid[change], grid[change + 1])
    if below[0]:
        edges = np.append(grid[0], edges)
    if below[-1]:
        edges = np.append(edges, grid[-1])
    stretches = tuple(zip(edges[::2].tolist(), edges[1::2].tolist(), strict=True))
    volumes = plan.evaluate("injected_volume", edges)
    return BackFlow(float(-np.sum(volumes[1::2] - volumes[::2])), -least, least_at, stretches)

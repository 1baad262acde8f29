"""What a plan comes down to in a few numbers: what is reached, what is pumped, and what a stop would lead to."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from flatplan.channels import Channels
from flatplan.decide.extremes import Extremes, extremes
from flatplan.field import PumpedSteps
from flatplan.flat import Plan
from flatplan.numeric import Check
from flatplan.show.times import dense_times


@dataclass(frozen=True)
class Peak:
    """A largest or smallest value [SI] and when it occurs [s]."""

    value: float
    when: float


@dataclass(frozen=True)
class Stop:
    """What the target does when pumping stops for good, in a medium that keeps its fluid.

    Attributes
    ----------
    when : float
        The moment of a stop after which the target rises most [s].
    rise : float
        By how much it would still rise [Pa].
    settled : float
        The pressure it would then settle at [Pa, absolute].
    highest : float
        The highest pressure it could settle at, whatever the moment of the stop [Pa, absolute].
    """

    when: float
    rise: float
    settled: float
    highest: float


@dataclass(frozen=True)
class Job:
    """Numbers of a plan, of the rate as pumped where there is one.

    Attributes
    ----------
    plan : Plan
    steps : PumpedSteps or None
    steps_check : Check or None
    """

    plan: Plan
    steps: PumpedSteps | None = None
    steps_check: Check | None = None

    @cached_property
    def channels(self) -> Channels:
        """The plan's channels, densely."""
        return self.plan.at(dense_times(self.plan))

    @cached_property
    def _rate(self) -> Extremes:
        return extremes(self.plan, "injection_rate")

    @property
    def highest_rate(self) -> Peak:
        """Largest injection rate; of the steps, the start of the step."""
        if self.steps is not None:
            i = int(np.argmax(self.steps.rates))
            return Peak(float(self.steps.rates[i]), float(self.steps.edges[i]))
        return Peak(self._rate.largest, self._rate.largest_at)

    @property
    def lowest_rate(self) -> Peak:
        """Smallest injection rate; below zero where fluid flows back. Zero where it is only the plan's own error."""
        certificate = self.plan.certificate
        error = certificate.tail["injection_rate"] + certificate.rounding["injection_rate"]
        if self.steps is not None:
            i = int(np.argmin(self.steps.rates))
            found = Peak(float(self.steps.rates[i]), float(self.steps.edges[i]))
        else:
            found = Peak(self._rate.least, self._rate.least_at)
        return Peak(0.0, found.when) if abs(found.value) <= error else found

    @cached_property
    def volumes(self) -> tuple[float, float]:
        """(injected, flowed back) volume, neither negative [m³]."""
        moved = self.steps.volumes if self.steps is not None else np.diff(self.channels.injected_volume)
        injected, back = float(moved[moved > 0.0].sum()), float(-moved[moved < 0.0].sum())
        # what rounding leaves is no back-flow
        return injected, back if back > 1e-9 * injected else 0.0

    @property
    def net_volume(self) -> float:
        """Injected less flowed back at the end [m³]."""
        return float(self.plan.evaluate("injected_volume", [self.plan.end])[0])

    @cached_property
    def highest_bottomhole(self) -> Peak:
        """Largest bottomhole pressure [Pa, absolute]; as simulated with the steps where that is known."""
        if self.steps_check is not None:
            values = self.steps_check.channels.bottomhole_pressure
            i = int(np.argmax(values))
            return Peak(float(values[i]), float(self.steps_check.channels.times[i]))
        found = extremes(self.plan, "bottomhole_pressure")
        return Peak(found.largest + self.plan.target.rest_pressure, found.largest_at)

    @property
    def keeping_rate(self) -> float | None:
        """Steady rate that keeps the last level [m³/s]; None in a medium that keeps it by itself."""
        target, medium = self.plan.target, self.plan.medium
        return medium.equilibrium(target.level - target.start).rate if medium.leaks else None

    @cached_property
    def stop(self) -> Stop | None:
        """What a stop leads to, from the volume balance; None where fluid leaves the medium."""
        medium = self.plan.medium
        if medium.leaks:
            return None
        channels = self.channels
        # nothing leaks, so all pressures even out at what the injected volume fills
        settled = self.plan.target.start + channels.injected_volume / medium.stored_volume(1.0)
        rise = settled - channels.target_pressure
        i = int(np.argmax(rise))
        return Stop(float(channels.times[i]), float(rise[i]), float(settled[i]), float(settled.max()))

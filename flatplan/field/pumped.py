"""The rate as pumped: constant over each step, with the volume of the plan in each."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any

import numpy as np

from flatplan import units
from flatplan.channels import Channels
from flatplan.flat import Plan, Target
from flatplan.numeric import Steps
from flatplan.records import of_type
from flatplan.site import Medium

_MOST_STEPS = 100_000
_ROUNDING = 1e-9  # of a step: less than this is no time


class PumpedSteps(Steps):
    """A plan turned into steps of constant rate, made by `steps`.

    Attributes
    ----------
    edges, rates : ndarray
        Step times [s], shape (n + 1,), and rates [m³/s], shape (n,).
    plan : Plan
        The plan they follow.
    every : float
        Length of a full step [s]; the last one may be shorter.
    """

    plan: Plan
    every: float

    def __init__(self, *, edges: Any, rates: Any, plan: Plan, every: float) -> None:
        super().__init__(edges=edges, rates=rates)
        object.__setattr__(self, "plan", plan)
        object.__setattr__(self, "every", float(every))

    @property
    def medium(self) -> Medium:
        """The medium of the plan."""
        return self.plan.medium

    @property
    def target(self) -> Target:
        """The target of the plan."""
        return self.plan.target

    @property
    def volumes(self) -> np.ndarray:
        """Volume of each step [m³], shape (n,)."""
        return self.rates * np.diff(self.edges)

    @property
    def planned(self) -> Channels:
        """The plan's channels at the end of each step."""
        return self.plan.at(self.edges[1:])

    def _title(self) -> str:
        return f"Pumped steps: {len(self.rates)} of {units.text(self.every, 'time')}"

    def _rows(self) -> Iterable[tuple[str, str]]:
        yield from super()._rows()
        change = np.abs(np.diff(self.rates)).max() if len(self.rates) > 1 else 0.0
        yield "largest change between steps", units.text(float(change), "rate")


def steps(plan: Plan, every: Any) -> PumpedSteps:
    """The rate as pumped: constant over each step, each step with exactly the plan's volume.

    Parameters
    ----------
    plan : Plan
    every : float, str or quantity
        Length of a step [s], above zero; where it does not divide the duration the last step is shorter.

    Returns
    -------
    PumpedSteps

    Raises
    ------
    TypeError
        A plan of another type.
    ValueError
        A step that is not above zero, longer than the plan, or so short that there would be over 100 000.

    Notes
    -----
    The volume of a step is the difference of the plan's injected volume, a series of its own, so volumes
    balance to rounding whatever the step. What stepping costs at the target is measured by
    ``flatplan.confirm(steps)``.
    """
    of_type(plan, Plan, "plan", "a plan made by feedforward()")
    length = units.si(every, "time", "every", "positive")
    if length > plan.end * (1.0 + _ROUNDING):  # the end is a sum of durations, rounded
        raise ValueError(f"every: got {every!r}, longer than the plan ({units.text(plan.end, 'time')}); it takes at most that.")
    whole = plan.end / length
    if whole > _MOST_STEPS:
        raise ValueError(
            f"every: got {every!r}, which makes {whole:.3g} steps; it takes at least {units.text(plan.end / _MOST_STEPS, 'time')}."
        )
    # a remainder below rounding is no step of its own
    count = int(np.floor(whole + _ROUNDING))
    starts = np.arange(count + 1) * length
    edges = np.append(starts[starts < plan.end - _ROUNDING * length], plan.end)
    volumes = np.diff(plan.evaluate("injected_volume", edges))
    return PumpedSteps(edges=edges, rates=volumes / np.diff(edges), plan=plan, every=length)

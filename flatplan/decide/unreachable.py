"""Limits that no duration can meet: said in one sentence, with the number that would do."""

from __future__ import annotations

from flatplan import units
from flatplan.decide.limits import Limits
from flatplan.decide.physical import DEMANDS, Demand
from flatplan.flat import Target
from flatplan.site import Medium


def levels(target: Target) -> list[float]:
    """Changes from the start at which a programme rests, the start included: one more than it has moves."""
    found = [0.0]
    for move in target.moves:
        found.append(found[-1] + move.change)
    return found


def check_stated(limits: Limits) -> None:
    """Refuse limits that say nothing."""
    if not limits.stated:
        raise ValueError('limits: none is stated, so every duration would do; state at least one, such as max_rate="3 L/s".')


def check_held(medium: Medium, target: Target, limits: Limits) -> None:
    """Refuse limits that cannot be judged where the target is a rate."""
    if medium.face.held:
        if limits.max_pressure_change is not None:
            raise ValueError("max_pressure_change: is stated, but the pressure of a held face does not change; leave it out.")
        if target.rest_pressure == 0.0 and (limits.max_bottomhole_pressure is not None or limits.min_bottomhole_pressure is not None):
            raise ValueError(
                "limits: a bottomhole pressure is limited, but the target does not say at which pressure the face is held; "
                'give Target(..., pressure="21 MPa").'
            )


def check_level(medium: Medium, target: Target, limits: Limits, level: float) -> None:
    """Refuse limits that are broken at rest at a level, where nothing moves.

    Raises
    ------
    ValueError
        Naming the limit, what it is at rest, and that no duration helps.
    """
    for demand in DEMANDS:
        limit = getattr(limits, demand.name)
        if limit is None or demand.derivative:
            continue
        value = _at_rest(demand, medium, target, level)
        if value is not None and demand.margin(value, limit) < 0.0:
            side = "below" if demand.side == "least" else "above"
            settled, rest = units.text(target.start + level, target.kind), _precise(value, limit, demand.kind)
            raise ValueError(
                f"{demand.name}: got {units.text(limit, demand.kind)}, but at rest at {settled} the {demand.title} is already {rest}, "
                f"at every duration; a limit {side} {rest} would do."
            )


def check_signs(medium: Medium, limits: Limits) -> None:
    """Refuse an upper rate limit that rules out every move of a medium from which nothing is lost.

    (That min_rate must be below zero there is the injection-only fact; it is refused with the number that would do, once known.)
    """
    if not medium.leaks and limits.max_rate is not None and limits.max_rate <= 0.0:
        raise ValueError(
            f"max_rate: got {units.text(limits.max_rate, 'rate')}, but in a sealed medium no rate that is never positive lands exactly "
            "at another level; it takes a rate above 0."
        )


def _at_rest(demand: Demand, medium: Medium, target: Target, level: float) -> float | None:
    """What a demand is at rest at a level; None where rest says nothing."""
    steady = medium.equilibrium(level)
    if demand.channel == "bottomhole_pressure":
        return target.rest_pressure + steady.bottomhole_change
    if demand.channel == "injection_rate":
        return steady.rate
    if demand.channel == "injected_volume" and not medium.leaks:
        return steady.stored_volume
    return None


def _precise(value: float, limit: float, kind: str) -> str:
    """A value in as many digits as tell it from the limit."""
    for digits in (4, 6, 9):
        said = units.text(value, kind, digits=digits)
        if said != units.text(limit, kind, digits=digits):
            return said
    return units.text(value, kind, digits=12)

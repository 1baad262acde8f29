"""What a plan asks of the pump and the ground, against each limit."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from flatplan import units
from flatplan.decide.extremes import Extremes, all_extremes, extremes
from flatplan.decide.findings import Finding
from flatplan.decide.limits import Limits
from flatplan.flat import Plan, Target, feedforward

_LONGEST = 64.0  # how many times longer a remedy may be
_CLOSE = 1e-3  # relative accuracy of a remedy's duration


@dataclass(frozen=True)
class Demand:
    """One quantity of a plan with a limit of the same name.

    Attributes
    ----------
    name : str
        Name of the limit in `Limits`.
    title : str
        In words.
    channel, derivative : str, int
        What is looked at.
    side : str
        "largest", "least" or "size" (the larger of the two in absolute value).
    """

    name: str
    title: str
    channel: str
    derivative: int
    side: str
    kind: str

    def measure(self, plan: Plan, found: Extremes | None = None) -> tuple[float, float]:
        """(value, when), from the channel's extremes where they are known already; pressures absolute."""
        found = extremes(plan, self.channel, self.derivative) if found is None else found
        if self.side == "size":
            return found.size
        value, when = (found.largest, found.largest_at) if self.side == "largest" else (found.least, found.least_at)
        if self.kind == "pressure":
            value += plan.target.rest_pressure
        return value, when

    def margin(self, value: float, limit: float) -> float:
        """Distance to the limit, below zero where it is broken."""
        return value - limit if self.side == "least" else limit - value

    def error(self, plan: Plan) -> float:
        """How far the plan's own channel may be from exact: a limit is not broken by less."""
        certificate = plan.certificate
        return 0.0 if self.derivative else certificate.tail[self.channel] + certificate.rounding[self.channel]


DEMANDS = (
    Demand("max_rate", "largest injection rate", "injection_rate", 0, "largest", "rate"),
    Demand("min_rate", "smallest injection rate", "injection_rate", 0, "least", "rate"),
    Demand("max_rate_change", "fastest change of rate", "injection_rate", 1, "size", "rate change"),
    Demand("max_bottomhole_pressure", "largest bottomhole pressure", "bottomhole_pressure", 0, "largest", "pressure"),
    Demand("min_bottomhole_pressure", "smallest bottomhole pressure", "bottomhole_pressure", 0, "least", "pressure"),
    Demand("max_pressure_change", "fastest pressure change at the target", "target_pressure", 1, "size", "pressure rate"),
    Demand("max_volume", "largest net injected volume", "injected_volume", 0, "largest", "volume"),
)


def physical_findings(plan: Plan, limits: Limits, say: Callable[[float, str], str]) -> list[Finding]:
    """A finding for every demand: judged where a limit is stated, for information elsewhere; ``say`` puts numbers in words."""
    demands = [d for d in DEMANDS if not (plan.medium.face.held and d.kind == "pressure rate")]
    found = all_extremes(plan, [(demand.channel, demand.derivative) for demand in demands])
    return [_finding(demand, plan, getattr(limits, demand.name), seen, say) for demand, seen in zip(demands, found, strict=True)]


def _finding(demand: Demand, plan: Plan, limit: float | None, found: Extremes, say: Callable[[float, str], str]) -> Finding:
    value, when = demand.measure(plan, found)
    said = f"The {demand.title} is {say(value, demand.kind)} at {say(when, 'time')}"
    if limit is None:
        return Finding(demand.name, demand.title, "physical", None, value, None, None, demand.kind, when, f"{said}; no limit is stated.")
    margin = demand.margin(value, limit)
    holds = margin >= -demand.error(plan)
    word = "above" if demand.side == "least" else "below"
    if holds:
        reason = f"{said}, {say(abs(margin), demand.kind)} {word} the limit of {say(limit, demand.kind)}."
        return Finding(demand.name, demand.title, "physical", True, value, limit, margin, demand.kind, when, reason)
    word = "below" if demand.side == "least" else "above"
    reason = f"{said}, {say(abs(margin), demand.kind)} {word} the limit of {say(limit, demand.kind)}."
    return Finding(
        demand.name, demand.title, "physical", False, value, limit, margin, demand.kind, when, reason, _remedy(demand, plan, limit, say)
    )


def _remedy(demand: Demand, plan: Plan, limit: float, say: Callable[[float, str], str]) -> str:
    """A number that would do: how much longer, or how much lower the level must be."""
    settled = _settled(demand, plan)
    if settled is not None and demand.margin(settled, limit) < 0.0:
        return f"No duration helps: at rest it is already {say(settled, demand.kind)}. Lower the level, or seek another well or limit."
    if demand.name == "min_rate" and limit >= 0.0 and not plan.medium.leaks:
        return "No duration helps in a medium that is sealed: see the finding on injection alone."
    factor = least_stretch(plan, lambda longer: demand.margin(demand.measure(longer)[0], limit) >= -demand.error(longer))
    if factor is None:
        return f"Not even {_LONGEST:.0f} times the duration does; lower the level or allow more."
    if len(plan.target.moves) == 1:
        move = plan.target.moves[0]
        return f"{at_least(move.duration * factor, 'time', say)} instead of {say(move.duration, 'time')} would do."
    times = f"{at_least(plan.end * factor, 'time', say)} instead of {say(plan.end, 'time')}"
    return f"The whole programme in {at_least(factor, 'fraction', say)} times the time would do ({times})."


def at_least(value: float, kind: str, say: Callable[[float, str], str]) -> str:
    """A number above zero in words that are not below it when read again: rounded up, so that what they promise holds."""
    tries = (say((1.0 + more) * value, kind) for more in (0.0, 1e-4, 2e-4, 3e-4, 4e-4, 5e-4))  # up to half of the last of four digits
    return next((said for said in tries if units.si(said, kind, kind) >= value), say(1.001 * value, kind))


def _settled(demand: Demand, plan: Plan) -> float | None:
    """The extreme over the settled levels, which no duration changes; None for changes and rates of a sealed medium."""
    if demand.derivative:
        return None
    steady = [plan.medium.equilibrium(v) for v in _levels(plan.target)]
    if demand.channel == "bottomhole_pressure":
        values = [plan.target.rest_pressure + e.bottomhole_change for e in steady]
    elif demand.channel == "injected_volume" and not plan.medium.leaks:
        values = [e.stored_volume for e in steady]
    elif demand.channel == "injection_rate":
        values = [e.rate for e in steady]
    else:
        return None
    return min(values) if demand.side == "least" else max(values)


def _levels(target: Target) -> list[float]:
    """Changes of level at which everything is at rest for a moment or longer: where no move is under way."""
    levels = [0.0]
    for when in sorted({move.end for move in target.moves}):
        if not any(move.start < when < move.end for move in target.moves):
            levels.append(sum(move.change for move in target.moves if move.end <= when))
    return levels


def least_stretch(plan: Plan, fits: Callable[[Plan], bool]) -> float | None:
    """Least factor ≥ 1 on all durations at which ``fits(plan)`` holds, to a relative 1e-3; None above 64."""

    def ok(factor: float) -> bool:
        return fits(stretched_plan(plan, factor))

    low, high = 1.0, 2.0
    while not ok(high):
        low, high = high, 2.0 * high
        if high > _LONGEST:
            return None
    while high > low * (1.0 + _CLOSE):
        middle = (low * high) ** 0.5
        low, high = (low, middle) if ok(middle) else (middle, high)
    return high


def stretched_plan(plan: Plan, factor: float) -> Plan:
    """The plan of the same medium with every duration multiplied."""
    target: Target = plan.target.stretched(factor)
    return feedforward(plan.medium, target, tolerance=plan.tolerance)

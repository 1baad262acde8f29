"""Is a plan realizable: every mathematical and physical condition, judged one by one."""

from __future__ import annotations

from collections.abc import Callable

from flatplan.decide.backflow import BackFlow, back_flow
from flatplan.decide.extremes import all_extremes, extremes
from flatplan.decide.findings import Finding, Verdict
from flatplan.decide.limits import Limits
from flatplan.decide.physical import at_least, physical_findings, stretched_plan
from flatplan.flat import Plan
from flatplan.records import of_type, one_of
from flatplan.units import SYSTEMS, text

Say = Callable[[float, str], str]
_LONGER = 2.0  # how much longer a plan the injection-only finding compares with


def assess(plan: Plan, limits: Limits | None = None, *, units: str = "metric") -> Verdict:
    """Judge a plan against the mathematics and against the limits of pump and ground.

    Parameters
    ----------
    plan : Plan
    limits : Limits, optional
        Limits that are not stated give findings for information.
    units : {"SI", "metric", "field"}
        Units of the sentences; the numbers of a finding are SI.

    Returns
    -------
    Verdict
        Realizable when no finding fails.

    Raises
    ------
    TypeError
        A plan or limits of another type.
    ValueError
        An unknown unit system, or limits that cannot be judged for a held face.

    Notes
    -----
    Extremes are located on the zeros of the derivative series, so they hold between samples. Pressure
    anywhere in the medium is covered by the maximum principle for the diffusion equation: with no source
    inside, it stays between the extremes met at the start, at the sandface and at the target face.
    """
    of_type(plan, Plan, "plan", "a plan made by feedforward()")
    limits = of_type(limits if limits is not None else Limits(), Limits, "limits", "flatplan Limits")
    one_of(units, SYSTEMS, "units")

    def say(value: float, kind: str) -> str:
        return text(value, kind, units)

    if plan.medium.face.held:
        _limits_of_a_held_face(plan, limits)
    physical = physical_findings(plan, limits, say)
    low = extremes(plan, "injection_rate")
    findings = [
        _order(plan),
        _accuracy(plan),
        *physical,
        _anywhere(plan, say),
        _injection_only(plan, limits, back_flow(plan, low.least, low.least_at), say),
    ]
    return Verdict(plan, limits, tuple(findings), units)


def _limits_of_a_held_face(plan: Plan, limits: Limits) -> None:
    """Refuse limits that cannot be judged where the target is a rate."""
    if limits.max_pressure_change is not None:
        raise ValueError("max_pressure_change: is stated, but the pressure of a held face does not change; leave it out.")
    if plan.target.rest_pressure == 0.0 and (limits.max_bottomhole_pressure is not None or limits.min_bottomhole_pressure is not None):
        raise ValueError(
            "limits: a bottomhole pressure is limited, but the target does not say at which pressure the face is held; "
            'give Target(..., pressure="21 MPa").'
        )


def _order(plan: Plan) -> Finding:
    order, share = plan.certificate.order, plan.certificate.share_of_threshold
    holds = order < 2.0 or (order == 2.0 and share < 1.0)
    if order < 2.0:
        reason = "below 2: the series converges for every medium and every duration."
    elif holds:
        reason = f"2: the series converges while the travel time is below 2 eased corners, and it is {2.0 * share:.3g} of them."
    else:
        reason = "not below 2: the series need not converge."
    reason = f"The largest Gevrey order of the moves is {order:.4g}, {reason}" if order < 2.0 or not holds else (
        f"The largest Gevrey order of the moves is {reason}"
    )
    remedy = "" if holds else "Give every move an order below 2."
    return Finding("gevrey_order", "Gevrey order", "mathematical", holds, order, 2.0, 2.0 - order, "fraction", None, reason, remedy)


def _accuracy(plan: Plan) -> Finding:
    c = plan.certificate
    worst = max((c.tail[n] + c.rounding[n]) / c.peak[n] for n in c.tail if c.peak[n])
    holds = c.met
    tail = max(c.tail[n] / c.peak[n] for n in c.tail if c.peak[n])
    rounding = max(c.rounding[n] / c.peak[n] for n in c.tail if c.peak[n])
    reason = (
        f"With {c.terms} terms in {c.digits} digits, what the series leaves out is at most {tail:.1e} of a channel's peak (proven) "
        f"and its rounding at most {rounding:.1e} ({c.rounding_basis})."
    )
    remedy = "" if holds else "Take a longer duration or a larger easing: the terms of this series cancel too far for double precision."
    return Finding(
        "series_error",
        "error of the series",
        "mathematical",
        holds,
        worst,
        c.tolerance,
        c.tolerance - worst,
        "fraction",
        None,
        reason,
        remedy,
    )


def _anywhere(plan: Plan, say: Say) -> Finding:
    places = ["sandface_pressure"] if plan.medium.face.held else ["sandface_pressure", "target_pressure"]
    seen = [(found.largest, found.largest_at) for found in all_extremes(plan, [(name, 0) for name in places])]
    change, when = max([(0.0, 0.0), *seen], key=lambda value_and_time: value_and_time[0])
    top = change + plan.target.rest_pressure
    reason = (
        f"By the maximum principle pressure nowhere in the medium exceeds {say(top, 'pressure')}, "
        "the largest of the start, the sandface and the target."
    )
    return Finding(
        "pressure_anywhere", "pressure anywhere in the medium", "physical", None, top, None, None, "pressure", when, reason
    )


def _injection_only(plan: Plan, limits: Limits, flow: BackFlow, say: Say) -> Finding:
    """The fact that injection alone cannot land a sealed medium, with this plan's figures."""
    name, title = "injection_only", "injection alone"

    def finding(holds: bool | None, reason: str, remedy: str = "") -> Finding:
        least = 0.0 - flow.peak  # not -0.0
        margin = None if limits.min_rate is None else least - limits.min_rate
        return Finding(
            name,
            title,
            "physical",
            holds,
            least,
            limits.min_rate,
            margin,
            "rate",
            flow.peak_at if flow.stretches else None,
            reason,
            remedy,
        )

    if plan.medium.leaks:
        said = f"This plan lets {say(flow.volume, 'volume')} flow back." if flow.volume else "This plan needs no back-flow."
        return finding(None, f"The medium leaks or its face does, so injection alone is not ruled out. {said}")
    fact = "In a sealed medium no rate that is never negative lands exactly at rest in finite time."
    if not flow.stretches:
        return finding(
            True if limits.min_rate is not None else None,
            f"{fact} The back-flow this plan needs for it is below its own error bound, so it can be left out.",
        )
    stretches = ", ".join(f"{say(a, 'time')} to {say(b, 'time')}" for a, b in flow.main)
    if len(flow.stretches) > len(flow.main):
        stretches += f" and {len(flow.stretches) - len(flow.main)} shorter ones"
    level = plan.target.level - plan.target.start
    per_pressure = plan.medium.stored_volume(1.0)
    cost = flow.volume / per_pressure
    amount = (
        f"This plan lets {say(flow.volume, 'volume')} flow back, at most {say(flow.peak, 'rate')} "
        f"(at {say(flow.peak_at, 'time')}), during {stretches}."
    )
    if limits.min_rate is None or limits.min_rate < 0.0:
        return finding(None, f"{fact} {amount}")
    if level < 0.0:
        return finding(
            False,
            f"The target settles {say(-level, 'pressure')} below its start: {say(-level * per_pressure, 'volume')} "
            f"must come out of the ground, which injection alone cannot do. {amount}",
            "Allow back-flow of that size, or let the pressure come down through a medium that leaks.",
        )
    longer = stretched_plan(plan, _LONGER)
    low = extremes(longer, "injection_rate")
    then = back_flow(longer, low.least, low.least_at)
    left = f"{say(then.volume, 'volume')}, at most {say(then.peak, 'rate')}" if then.stretches else "less than the plan's own error"
    remedy = (
        f"Allow back-flow of {at_least(flow.peak, 'rate', say)}; or take {_LONGER:.0f} times as long, which leaves {left}; "
        f"or leave the back-flow out and accept that the target settles {say(cost, 'pressure')} too high."
    )
    return finding(False, f"{fact} {amount}", remedy)

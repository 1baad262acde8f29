"""Report, inputs: what the plan was made from."""

from __future__ import annotations

from flatplan.decide import LIMITS, Verdict
from flatplan.flat import Plan
from flatplan.show.numbers import amount, clock, level, significant
from flatplan.show.page import Markup, element, facts, joined, table
from flatplan.show.report_figures import medium_figure
from flatplan.show.report_medium import medium_part


def inputs_part(plan: Plan, verdict: Verdict | None, system: str) -> Markup:
    """Sketch of the path, medium, target and limits as stated."""
    return joined([medium_figure(plan, system), medium_part(plan, system), _target(plan, system), _limits(verdict, system)])


def _target(plan: Plan, system: str) -> Markup:
    target = plan.target
    moves = sorted(target.moves, key=lambda m: m.start)
    rows, now = [], target.start

    def shown(value: float) -> str:
        return level(value, target.largest_change, target.kind, system)

    for i, move in enumerate(moves, start=1):
        rows.append(
            (
                f"move {i}",
                clock(move.start),
                clock(move.end),
                shown(now),
                shown(now + move.change),
                significant(move.order),
                significant(move.easing),
            )
        )
        now += move.change
    what = "Pressure wanted at the target face" if target.kind == "pressure" else "Rate wanted through the target face"
    caption = (
        f"{what}: at rest at {shown(target.start)} when the plan starts, moves as below, holds between them, until {clock(target.end)} "
        "(days, hours:minutes since the start)"
    )
    return table(
        ("move", "begins", "ends", "from", "to", "Gevrey order", "easing"),
        rows,
        caption,
        numbers=(False, True, True, True, True, True, True),
    )


def _limits(verdict: Verdict | None, system: str) -> Markup:
    if verdict is None:
        return element("p", "Limits: none were applied.")
    stated = verdict.limits.stated
    if not stated:
        return element("p", "Limits: none were stated, so none was judged.")
    rows = [(LIMITS[name][2], amount(value, LIMITS[name][0], system)) for name, value in stated.items()]
    return facts(rows, "Limits of pump and ground; one that is not listed was not stated and does not bind")

"""Report, inputs: what the plan was made from."""

from __future__ import annotations

from flatplan.decide import LIMITS, Verdict
from flatplan.flat import Plan
from flatplan.show.numbers import amount, clock, duration, level, significant
from flatplan.show.page import Markup, element, facts, joined, table
from flatplan.show.quantities import medium_quantities

# what is zero in most wells and faces is said in one word instead
_WHEN_ZERO = {
    "leak through the target face": "none",
    "storage behind the target face": "none",
    "well resistance, skin included": "none",
    "wellbore storage": "none",
}


def inputs_part(plan: Plan, verdict: Verdict | None, system: str) -> Markup:
    """Medium, target and limits as stated."""
    return joined([_medium(plan, system), _target(plan, system), _limits(verdict, system)])


def _medium(plan: Plan, system: str) -> Markup:
    medium = plan.medium
    face = "held at its starting pressure" if medium.face.held else "sealed" if medium.face.sealed else "leaking or storing, as below"
    zones = len(medium.inputs.get("zones", ())) or 1
    varies = "" if all(s.uniform for s in medium.segments) else ", rock varying along the path"
    rows: list[tuple[str, str]] = [("flow", f"{medium.flow}, {zones} zone{'s' if zones > 1 else ''}{varies}"), ("target face", face)]
    if not any(s.leakage for s in medium.segments):
        rows.append(("leakage out of the layer", "none"))
    for words, value, kind in medium_quantities(medium):
        if value == 0.0 and words in _WHEN_ZERO:
            if not (medium.face.sealed and "face" in words):
                rows.append((words, _WHEN_ZERO[words]))
        elif kind == "time":
            rows.append((words, duration(value)))
        else:
            rows.append((words, amount(value, kind, system)))
    return facts(rows, "The medium between the target face and the well")


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

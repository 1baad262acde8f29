"""Report, last part: the rate table, how to use it, when to stop, and what to keep in mind."""

from __future__ import annotations

import platform
from datetime import date
from typing import Any

import numpy as np

from flatplan import __version__
from flatplan.channels import Channels, described
from flatplan.decide import Verdict
from flatplan.field import PumpedSteps
from flatplan.flat import Plan, Target
from flatplan.show.cautions import CAUTIONS, IN_THE_FIELD, LEFT_OUT, STOP_WHEN
from flatplan.show.job import Job
from flatplan.show.numbers import amount, clock, decimals, duration, fixed, level, moment, reading_unit
from flatplan.show.page import Markup, bullets, element, joined, table
from flatplan.show.sources import sources_of
from flatplan.show.table_histories import expected_at_step_ends, relative
from flatplan.show.times import even_times

_MOST_ROWS = 1500  # more would make the page heavy; the CSV has them all


def rate_part(job: Job, every: Any, system: str) -> Markup:
    """The pumped steps where they are given, else the plan at even times; in a medium that leaks also what must go on, and volumes."""
    rates = _steps_table(job.steps, system) if job.steps is not None else _plan_table(job.plan, every, system)
    return joined([_afterwards(job, system), rates, _volumes(job.plan, system)])


def _afterwards(job: Job, system: str) -> Markup:
    """The steady rate that keeps the last level of a medium that leaks."""
    rate = job.keeping_rate
    if rate is None:
        return Markup("")
    last = "the last step" if job.steps is not None else "the end of the plan"
    if rate == 0.0:
        return element("p", f"After {last} nothing needs to be pumped: the plan ends at the level it started from.")
    return element(
        "p",
        element("strong", f"After {last} pump on at a steady {amount(rate, 'rate', system)}"),
        " for as long as the last level is to be kept: fluid goes on leaving the medium at that rate. The table ends there; "
        "the pumping does not.",
    )


def _volumes(plan: Plan, system: str) -> Markup:
    """Injected, stored and leaked volume at the end of each move and hold, where the medium leaks."""
    if not plan.medium.leaks:
        return Markup("")
    marks = stages(plan.target)
    volumes = plan.volumes([when for _, when in marks])
    scale = 0.1 * float(np.max(np.abs([volumes.injected, volumes.stored, volumes.leaked])))
    columns = [_shown(v, "volume", scale, system) for v in (volumes.injected, volumes.stored, volumes.leaked)]
    rows = [(what, clock(when), *values) for (what, when), *values in zip(marks, *columns, strict=True)]
    through = "through the target face" if plan.medium.face.held or plan.medium.face.leak else ""
    bed = "through the confining bed" if any(s.leakage for s in plan.medium.segments) else ""
    behind = ", wellbore and behind the target face" if plan.medium.face.storage else " and wellbore"
    caption = (
        f"Where the fluid is, in volumes since the start of the plan: stored in rock{behind}, or gone "
        f"{' and '.join(filter(None, (bed, through)))}. Injected is stored plus leaked"
    )
    head = ("at the end of", "time [d\u00a0hh:mm]", *(_head(w, "volume", system) for w in ("injected", "stored", "leaked")))
    return table(head, rows, caption, numbers=(False, True, True, True, True))


def stages(target: Target) -> list[tuple[str, float]]:
    """Each move and hold in order, with the time at which it ends [s]."""
    found: list[tuple[str, float]] = []
    at = 0.0
    for i, move in enumerate(sorted(target.moves, key=lambda m: m.start), start=1):
        if move.start > at:
            found.append(("hold", move.start))
        found.append((f"move {i}", move.end))
        at = max(at, move.end)
    return [*found, ("hold", target.end)] if target.end > at else found


def _shown(values: np.ndarray, kind: str, scale: float, system: str) -> list[str]:
    factor, _ = reading_unit(kind, system)
    places = decimals(scale / factor)
    return [fixed(v, places) for v in values / factor]


def _head(words: str, kind: str, system: str) -> str:
    return f"{words} [{reading_unit(kind, system)[1]}]"


def _steps_table(steps: PumpedSteps, system: str) -> Markup:
    expected = expected_at_step_ends(steps)
    peak = steps.plan.certificate.peak
    volumes = steps.volumes
    total = np.cumsum(volumes)
    columns: list[tuple[str, list[str]]] = [
        ("step", [str(i) for i in range(1, len(volumes) + 1)]),
        ("from [d\u00a0hh:mm]", [clock(t) for t in steps.edges[:-1]]),
        ("to [d\u00a0hh:mm]", [clock(t) for t in steps.edges[1:]]),
        (_head("rate", "rate", system), _shown(steps.rates, "rate", float(np.abs(steps.rates).max()), system)),
        (_head("volume", "volume", system), _shown(volumes, "volume", 0.1 * float(np.abs(total).max()), system)),
        (_head("cumulative volume", "volume", system), _shown(total, "volume", 0.1 * float(np.abs(total).max()), system)),
        (
            _head(f"bottomhole pressure{' change' if relative(steps.plan) else ''} at the end", "pressure", system),
            _shown(expected.bottomhole_pressure, "pressure", peak["bottomhole_pressure"], system),
        ),
    ]
    kind, words = described("target_pressure", expected.target_kind)
    columns.append((_head(f"{words} at the end", kind, system), _shown(expected.target_pressure, kind, peak["target_pressure"], system)))
    caption = (
        f"The rate as pumped: {len(volumes)} steps, times since the start. Pressures are what the independent model expects just "
        "before the step ends, "
        "when the steps are pumped as listed. Each step carries exactly the volume of the plan. Negative: back-flow."
    )
    return _long_table(columns, caption, 3)


def _plan_table(plan: Plan, every: Any, system: str) -> Markup:
    channels: Channels = plan.at(even_times(plan.end, every))
    peak = plan.certificate.peak
    columns: list[tuple[str, list[str]]] = [("time [d\u00a0hh:mm]", [clock(t) for t in channels.times])]
    for name in ("injection_rate", "injected_volume", "bottomhole_pressure", "sandface_pressure", "target_pressure"):
        kind, words = described(name, channels.target_kind)
        if name == "injected_volume":
            words = "cumulative volume"
        elif kind == "pressure" and relative(plan):
            words += " change"
        columns.append((_head(words, kind, system), _shown(getattr(channels, name), kind, peak[name], system)))
    caption = (
        "The smooth plan at even times since the start. A pump that holds its rate over steps needs the step table instead: "
        "the rate at a moment is not the rate of a step. Negative: back-flow."
    )
    return _long_table(columns, caption, 1)


def _long_table(columns: list[tuple[str, list[str]]], caption: str, words: int) -> Markup:
    rows = list(zip(*(values for _, values in columns), strict=True))
    if len(rows) > _MOST_ROWS:
        stride = -(-len(rows) // _MOST_ROWS)
        caption = (
            f"{caption} Of {len(rows)} rows only one in {stride} is printed here; the full table belongs to the CSV file of this plan."
        )
        rows = rows[::stride]
    return table([head for head, _ in columns], rows, caption, numbers=[i >= words or i == 0 for i in range(len(columns))], class_="rates")


def use_part(job: Job, verdict: Verdict | None, system: str) -> Markup:
    """How to use the table, when to stop, and what a stop leads to, with this plan's numbers."""
    plan = job.plan
    stated = verdict.limits.stated if verdict is not None else {}
    limit = (
        f"The bottomhole limit of this plan is {amount(stated['max_bottomhole_pressure'], 'pressure', system)}."
        if "max_bottomhole_pressure" in stated
        else "No bottomhole limit was stated for this plan: state one before pumping."
    )
    at_rest = level(plan.target.start, plan.target.largest_change, plan.target.kind, system)
    start = "" if plan.medium.face.held else f" The start pressure of this plan is {at_rest} at the target."
    return joined(
        [
            bullets([IN_THE_FIELD[0] + start, *IN_THE_FIELD[1:]], "ol"),
            element("h3", "Stop, or do not start, when"),
            bullets(STOP_WHEN),
            element("p", limit),
            element("h3", "What a stop leads to"),
            element("p", _after_a_stop(job, system)),
        ]
    )


def _after_a_stop(job: Job, system: str) -> str:
    plan, stop = job.plan, job.stop
    travel = duration(plan.medium.travel_time)
    if stop is None and plan.medium.face.held:
        return (
            f"The rate through the target face follows the well with a delay of about the travel time ({travel}): after a stop it "
            "first goes on, then dies away, and pressures return to the one the face is held at."
        )
    if stop is None:
        return (
            f"Pressure at the target follows the well with a delay of about the travel time ({travel}): after a stop it first goes "
            "on changing, then returns "
            "towards the start as the fluid leaks away. This page does not say how fast."
        )
    change = plan.target.largest_change
    return (
        f"A stop does not hold the target where it is. Pressures even out within about one travel time ({travel}) and then stay, "
        "because nothing leaks in this "
        f"model. A stop on {moment(stop.when, plan.end)} would let the target rise most: by another "
        f"{amount(stop.rise, 'pressure', system, 3)}, to "
        f"{level(stop.settled, change, 'pressure', system)}. Whatever the moment of the stop, it would settle at "
        f"{level(stop.highest, change, 'pressure', system)} or below. "
        "To bring pressure down again, fluid has to be taken out."
    )


def cautions_part() -> Markup:
    """Cautions, in one list."""
    return bullets(CAUTIONS)


def left_out_part() -> Markup:
    """What the model leaves out, in one list."""
    return bullets(LEFT_OUT)


def sources_part(plan: Plan, simulated: bool) -> Markup:
    """Sources by key."""
    return bullets(f"[{key}] {line}" for key, line in sources_of(plan, simulated).items())


def signatures() -> Markup:
    """Room to sign."""
    rows = [(role, "", "", "") for role in ("prepared by", "checked by", "approved by")]
    return table(
        ("", "name", "date", "signature"),
        rows,
        "This page records a calculation; signed or not, it is no permit.",
        class_="sign",
    )


def footer() -> Markup:
    """Program, versions, date."""
    words = f"Made with flatplan {__version__} (Python {platform.python_version()}, numpy {np.__version__}) on {date.today().isoformat()}."
    return element("footer", words)

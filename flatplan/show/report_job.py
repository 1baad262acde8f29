"""Report, first part: the job in one paragraph, its numbers, and where it stands."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise

from flatplan.decide import Verdict
from flatplan.numeric import Check
from flatplan.show.job import Job, Peak
from flatplan.show.numbers import amount, duration, level, moment, percent, reading_unit, significant
from flatplan.show.page import Markup, element, joined
from flatplan.show.table_histories import relative

_MOST_MOVES, _MOST_LEVELS = 5, 4


def default_title(job: Job, system: str) -> str:
    """A title from the numbers, for a report that is given none."""
    target = job.plan.target
    levels = [target.start]
    for move in sorted(target.moves, key=lambda m: m.start):
        levels.append(levels[-1] + move.change)
    if len(levels) > _MOST_LEVELS:
        levels = [min(levels), max(levels)]
        join = " and "
        what = f"{len(target.moves)} moves between "
    else:
        join, what = " → ", ""
    factor, unit = reading_unit(target.kind, system)
    numbers = join.join(significant(v / factor, 5) for v in levels)
    where = f"{amount(job.plan.medium.length, 'length', system, 3)} from the well"
    at = f" through a face {where}" if target.kind == "rate" else f", {where}"
    return f"Injection plan: {what}{numbers} {unit}{at}, in {duration(job.plan.end)}"


def job_paragraph(job: Job, system: str) -> Markup:
    """What is to be reached, by when, and what to pump for it."""
    return element("p", _wanted(job, system), " ", _pumped(job, system), class_="lead")


def _wanted(job: Job, system: str) -> str:
    plan, target = job.plan, job.plan.target
    span = plan.end

    def shown(value: float) -> str:
        return level(value, target.largest_change, target.kind, system)

    what = "Pore pressure at the target face" if target.kind == "pressure" else "The rate through the target face"
    head = f"{what}, {amount(plan.medium.length, 'length', system)} from the well, is to"
    moves = sorted(target.moves, key=lambda m: m.start)
    overlap = any(a.end > b.start for a, b in pairwise(moves))
    if len(moves) > _MOST_MOVES or overlap:
        ends = f"from {shown(target.start)} to {shown(target.level)}"
        return f"{head} go {ends} in {len(moves)} moves over {duration(span)} (listed under inputs)."
    parts: list[str] = []
    at, now = 0.0, target.start
    for move in moves:
        if move.start > at:
            parts.append(
                f"stay there for {duration(move.start - at)}" if parts else f"stay at {shown(now)} for {duration(move.start - at)}"
            )
        word = "rise" if move.change > 0.0 else "fall"
        origin = f"from {shown(now)} " if not parts else ""
        now += move.change
        parts.append(f"{word} {origin}to {shown(now)} within {duration(move.duration)} (by {moment(move.end, span)})")
        at = move.end
    if target.end > at:
        parts.append(f"stay there for {duration(target.end - at)}")
    listed = parts[0] if len(parts) == 1 else f"{', '.join(parts[:-1])}, and {parts[-1]}"
    return f"{head} {listed}."


def _pumped(job: Job, system: str) -> str:
    span = job.plan.end
    injected, back = job.volumes
    high, low, deep = job.highest_rate, job.lowest_rate, job.highest_bottomhole

    def volume(value: float) -> str:
        return amount(value, "volume", system)

    how = f"in {len(job.steps.rates)} steps of {duration(job.steps.every)}" if job.steps is not None else "at a smoothly varying rate"
    parts = []
    if high.value > 0.0:
        parts.append(f"inject {volume(injected)} over {duration(span)}, {how}, at up to {_rate(high, span, system)}")
    if back and low.value < 0.0:
        parts.append(f"let {volume(back)} flow back, at up to {_rate(Peak(-low.value, low.when), span, system)}")
    text = f"To do it, {'; '.join(parts) or 'nothing is pumped'}."
    if len(parts) == 2:
        text += f" That leaves {volume(job.net_volume)} net."
    if job.keeping_rate:
        text += f" After that the level is kept by a steady {amount(job.keeping_rate, 'rate', system)}, for as long as it is wanted."
    what = "Bottomhole pressure changes by up to" if relative(job.plan) else "Bottomhole pressure reaches"
    return f"{text} {what} {_pressure(job, deep.value, system)} on {moment(deep.when, span)}."


def _rate(peak: Peak, span: float, system: str) -> str:
    return f"{amount(peak.value, 'rate', system)} (on {moment(peak.when, span)})"


def _pressure(job: Job, value: float, system: str) -> str:
    change = job.plan.certificate.peak["bottomhole_pressure"]
    return level(value, change, "pressure", system)


def key_numbers(job: Job, verdict: Verdict | None, system: str) -> Markup:
    """The numbers an engineer looks for first, each with its time or limit."""
    span = job.plan.end
    stated = verdict.limits.stated if verdict is not None else {}
    injected, back = job.volumes
    high, low, deep = job.highest_rate, job.lowest_rate, job.highest_bottomhole

    def limit(name: str, kind: str) -> str:
        return f", limit {amount(stated[name], kind, system)}" if name in stated else ", no limit stated"

    rows = [
        ("Highest rate", amount(high.value, "rate", system), f"on {moment(high.when, span)}{limit('max_rate', 'rate')}"),
        (
            "Lowest rate",
            amount(low.value, "rate", system),
            f"{f'back-flow, on {moment(low.when, span)}' if low.value < 0.0 else 'no back-flow'}{limit('min_rate', 'rate')}",
        ),
        (
            f"Highest bottomhole pressure{' change' if relative(job.plan) else ''}",
            _pressure(job, deep.value, system),
            f"on {moment(deep.when, span)}{limit('max_bottomhole_pressure', 'pressure')}",
        ),
        (
            "Volume, net",
            amount(job.net_volume, "volume", system),
            f"{amount(injected, 'volume', system)} in, {amount(back, 'volume', system)} back",
        ),
        ("Duration", duration(span), f"travel time of pressure {duration(job.plan.medium.travel_time)}"),
    ]
    if job.keeping_rate is not None:
        rows.append(
            ("Steady rate afterwards", amount(job.keeping_rate, "rate", system), "keeps the last level; it must go on after the last step")
        )
    if job.stop is not None:
        settled = level(job.stop.highest, job.plan.target.largest_change, "pressure", system)
        rows.append(("Target after a stop", f"≤ {settled}", "once pressures even out, whenever pumping stops"))
    return element(
        "dl",
        *(element("div", element("dt", what), element("dd", value, element("small", more))) for what, value, more in rows),
        class_="numbers",
    )


def standing(job: Job, verdict: Verdict | None, check: Check | None, system: str) -> Markup:
    """Realizable? Confirmed? As pumped? Each with a mark and words, and a warning where the answer is no."""
    items = [_judged(verdict), _checked(check, "Plan", "not run on the independent model")]
    if job.steps is not None or job.steps_check is not None:
        items.append(_checked(job.steps_check, "Rate as pumped", "not compared with the target"))
    items += _beyond_as_pumped(job, verdict, system)
    boxes = [
        element("li", element("strong", f"{_MARKS[item.good]} {item.title}"), item.words, class_=_CLASSES[item.good]) for item in items
    ]
    wrong = [f"{item.title[0].lower()}{item.title[1:]} ({item.words})" for item in items if item.good is False]
    warning = Markup("")
    if wrong:
        repair = "The figures and tables below show it as it is, so that it can be repaired."
        warning = element("p", element("strong", "Do not pump this plan as it stands: "), f"{'; '.join(wrong)}. {repair}", class_="warning")
    return joined([element("ul", *boxes, class_="status"), warning])


@dataclass(frozen=True)
class _Standing:
    """One answer: good, bad or open (None), with a title and words."""

    good: bool | None
    title: str
    words: str


_MARKS = {True: "✓", False: "✗", None: "–"}
_CLASSES = {True: "good", False: "bad", None: None}


def _beyond_as_pumped(job: Job, verdict: Verdict | None, system: str) -> list[_Standing]:
    """Bottomhole limits that the plan keeps and the steps do not: the verdict is about the smooth plan."""
    if verdict is None or job.steps_check is None:
        return []
    stated, found = verdict.limits.stated, []
    values = job.steps_check.channels.bottomhole_pressure
    for name, sign, reached in (("max_bottomhole_pressure", 1.0, values.max()), ("min_bottomhole_pressure", -1.0, values.min())):
        if name in stated and sign * (float(reached) - stated[name]) > 0.0 and verdict[name].holds:
            against = f"{_pressure(job, float(reached), system)} against {_pressure(job, stated[name], system)}"
            words = f"{against}; shorter steps bring it nearer to the plan"
            found.append(_Standing(False, "Bottomhole pressure as pumped beyond its limit", words))
    return found


def _judged(verdict: Verdict | None) -> _Standing:
    if verdict is None:
        return _Standing(None, "Not assessed", "no limits were applied")
    if verdict.realizable:
        return _Standing(True, "Realizable", "every finding that was asked for is met")
    count = len(verdict.failing)
    return _Standing(
        False, "Not realizable", f"{count} finding{'s' if count > 1 else ''} not met: {', '.join(f.title for f in verdict.failing)}"
    )


def _checked(check: Check | None, what: str, missing: str) -> _Standing:
    if check is None:
        return _Standing(None, f"{what} not confirmed", missing)
    share = percent(check.target_error / check.target_change)
    words = f"target off by {'' if share.startswith('less') else 'up to '}{share} of the change, {percent(check.allowed)} allowed"
    return _Standing(check.confirmed, f"{what} confirmed" if check.confirmed else f"{what} not confirmed", words)

"""The shortest durations of a target's moves under the limits of pump and ground."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

from flatplan import units
from flatplan.decide.assessment import assess
from flatplan.decide.eased import EasedSearch, Start
from flatplan.decide.extremes import all_extremes
from flatplan.decide.findings import Verdict
from flatplan.decide.free_shape import free_move
from flatplan.decide.limits import Limits
from flatplan.decide.move_shape import coefficients, move_shape
from flatplan.decide.physical import DEMANDS, Demand, at_least
from flatplan.decide.shifted import ORDER
from flatplan.decide.speed_limit import MODES, STEPS, speed_limit
from flatplan.decide.unreachable import check_held, check_level, check_signs, check_stated, levels
from flatplan.flat import Move, Plan, Target, feedforward
from flatplan.flat.target import replace_moves
from flatplan.records import Record, of_type, one_of
from flatplan.site import Medium

SHAPES = ("eased", "free")
# What a move is stretched by once the search has found it on its own grid, and again where it fails: then four times as much, and so on.
_NUDGE = 2e-6
_FREE_NUDGE = 3e-4
_MOST_NUDGES = 9


@dataclass(frozen=True)
class Found:
    """One move as found: its pieces, counted from its own start, and how long it takes.

    Attributes
    ----------
    pieces : tuple of Move
        Moves of the target that carry it out.
    duration : float
        [s].
    order, easing : float
        Gevrey order, and the bump's width as a share of the duration.
    binding : tuple of str
        Limits that it uses up.
    """

    pieces: tuple[Move, ...]
    duration: float
    order: float
    easing: float
    binding: tuple[str, ...]

    def stretched(self, factor: float) -> Found:
        """The same in ``factor`` times the time."""
        pieces = tuple(Move(m.start * factor, m.duration * factor, m.change, m.order, m.easing) for m in self.pieces)
        return Found(pieces, self.duration * factor, self.order, self.easing, self.binding)


@dataclass(frozen=True, repr=False)
class Quickest(Record):
    """The quickest target found, with its plan and what stands in the way of a quicker one.

    Attributes
    ----------
    target : Target
    plan : Plan
    verdict : Verdict
        Of the plan under the limits: no limit fails.
    duration : float
        Of the whole programme, holds included [s].
    durations : tuple of float
        Of each move [s].
    order, easing : tuple of float
        Of each move; of a free shape the order of its steps, and their width as a share of the duration.
    binding : tuple of tuple of str
        For each move the names of the limits that it uses up, to 0.2 % of their range; empty where the move is at the shortest duration
        that is sought, or that its series resolves.
    physical_limit : float or None
        Total duration [s] that no rate history of any shape can beat, rest to rest at the same levels and with the same holds, under
        max_rate and min_rate alone; None where rates are not limited enough for one.
    physical_limit_note : str
        What is claimed about its accuracy.
    """

    target: Target
    plan: Plan
    verdict: Verdict
    duration: float
    durations: tuple[float, ...]
    order: tuple[float, ...]
    easing: tuple[float, ...]
    binding: tuple[tuple[str, ...], ...]
    physical_limit: float | None
    physical_limit_note: str

    def _title(self) -> str:
        return f"Quickest: {units.text(self.duration, 'time')}"

    def _rows(self) -> Iterable[tuple[str, str]]:
        for i, (duration, order, easing, binding) in enumerate(zip(self.durations, self.order, self.easing, self.binding, strict=True), 1):
            limits = ", ".join(binding) or "none (the shortest duration sought)"
            yield f"move {i}", f"{units.text(duration, 'time')}, order {order:.4g}, easing {easing:.4g}; limited by {limits}"
        if self.physical_limit is not None:
            share = self.duration / self.physical_limit
            yield "physical limit", f"{units.text(self.physical_limit, 'time')} (this plan: {share:.3g} times that)"
        yield "of that limit", self.physical_limit_note
        yield "verdict", self.verdict._title()


def quickest(
    medium: Medium, target: Target, limits: Limits, *, shape: str = "eased", order: Any = None, easing: Any = None, tolerance: float = 1e-9
) -> Quickest:
    """The shortest durations in which a target's moves can be made under the limits.

    Parameters
    ----------
    medium : Medium
    target : Target
        One move, or moves one after another with holds between. Its levels and holds are kept; its durations, orders and easings
        are not.
    limits : Limits
        At least one.
    shape : {"eased", "free"}
        Family searched: each move an eased ramp; or the levels of up to 48 shifted steps of order 1.83, by linear program (the eased
        ramp where no free shape is quicker).
    order : float, optional
        Gevrey order of every move; by default chosen for each move, from 1.2 to 1.96.
    easing : float, optional
        Easing of every move; by default chosen for each move, from 0.02 to 1.
    tolerance : float
        Of the plan, as in `feedforward`.

    Returns
    -------
    Quickest

    Raises
    ------
    TypeError
        A medium, target or limits of another type.
    ValueError
        No move or moves that overlap; an order or easing with a free shape; no limits; an order, easing or shape out of range; a limit
        that no duration can meet, with the number that would do; a job that the series cannot hold.

    Notes
    -----
    For one order and easing the extremes of the plan depend on the duration alone, and the shortest duration is a root. It is found
    on a grid of the dimensionless shape, then checked on the plan itself with the extremes of `assess`, which hold between samples,
    and lengthened by parts in a million until they pass. Moves are at rest at both ends, so they meet only in the levels of pressure
    and volume that they start from. Durations under a sixteenth of the travel time are not sought, nor shapes with corners so sharp
    that 90 terms do not resolve them, whose plans would take hundreds. Assumed, not checked: that a limit once met by a shape stays
    met by longer durations.

    The physical limit is the lower end of a bracket, see `flatplan.decide.speed_limit`; pressure limits are left out of it, which
    can only lower it.
    """
    of_type(medium, Medium, "medium", "a medium made by slab() or its sisters")
    of_type(target, Target, "target", "a Target")
    of_type(limits, Limits, "limits", "flatplan Limits")
    one_of(shape, SHAPES, "shape")
    if shape == "free" and (order is not None or easing is not None):
        raise ValueError(f"{'order' if order is not None else 'easing'}: is for eased ramps; leave it out, or take shape='eased'.")
    if order is not None or easing is not None:
        trial = Target(0.0).move(by=1.0, over=1.0, order=1.8 if order is None else order, easing=1.0 if easing is None else easing).moves[0]
        order, easing = None if order is None else trial.order, None if easing is None else trial.easing
    gaps = _gaps(target)
    check_stated(limits)
    check_held(medium, target, limits)
    # what a plan refuses (another kind of target, tolerances out of range, too leaky a medium) is said before any search
    feedforward(medium, _slow(target, medium), tolerance=tolerance)
    for level in levels(target):
        check_level(medium, target, limits, level)
    check_signs(medium, limits)
    if not medium.leaks and limits.min_rate is not None and limits.min_rate >= 0.0:
        raise _injection_only(medium, target, limits)
    found, volume = [], 0.0
    for move, level, gap in zip(target.moves, levels(target), gaps[1:], strict=False):
        start = Start(level, volume, target.rest_pressure)
        one = _eased(medium, move, limits, start, order, easing)
        if shape == "free":
            one = _free(medium, move, limits, start, one)
        found.append(one)
        volume += _volume_taken(medium, level, one, gap)
    verdict, found = _settled(medium, target, limits, found, gaps, tolerance)
    limit, note = physical_limit(medium, target, limits, gaps)
    return Quickest(
        verdict.plan.target,
        verdict.plan,
        verdict,
        verdict.plan.end,
        tuple(one.duration for one in found),
        tuple(one.order for one in found),
        tuple(one.easing for one in found),
        tuple(one.binding for one in found),
        limit,
        note,
    )


# --- the programme -----------------------------------------------------------------------------------


def _gaps(target: Target) -> list[float]:
    """Holds: before the first move, and after each move [s]."""
    if not target.moves:
        raise ValueError('target: has no move; add at least one, such as .move(to="22.5 MPa", over="3 d").')
    gaps = [target.moves[0].start]
    for before, after in pairwise(target.moves):
        gap = after.start - before.end
        if gap < -1e-9 * target.end:
            raise ValueError(
                f"target: a move begins at {units.text(after.start, 'time')}, before the last one is over at "
                f"{units.text(before.end, 'time')}; quickest takes moves one after another."
            )
        gaps.append(max(gap, 0.0))
    gaps.append(max(target.end - target.moves[-1].end, 0.0))
    return gaps


def _slow(target: Target, medium: Medium) -> Target:
    """The first move alone, slow."""
    first = target.moves[0]
    return replace_moves(target, (Move(0.0, 8.0 * medium.travel_time, first.change, 1.8, 1.0),), 8.0 * medium.travel_time)


def joined(target: Target, found: list[Found], gaps: list[float]) -> Target:
    """The programme with its moves as found and its holds as they were."""
    moves: list[Move] = []
    now = gaps[0]
    for one, gap in zip(found, gaps[1:], strict=True):
        moves.extend(Move(now + m.start, m.duration, m.change, m.order, m.easing) for m in one.pieces)
        now += one.duration + gap
    return replace_moves(target, tuple(moves), now)


def _volume_taken(medium: Medium, level: float, one: Found, gap: float) -> float:
    """Net volume injected during a move and the hold after it [m³]: ``c_0 ∫y dt + c_1 Δy``, as all else in the series is at rest."""
    c_0, c_1 = (float(c) for c in medium.coefficients("injection_rate", 1))
    change = sum(m.change for m in one.pieces)
    # each piece is even about its middle
    area = level * one.duration + sum(m.change * (one.duration - m.start - 0.5 * m.duration) for m in one.pieces)
    return c_1 * change + c_0 * (area + (level + change) * gap)


def _eased(medium: Medium, move: Move, limits: Limits, start: Start, order: float | None, easing: float | None) -> Found:
    search = EasedSearch(medium, move.change, limits, start)
    best = search.best(order, easing)
    if best is None:
        raise ValueError(_not_reached(search, order, easing))
    piece = Move(0.0, best.duration, move.change, best.order, best.easing)
    return Found((piece,), best.duration, best.order, best.easing, search.binding(best))


def _free(medium: Medium, move: Move, limits: Limits, start: Start, eased: Found) -> Found:
    """The free shape, or the eased one where that is as quick."""
    free = free_move(medium, move.change, limits, start.level, start.volume, start.rest_pressure, eased.duration)
    if free is None:
        return eased
    return Found(free.steps.moves(free.levels), free.steps.end, ORDER, free.steps.width / free.steps.end, free.binding)


def _not_reached(search: EasedSearch, order: float | None, easing: float | None) -> str:
    """The sentence for a move that meets its limits at no duration looked at: the limit that fails by the least, and by how much."""
    shape = move_shape(1.8 if order is None else order, 0.3 if easing is None else easing)
    least = search.least_duration()
    durations = [least * 4.0**i for i in range(7)]
    tried = [(duration, margins) for duration in durations if (margins := search.margins(shape, duration)) is not None]
    if not tried:
        return "order: of the order and easing asked for, the series resolves no duration looked at; take a larger easing or a lower order."
    duration, margins = max(tried, key=lambda pair: min(pair[1].values()))
    name = min(margins, key=lambda key: margins[key])
    demand, limit = next((d, value) for d, value in search.demands if d.name == name)
    margin = margins[name] * search.scales[name]
    value = limit + margin if demand.side == "least" else limit - margin
    return (
        f"{name}: got {units.text(limit, demand.kind)}, which no duration from {units.text(least, 'time')} to "
        f"{units.text(durations[-1], 'time')} meets together with the other limits; {units.text(value, demand.kind, digits=6)} would do, "
        f"at {units.text(duration, 'time')}."
    )


def _settled(
    medium: Medium, target: Target, limits: Limits, found: list[Found], gaps: list[float], tolerance: float
) -> tuple[Verdict, list[Found]]:
    """The verdict on the whole plan, with the moves that exceed a limit between samples stretched until none does."""
    demands = [d for d in DEMANDS if d.name in limits.stated]
    # a free shape is found on a coarser grid
    nudge = [_NUDGE if len(one.pieces) == 1 else _FREE_NUDGE for one in found]
    found = [one.stretched(1.0 + first) for one, first in zip(found, nudge, strict=True)]
    nudges = [0] * len(found)
    while True:
        plan = feedforward(medium, joined(target, found, gaps), tolerance=tolerance)
        seen = all_extremes(plan, [(d.channel, d.derivative) for d in demands])
        failing: dict[int, tuple[Demand, float]] = {}
        for demand, extreme in zip(demands, seen, strict=True):
            value, when = demand.measure(plan, extreme)
            if demand.margin(value, limits.stated[demand.name]) < -demand.error(plan):
                failing[_move_at(when, found, gaps)] = demand, value
        if not failing:
            return assess(plan, limits), found
        for i, (demand, value) in failing.items():
            if nudges[i] >= _MOST_NUDGES:
                raise ValueError(
                    f"{demand.name}: got {units.text(limits.stated[demand.name], demand.kind)}, which the programme as a whole does not "
                    f"keep; {units.text(value, demand.kind, digits=6)} would do, in {units.text(plan.end, 'time')}."
                )
            found[i] = found[i].stretched(1.0 + nudge[i] * 4.0 ** nudges[i])
            nudges[i] += 1


def _move_at(when: float, found: list[Found], gaps: list[float]) -> int:
    """The last move that has begun by a time."""
    begins, last = gaps[0], 0
    for i, one in enumerate(found):
        if when >= begins:
            last = i
        begins += one.duration + gaps[i + 1]
    return last


# --- what cannot be, and what nothing can beat ---------------------------------------------------------


def _injection_only(medium: Medium, target: Target, limits: Limits) -> ValueError:
    """The refusal of injection alone in a sealed medium, with the back-flow that the target as it stands takes."""
    needed = 0.0
    for move in target.moves:
        shape, duration, unit = move_shape(move.order, move.easing), move.duration, None
        while unit is None:
            unit = shape.channel(coefficients(medium, "injection_rate"), medium.travel_time, duration)
            duration *= 2.0
        # a slow move lets so little back that it drowns in rounding
        needed = max(needed, 1e-9 * abs(medium.stored_volume(move.change)) / duration, -float((move.change * unit).min()))
    return ValueError(
        f"min_rate: got {units.text(limits.min_rate or 0.0, 'rate')}, but in a sealed medium no rate that is never negative lands exactly "
        f"at rest, however slow the move; the target as it stands takes -{at_least(1.001 * needed, 'rate', units.text)}, which would do."
    )


def physical_limit(medium: Medium, target: Target, limits: Limits, gaps: list[float]) -> tuple[float | None, str]:
    """(total duration that no rate history beats [s], what is claimed about it)."""
    least = -math.inf if limits.min_rate is None else limits.min_rate
    most = math.inf if limits.max_rate is None else limits.max_rate
    if math.isinf(least) and math.isinf(most):
        return None, "not computed: neither max_rate nor min_rate is stated"
    try:
        brackets = [speed_limit(medium, a, b, least, most) for a, b in pairwise(levels(target))]
    except ValueError as problem:  # a stimulated well with wellbore storage has no independent model
        return None, f"not computed: {problem}"
    known = [one for one in brackets if one is not None]
    if len(known) < len(brackets):
        return None, "not computed: for one of the moves the rate is not limited on the side that it needs"
    lower, upper = sum(one.lower for one in known) + sum(gaps), sum(one.upper for one in known) + sum(gaps)
    if math.isinf(upper):
        return lower, "a lower bound from the slowest mode alone, as only one of max_rate and min_rate is stated; pressure limits left out"
    return lower, (
        f"a lower bound, proven by duality for every rate history; from above, rates constant over {STEPS} steps settle the slowest "
        f"modes (up to {MODES}) in {units.text(upper, 'time', digits=5)}, {100.0 * (upper / lower - 1.0):.2g} % more; "
        "pressure limits left out"
    )

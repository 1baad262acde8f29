"""The nearest realizable target to any wanted curve, by linear programs over the levels of shifted steps."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy import sparse

from flatplan import units
from flatplan.decide.assessment import assess
from flatplan.decide.extremes import all_extremes
from flatplan.decide.findings import Verdict
from flatplan.decide.limits import Limits
from flatplan.decide.physical import DEMANDS, Demand
from flatplan.decide.shifted import ORDER, RATIOS, LimitRows, ShiftedSteps, chosen, exceeding, limit_rows
from flatplan.decide.unreachable import check_held, check_level
from flatplan.flat import Plan, Target, feedforward
from flatplan.flat.target import replace_moves
from flatplan.records import Record, of_type, one_of, quoted
from flatplan.site import Medium

MEASURES = ("largest", "total")
_SAMPLES = 1200  # times at which the deviation counts, next to the wanted curve's own
_NARROWEST = 4.0  # travel times over width: below it the series of a step is long
_WIDER = 1.7  # from one width tried to the next
_MOST_WIDTHS = 6
_ROUNDS = 4  # of adding times at which a limit is exceeded
_EVERY = 4  # limits are first asked at every fourth of the 400 points of a width
_PATIENCE = 10.0, 3.0  # for a program, and for one that only smooths the answer [s]
BACK_OFF = 1e-4  # what limits are drawn in by, as a share of their room: 400 points of a width see an extreme to about as much
_MOST_BACK_OFF = 0.05
_MOST_STEPS = 400


@dataclass(frozen=True)
class Wanted:
    """A curve to come close to.

    Attributes
    ----------
    times : ndarray
        [s], rising, from 0 or later.
    values : ndarray
        Pressure [Pa, absolute] (held face: rate [m³/s]).
    """

    times: np.ndarray
    values: np.ndarray

    def at(self, times: np.ndarray) -> np.ndarray:
        """Straight between its points."""
        return np.interp(times, self.times, self.values)


@dataclass(frozen=True, repr=False, eq=False)
class Closest(Record):
    """The nearest target found, with its plan.

    Attributes
    ----------
    target : Target
    plan : Plan
    verdict : Verdict
        Of the plan under the limits.
    deviation : float
        Largest departure from the wanted curve [Pa] (held face [m³/s]); for the measure "total" too.
    deviation_at : float
        When that is [s].
    mean_deviation : float
        Mean of the absolute departure over the wanted curve's time.
    wanted : Wanted
    measure : str
        What was made smallest: "largest" or "total".
    width : float
        Of the steps [s].
    order : float
        Gevrey order of the steps.
    """

    target: Target
    plan: Plan
    verdict: Verdict
    deviation: float
    deviation_at: float
    mean_deviation: float
    wanted: Wanted
    measure: str
    width: float
    order: float

    def _title(self) -> str:
        return f"Closest: within {units.text(self.deviation, self.target.kind)} of what is wanted"

    def _rows(self) -> Iterable[tuple[str, str]]:
        kind = self.target.kind
        yield "largest deviation", f"{units.text(self.deviation, kind)} at {units.text(self.deviation_at, 'time')}"
        yield "mean deviation", units.text(self.mean_deviation, kind)
        yield "made smallest", f"the {self.measure} deviation"
        yield "made of", f"{len(self.target.moves)} steps of order {self.order:g}, {units.text(self.width, 'time')} each"
        yield "settled at", f"{units.text(self.target.level, kind, digits=6)} from {units.text(self.target.end, 'time')} on"
        yield "verdict", self.verdict._title()


def closest(
    medium: Medium, wanted: Any, limits: Limits | None = None, *, start: Any = None, end: Any = None, measure: str = "largest",
    steps: int = 60, widths: Any = None, tolerance: float = 1e-9, progress: bool = False,
) -> Closest:  # fmt: skip
    """The realizable target nearest to a wanted curve under the limits.

    Parameters
    ----------
    medium : Medium
    wanted : (times, values), DataFrame or callable
        Times [s] and pressures [Pa, absolute] (held face: rates [m³/s]), shape (n,) each, straight in between; or a table with these
        as its first two columns; or a function of an array of times, with ``end``. Numbers are SI, texts carry their unit.
    limits : Limits, optional
        By default none: then only the family bounds what can be followed.
    start : float, str or quantity, optional
        Pressure at rest at time 0; by default where the curve begins.
    end : float, str or quantity, optional
        For a function: until when it is wanted [s].
    measure : {"largest", "total"}
        Make the largest deviation smallest, or the total absolute deviation.
    steps : int
        Most steps, from 4 to 400.
    widths : list of float, str or quantity, optional
        Widths of the steps to try [s]; by default some from a quarter of the travel time on.
    tolerance : float
        Of the plan, as in `feedforward`.
    progress : bool
        Show a bar over the widths.

    Returns
    -------
    Closest

    Raises
    ------
    TypeError
        A medium or limits of another type.
    ValueError
        A curve that is not finite, has times that do not rise, or does not begin at ``start``; limits that rest at the start breaks;
        injection alone in a sealed medium; a measure, steps or widths out of range.

    Notes
    -----
    Every channel is linear in the levels of shifted steps, so this is a linear program (solved by HiGHS). The limits are asked at some
    times, then added wherever the answer exceeds them on a grid of 400 points of a width, and the program is solved again; the
    answer is judged by the extremes of `assess`, and drawn in by more where it does not pass. The optimum is that of the
    family: steps of one order (1.83) and of the width that does best before any time is added. The deviation counts at the curve's own
    times, and at more where these are fewer than 1200; the one reported is looked for at 12000. A limit that leaves no room at
    rest (``min_rate=0`` in a medium that leaks) cannot be drawn in: whether what is left between the times exceeds it, the verdict
    says.
    """
    of_type(medium, Medium, "medium", "a medium made by slab() or its sisters")
    limits = of_type(limits if limits is not None else Limits(), Limits, "limits", "flatplan Limits")
    one_of(measure, MEASURES, "measure")
    if isinstance(steps, bool) or not isinstance(steps, (int, np.integer)) or not 4 <= steps <= _MOST_STEPS:
        raise ValueError(f"steps: got {quoted(steps)}; it takes a whole number from 4 to {_MOST_STEPS}.")
    kind = "rate" if medium.face.held else "pressure"
    curve = _curve(wanted, end, kind)
    level = units.si(curve.values[0] if start is None else start, kind, "start")
    _check_begin(curve, level, kind)
    rest = Target(level, kind=kind)
    check_held(medium, rest, limits)
    check_level(medium, rest, limits, 0.0)
    if not medium.leaks and limits.min_rate is not None and limits.min_rate >= 0.0:
        raise ValueError(
            f"min_rate: got {units.text(limits.min_rate, 'rate')}, but in a sealed medium no rate that is never negative lands exactly "
            "at rest; allow some back-flow, such as a hundredth of max_rate."
        )
    if np.ptp(curve.values - level) <= 1e-12 * max(abs(level), 1.0) and abs(curve.values[0] - level) == 0.0:
        raise ValueError("wanted: never leaves the start; there is nothing to plan.")
    best: _Program | None = None
    for candidate in _shown(_candidates(medium, curve, int(steps), widths), progress):
        program = _Program.of(candidate, limits, curve, rest, measure)
        if program is not None and program.screened() and (best is None or program.value < best.value * (1.0 - 1e-9)):
            best = program
    if best is None:
        raise ValueError("widths: for none of them does the series of a step resolve; take wider ones.")
    return _finished(medium, best, limits, rest, curve, measure, tolerance)


def _shown(items: list[ShiftedSteps], progress: bool) -> Iterable[ShiftedSteps]:
    if not progress:
        return items
    from tqdm.auto import tqdm

    return tqdm(items, desc="widths", unit="width")


# --- the curve ---------------------------------------------------------------------------------------


def _curve(wanted: Any, end: Any, kind: str) -> Wanted:
    """Any accepted form as times and values."""
    if callable(wanted):
        if end is None:
            raise ValueError('end: is missing; a wanted function takes end=, such as end="10 d".')
        until = units.si(end, "time", "end", "positive")
        times = np.linspace(0.0, until, 2001)
        values = np.asarray(wanted(times), dtype=float)
        if values.shape != times.shape:
            raise ValueError(f"wanted: the function gave shape {values.shape} for {times.size} times; it must give one value for each.")
    else:
        if end is not None:
            raise ValueError("end: is for a wanted function; a table ends with its last time.")
        if hasattr(wanted, "iloc"):
            if wanted.shape[1] < 2:
                raise ValueError(f"wanted: the table has {wanted.shape[1]} column; its first two must be times and values.")
            pair: Any = (list(wanted.iloc[:, 0]), list(wanted.iloc[:, 1]))
        elif isinstance(wanted, (tuple, list)) and len(wanted) == 2:
            pair = wanted
        else:
            raise ValueError(f"wanted: got {quoted(wanted)}; it takes (times, values), a table with these two columns, or a function.")
        times, values = units.si_array(pair[0], "time", "wanted"), units.si_array(pair[1], kind, "wanted")
    if times.size != values.size or times.size < 2:
        raise ValueError(f"wanted: got {times.size} times and {values.size} values; it takes as many of both, at least two.")
    if not np.all(np.isfinite(values)):
        raise ValueError("wanted: has a value that is not finite.")
    if times[0] < 0.0 or np.any(np.diff(times) <= 0.0):
        raise ValueError("wanted: its times must rise from 0 or later, without repeating.")
    return Wanted(times, values)


def _check_begin(curve: Wanted, level: float, kind: str) -> None:
    """A plan begins at rest at its start, so a curve that begins elsewhere at time 0 is missed by that much from the first moment."""
    gap = abs(curve.values[0] - level)
    if curve.times[0] == 0.0 and gap > 1e-9 * max(float(np.ptp(curve.values)), gap):
        raise ValueError(
            f"wanted: begins at {units.text(curve.values[0], kind)} at time 0, but every plan begins at start, "
            f"{units.text(level, kind)}; let it begin there, or at a later time."
        )


def _candidates(medium: Medium, curve: Wanted, steps: int, widths: Any) -> list[ShiftedSteps]:
    """The widths to try, each with a spacing that divides it and enough steps for the whole curve."""
    until = float(curve.times[-1])
    if widths is None:
        narrowest = max(medium.travel_time / _NARROWEST, 2.0 * until / steps)
        wanted_widths = narrowest * _WIDER ** np.arange(_MOST_WIDTHS)
        wanted_widths = wanted_widths[(wanted_widths <= until) | (np.arange(_MOST_WIDTHS) < 2)]
    else:
        wanted_widths = units.si_array(widths, "time", "widths")
        if np.any(wanted_widths <= 0.0):
            raise ValueError("widths: take durations above zero.")
    out: list[ShiftedSteps] = []
    for width in wanted_widths:
        fitting = [ratio for ratio in RATIOS if until * ratio / width <= steps - 1] or [RATIOS[0]]
        ratio = max(r for r in fitting if r <= 10) if min(fitting) <= 10 else min(fitting)
        count = min(int(np.ceil(until * ratio / width)) + 1, steps)
        if widths is None or count < steps or until <= count * width / ratio:
            out.append(ShiftedSteps(medium, float(width), ratio, max(count, 2)))
    if not out:
        raise ValueError(f"widths: {steps} steps of these widths do not reach the end of the curve; take wider ones or more steps.")
    return out


# --- the program -------------------------------------------------------------------------------------


class _Program:
    """Least deviation over the levels of one set of steps, limits added where they are exceeded."""

    def __init__(self, steps: ShiftedSteps, rows: list[LimitRows], curve: Wanted, rest: Target, measure: str) -> None:
        self.steps, self.rows, self.measure = steps, rows, measure
        first, last = float(curve.times[0]), float(curve.times[-1])
        self.times = np.unique(np.concatenate([curve.times, np.linspace(first, last, max(2, _SAMPLES - curve.times.size))]))
        wanted = curve.at(self.times) - rest.start
        self.scale = float(np.max(np.abs(wanted)))
        self.wanted = wanted / self.scale
        matrix = steps.target_matrix(self.times)
        self.matrix = sparse.csr_matrix(np.where(np.abs(matrix) > 1e-15, matrix, 0.0))
        self.weights = np.gradient(self.times) / (last - first)
        self.picked = [np.arange(0, len(one.bound), _EVERY) for one in rows]
        self.levels = np.zeros(steps.count)
        self.value = np.inf

    def room(self, demand: Demand) -> float:
        """What an excess over a limit is measured by [SI]."""
        return next(one.scale for one in self.rows if one.demand is demand)

    @classmethod
    def of(cls, steps: ShiftedSteps, limits: Limits, curve: Wanted, rest: Target, measure: str) -> _Program | None:
        """None where the steps' series is not resolved."""
        rows = limit_rows(steps, limits, 0.0, 0.0, rest.rest_pressure)
        return None if rows is None else cls(steps, rows, curve, rest, measure)

    def screened(self) -> bool:
        """One look, without adding times: what widths are compared by."""
        return self._solved(BACK_OFF, None)

    def solve(self, back_off: float = BACK_OFF) -> bool:
        """Levels of the least deviation, in units of the target; False where the solver gives up."""
        return self._rounds(back_off, None)

    def polish(self, back_off: float = BACK_OFF) -> bool:
        """Among the levels with the least largest deviation (to a thousandth) those with the least total one."""
        if not self.solve(back_off):
            return False
        if self.measure == "largest":
            levels, value = self.levels, self.value
            if not self._rounds(back_off, value * (1.0 + 1e-3) + 1e-9):
                self.levels = levels  # the solver gave up on the second program; the first stands
            self.value = value
        return True

    def _rounds(self, back_off: float, cap: float | None) -> bool:
        """Solve, and add the limits where they are exceeded on the fine grid, until they are not."""
        for _ in range(_ROUNDS):
            if not self._solved(back_off, cap):
                return False
            self.picked, worst = exceeding(self.rows, self.levels, self.picked, 0.0)
            if worst <= 0.0:
                break
        return True

    def _solved(self, back_off: float, cap: float | None) -> bool:
        from scipy.optimize import linprog

        n, near, wanted = self.steps.count, self.matrix, self.wanted
        limited, bound = chosen(self.rows, self.picked, back_off)
        parts, right = [], []
        if self.measure == "largest" and cap is None:
            slack = sparse.csr_matrix(np.ones((len(wanted), 1)))
            cost = np.append(np.zeros(n), 1.0)
        else:
            if cap is not None:
                none = sparse.csr_matrix((len(wanted), len(wanted[::4])))
                parts += [sparse.hstack([near, none]), sparse.hstack([-near, none])]
                right += [wanted + cap, cap - wanted]
            # a second program need not see every time: its largest deviation is capped at all of them
            some = slice(None, None, 1 if cap is None else 4)
            near, wanted = near[some], wanted[some]
            slack = sparse.identity(len(wanted), format="csr")
            cost = np.concatenate([np.zeros(n), self.weights[some]])
        parts += [sparse.hstack([near, -slack]), sparse.hstack([-near, -slack])]
        right += [wanted, -wanted]
        if limited is not None:
            parts.append(sparse.hstack([limited * self.scale, sparse.csr_matrix((limited.shape[0], slack.shape[1]))]))
            right.append(bound)
        bounds = [(None, None)] * n + [(0.0, None)] * slack.shape[1]
        patience = {"time_limit": _PATIENCE[0 if cap is None else 1]}
        rows, most = sparse.vstack(parts, format="csr"), np.concatenate(right)
        found = linprog(cost, A_ub=rows, b_ub=most, bounds=bounds, method="highs", options=patience)
        if found.status != 0 and cap is None:  # the simplex method gave up; the interior point method may not
            found = linprog(cost, A_ub=rows, b_ub=most, bounds=bounds, method="highs-ipm", options=patience)
        if found.status != 0:
            return False
        self.levels, self.value = found.x[:n] * self.scale, float(found.fun)
        return True


def _finished(
    medium: Medium, best: _Program, limits: Limits, rest: Target, curve: Wanted, measure: str, tolerance: float
) -> Closest:
    """The plan of the best program, drawn in until its extremes keep every limit."""
    demands = [d for d in DEMANDS if d.name in limits.stated]
    back_off = BACK_OFF
    while True:
        moves = best.steps.moves(best.levels) if best.polish(back_off) else ()
        if not moves:
            raise ValueError("limits: leave no room to come any nearer to the wanted curve than by staying at the start.")
        target = replace_moves(rest, moves, max(best.steps.end, moves[-1].end))
        plan = feedforward(medium, target, tolerance=tolerance)
        seen = all_extremes(plan, [(d.channel, d.derivative) for d in demands])
        worst = 0.0
        for demand, extreme in zip(demands, seen, strict=True):
            margin = demand.margin(demand.measure(plan, extreme)[0], limits.stated[demand.name])
            worst = max(worst, -(margin + demand.error(plan)) / best.room(demand))
        if worst <= 0.0 or back_off > _MOST_BACK_OFF:
            break
        back_off = max(4.0 * back_off, back_off + 2.0 * worst)
    verdict = assess(plan, limits)
    times = np.unique(np.concatenate([curve.times, np.linspace(curve.times[0], curve.times[-1], 10 * _SAMPLES + 1)]))
    off = np.abs(target.pressure(times) - curve.at(times))
    at = int(np.argmax(off))
    mean = float(np.sum(0.5 * (off[1:] + off[:-1]) * np.diff(times)) / (times[-1] - times[0]))
    return Closest(
        target, plan, verdict, float(off[at]), float(times[at]), mean, curve, measure, best.steps.width, ORDER
    )

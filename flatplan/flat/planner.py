"""From a medium and a target to a plan: how many terms, in what precision, and how far off at most."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np

from flatplan import units
from flatplan.channels import CHANNELS
from flatplan.flat.answer import TargetAnswer
from flatplan.flat.bump_integral import bump_integral
from flatplan.flat.certificate import Certificate
from flatplan.flat.extended import ExtendedSum
from flatplan.flat.generating import scaled_coefficients
from flatplan.flat.plan import SERIES_NAME, Plan
from flatplan.flat.remedy import past_the_threshold, too_many_terms
from flatplan.flat.rise import Rise
from flatplan.flat.summation import SeriesSum
from flatplan.flat.tail import MOST_BOUNDED, MOST_TERMS, gevrey_log_constant, gevrey_radius, tail_table
from flatplan.flat.target import LEAST_ORDER, Target
from flatplan.records import of_type
from flatplan.site import Medium

# Channels whose tails decide the number of terms: (channel, derivative of it). The derivative of the rate
# is there so that the extremes of the plan can be located on it.
_DECIDING = (
    ("injection_rate", 0),
    ("sandface_rate", 0),
    ("bottomhole_pressure", 0),
    ("sandface_pressure", 0),
    ("injection_rate", -1),
    ("injection_rate", 1),
)
# Orders bounded one by one before the closed form takes over.
_FIRST_ORDERS = 96
# Rounding of the double path, in units of 2^-53 times the sum of the sizes of the terms: measured, see
# tests/test_flat_accuracy.py, where it is compared with ball arithmetic.
_ROUNDING_UNITS = 40.0
_ROUNDING_UNITS_PER_TERM = 2.5  # the coefficients' own error grows with their order
# Leakage: the coefficients are carried from panel to panel by 2×2 matrices, which costs up to 1.1e-14 of each (found: randomised
# containment), and twice that is allowed for.
_ROUNDING_UNITS_OF_LEAKAGE = 200.0
_UNIT = 2.0**-53
# Share of the change by which the double path's rounding may move the target before more digits are taken.
_TARGET_SHARE = 1e-7
# Leakage damps a steady change along the path by up to e to this power: what a double holds.
_MOST_DAMPING = 600.0


def feedforward(medium: Medium, target: Target, *, tolerance: float = 1e-9) -> Plan:
    """The injection rate that makes the target face follow ``target``, in closed form.

    Parameters
    ----------
    medium : Medium
    target : Target
        With at least one move.
    tolerance : float
        Largest distance from the exact plan, relative to each channel's peak, from 1e-13 to 0.1.

    Returns
    -------
    Plan

    Raises
    ------
    TypeError
        A medium or target of another type.
    ValueError
        An empty target, a tolerance out of range, a move of order 2 past its threshold, or a job whose series needs more
        terms than are held; the sentence says which and what would do.

    Notes
    -----
    Differential flatness of the diffusion equation [FliessLevineMartinRouchon1995]_
    [LarocheMartinRouchon2000]_: every output is ``Σ c_k y^(k)`` with ``y`` the pressure at the target face.
    The cut is proven by `flatplan.flat.tail`.
    """
    of_type(medium, Medium, "medium", "a medium made by slab() or its sisters")
    of_type(target, Target, "target", "a Target")
    damping = math.sqrt(max(s.leakage / s.least_capacity for s in medium.segments) * medium.travel_time)
    if damping > _MOST_DAMPING:
        raise ValueError(
            f"medium: leaks too much, with sqrt(Λ/S · travel time) = {damping:.3g} where {_MOST_DAMPING:g} is held; "
            "a pressure change is lost long before the target face."
        )
    if not target.moves:
        raise ValueError('target: has no move; add at least one, such as .move(to="22.5 MPa", over="3 d").')
    if target.largest_change <= 1e-12 * max(abs(m.change) for m in target.moves):
        raise ValueError("target: its moves cancel and nothing ever changes; there is nothing to plan.")
    if medium.face.held != (target.kind == "rate"):
        wants = 'a rate (start="0 L/s")' if medium.face.held else 'a pressure (start="21 MPa")'
        raise ValueError(f"target: its start is a {target.kind}, but for this target face it takes {wants}.")
    if medium.face.held and target.start != 0.0:
        raise ValueError(
            f"target: starts at {units.text(target.start, 'rate')}; the rate through a held face is counted from the equilibrium "
            "in which the plan starts, so it takes 0."
        )
    value = units.si(tolerance, "fraction", "tolerance", "positive")
    if not 1e-13 <= value <= 0.1:
        raise ValueError(f"tolerance: got {tolerance!r}; it takes a share of the peak from 1e-13 to 0.1.")
    for rise in target.rises:
        if rise.order >= 2.0 and medium.travel_time >= 2.0 * rise.width:
            raise ValueError(past_the_threshold(medium, rise))
    return _Planner(medium, target, value).plan()


class _Planner:
    """Finds terms, peaks and precision together: each depends on the others."""

    def __init__(self, medium: Medium, target: Target, tolerance: float) -> None:
        self.medium, self.target, self.tolerance = medium, target, tolerance
        self.rises = target.rises
        self.grid = _grid(target)
        self.overlap = _largest_overlap(self.rises)
        self.answer = TargetAnswer.of(medium)
        # Equal rises (but for when and how much) share their tails: those of a change of one.
        self.tails: dict[tuple[float, float, float], np.ndarray] = {}

    def plan(self) -> Plan:
        terms = tuple(8 for _ in self.rises)
        for _ in range(16):
            sums = SeriesSum(self.rises, terms, self.medium.travel_time)
            peak, size = self._peaks(sums)
            needed = tuple(self._terms(rise, peak) for rise in self.rises)
            if all(n <= have for n, have in zip(needed, terms, strict=True)) and self._drowned(sums, peak, size):
                # a peak made of rounding is too large: the terms it allows are too few
                peak = self._precise_peaks(sums, size)
                needed = tuple(self._terms(rise, peak) for rise in self.rises)
            if all(n <= have for n, have in zip(needed, terms, strict=True)):
                break
            terms = tuple(max(n, have) for n, have in zip(needed, terms, strict=True))
        else:
            raise ValueError("target: the number of terms did not settle; state a larger tolerance.")
        return self._certified(sums, peak, size)

    def _rows(self, sums: SeriesSum, *, sizes: bool = False) -> dict[tuple[str, int], np.ndarray]:
        most = max(sums.terms)
        names = {shift: [name for name, s in _DECIDING if s == shift] for shift in (0, -1, 1)}
        hats = {shift: np.array([scaled_coefficients(self.medium, name, most) for name in each]) for shift, each in names.items()}
        found = sums.evaluate_all(hats, self.grid, sizes=sizes)
        return {(name, shift): row for shift, each in names.items() for name, row in zip(each, found[shift], strict=True)}

    def _peaks(self, sums: SeriesSum) -> tuple[dict, dict]:
        peak = {key: float(np.abs(row).max()) for key, row in self._rows(sums).items()}
        size = {key: float(row.max()) for key, row in self._rows(sums, sizes=True).items()}
        return peak, size

    def _drowned(self, sums: SeriesSum, peak: dict, size: dict) -> bool:
        """Whether the rounding of double precision reaches some hundredths of a peak, and more digits are held."""
        lost = self._units_lost(sums) * _UNIT
        return any(lost * size[key] > 0.03 * peak[key] for key in _DECIDING)

    def _units_lost(self, sums: SeriesSum) -> float:
        """Rounding of the double path, in units of 2^-53 times the sum of the sizes of the terms."""
        leakage = _ROUNDING_UNITS_OF_LEAKAGE if any(segment.leakage for segment in self.medium.segments) else 0.0
        return _ROUNDING_UNITS + leakage + _ROUNDING_UNITS_PER_TERM * max(sums.terms)

    def _target_moved(self, rounding: float) -> float:
        """How far the target can be moved by a rounding of the rate, whatever its course."""
        under_way = sum(rise.width * len(rise.bumps) for rise in self.rises)
        return rounding * min(self.answer.by_rate, self.answer.impulse * under_way)

    def _target_drowned(self, rounding: dict) -> bool:
        """Whether the rounding of the rate could move the target by more than a small share of its change."""
        return self._target_moved(rounding["injection_rate", 0]) > _TARGET_SHARE * self.target.largest_change

    def _precise_peaks(self, sums: SeriesSum, size: dict) -> dict:
        """The peaks at fewer places (so a little low, on the safe side), in as many digits as it takes to see them."""
        digits = 32
        while True:
            exact = ExtendedSum(self.medium, sums, digits)
            peak = {}
            for shift in (0, -1, 1):
                names = [name for name, s in _DECIDING if s == shift]
                values = exact.sampled(names, shift)
                peak.update({(name, shift): float(np.abs(row).max()) for name, row in zip(names, values, strict=True)})
            if all(size[key] * 10.0**-digits <= 1e-4 * peak[key] for key in _DECIDING) or digits > 500:
                return peak
            digits *= 2

    def _tail(self, rise: Rise, allowed: np.ndarray) -> np.ndarray:
        """Tail bounds of a rise for the deciding channels, with more orders bounded one by one until some cut is allowed."""
        key, weight = (rise.width, rise.ramp, rise.gamma), abs(rise.weight)
        orders = _FIRST_ORDERS
        while True:
            table = self.tails.get(key)
            if table is None or table.shape[1] <= orders:
                table = self.tails[key] = self._with_target(tail_table(self.medium, replace(rise, weight=1.0), _DECIDING, orders))
            # the closed form's rest should be negligible, or the cut comes later than it need
            if np.all(weight * table[:, -1] <= 1e-6 * allowed) or table.shape[1] > MOST_BOUNDED:
                return weight * table
            orders = min(2 * orders, MOST_BOUNDED)

    def _with_target(self, tails: np.ndarray) -> np.ndarray:
        """The same with a last row: how far the target is moved by what is left out of the rate."""
        rate, volume = (tails[_DECIDING.index(("injection_rate", shift))] for shift in (0, -1))
        with np.errstate(invalid="ignore", over="ignore"):
            moved = np.fmin(self.answer.by_volume * volume, self.answer.by_rate * rate)
        return np.vstack([tails, moved])

    def _held_tail(self, rise: Rise) -> np.ndarray:
        return abs(rise.weight) * self.tails[rise.width, rise.ramp, rise.gamma]

    def _terms(self, rise: Rise, peak: dict) -> int:
        allowed = self.tolerance * np.array([*(peak[key] for key in _DECIDING), self.target.largest_change]) / (2.0 * self.overlap)
        fits = np.all(self._tail(rise, allowed)[:, : MOST_TERMS + 1] <= allowed[:, None], axis=0)
        if not np.any(fits):
            raise ValueError(too_many_terms(self.medium, rise, self.tolerance, LEAST_ORDER))
        return max(int(np.argmax(fits)), 2)

    def _certified(self, sums: SeriesSum, peak: dict, size: dict) -> Plan:
        tails = _summed_tails(self.rises, [self._held_tail(rise)[:, n] for rise, n in zip(self.rises, sums.terms, strict=True)])
        units_lost = self._units_lost(sums)
        rounding = {key: units_lost * _UNIT * size[key] for key in _DECIDING}
        digits, exact = 16, None
        short = any(rounding[key] > 0.5 * self.tolerance * peak[key] for key in _DECIDING) or self._target_drowned(rounding)
        if short:
            digits = math.ceil(math.log10(max(size[key] / peak[key] for key in _DECIDING))) + 17
            exact = ExtendedSum(self.medium, sums, digits)
            for shift in (0, -1, 1):
                names = [name for name, s in _DECIDING if s == shift]
                values = exact.evaluate(names, self.grid, shift)
                for name, row in zip(names, values, strict=True):
                    peak[name, shift] = float(np.abs(row).max())
                    rounding[name, shift] = exact.rounding(name, shift, self.grid) + size[name, shift] * 10.0**-digits
        shifts = {
            "injection_rate": 0,
            "sandface_rate": 0,
            "bottomhole_pressure": 0,
            "sandface_pressure": 0,
            "target_pressure": 0,
            "injected_volume": -1,
        }
        index = {key: i for i, key in enumerate(_DECIDING)}
        tail_out, rounding_out, peak_out, cancellation = {}, {}, {}, {}
        for name in CHANNELS:
            if name == "target_pressure":
                top = self.target.largest_change
                tail_out[name] = float(tails[-1])
                rounding_out[name], peak_out[name], cancellation[name] = _level_rounding(self.rises), top, 1.0
                continue
            key = (SERIES_NAME.get(name, (name, 0))[0], shifts[name])
            tail_out[name] = float(tails[index[key]])
            rounding_out[name] = rounding[key]
            peak_out[name] = peak[key]
            cancellation[name] = size[key] / peak[key] if peak[key] else 1.0
        certificate = Certificate(
            order=max(rise.order for rise in self.rises),
            radius=min(gevrey_radius(rise) for rise in self.rises),
            terms=max(sums.terms),
            digits=digits,
            tolerance=self.tolerance,
            tail=tail_out,
            rounding=rounding_out,
            peak=peak_out,
            cancellation=cancellation,
            target_kind=self.target.kind,
            log_constant=gevrey_log_constant(self.rises),
            target_rounding=self._target_moved(rounding["injection_rate", 0]),
            share_of_threshold=max((0.5 * self.medium.travel_time / r.width for r in self.rises if r.order >= 2.0), default=0.0),
        )
        return Plan(self.medium, self.target, self.tolerance, certificate, sums, exact)


def _grid(target: Target, per_corner: int = 160) -> np.ndarray:
    """Times at which peaks are judged: dense on every corner, a few on every ramp."""
    parts = [target.knots, np.linspace(0.0, target.end, 200)]
    for rise in target.rises:
        parts.extend(np.linspace(start, start + rise.width, per_corner) for start, _ in rise.corners)
    return np.unique(np.concatenate(parts))


def _level_rounding(rises: tuple[Rise, ...]) -> float:
    """Bound on the rounding of the target itself: of each rise's parts (a short ramp is a difference of large ones), and of the time.

    A time is off by some 2^-53 of itself, which counts as much as the rise is steep.
    """
    total = 0.0
    for rise in rises:
        steepest = 1.0 / bump_integral(rise.gamma).total
        parts = 1.0
        if rise.ramp > 0.0:
            steepest = min(steepest, rise.width / rise.ramp)
            parts += 0.5 * rise.width / rise.ramp
        total += abs(rise.weight) * (8.0 * parts + 6.0 * steepest * (1.0 + rise.ramp / rise.width))
    return total * _UNIT


def _largest_overlap(rises: tuple[Rise, ...]) -> int:
    """How many rises are under way at once, at most."""
    return max(sum(other.start < rise.end and other.end > rise.start for other in rises) for rise in rises)


def _summed_tails(rises: tuple[Rise, ...], tails: list[np.ndarray]) -> np.ndarray:
    """Largest sum over time of the tails of the rises under way (a rise at rest has none)."""
    worst = np.zeros_like(tails[0])
    for rise in rises:
        total = sum(tail for other, tail in zip(rises, tails, strict=True) if other.start <= rise.start < other.end)
        worst = np.maximum(worst, total)
    return worst

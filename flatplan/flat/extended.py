"""The series in as many digits as their cancellation asks for, at the price of few evaluations.

When the terms are far larger than their sum, double precision is not enough. Then the contribution of a corner is made
exactly at a few places (`bump_rows`, coefficients from `precise`), rounded to doubles once, and interpolated between them
(`corner_curve`). Every step has a proven bound; `ExtendedSum.rounding` joins them. Corners of equal shape share one curve,
and curves of all derivatives share the rows.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from functools import cached_property

import mpmath
import numpy as np
from gmpy2 import mpz

from flatplan.flat.bump_rows import FixedWeights, bump_row, log2_row_errors, log_height
from flatplan.flat.corner_curve import NODES, CornerCurve, largest_growth, panels
from flatplan.flat.expansion import Expansions, Weights, panel_needs, panel_row
from flatplan.flat.precise import precise_pressure, precise_scaled
from flatplan.flat.rise import Rise
from flatplan.flat.summation import SeriesSum, low_factors
from flatplan.site import Medium

NAMES = ("injection_rate", "sandface_rate", "bottomhole_pressure", "sandface_pressure", "stored_volume")
# Of a curve's largest value: what exact values and interpolation may be off.
_FINEST_VALUE, _FINEST_CURVE = 2.0**-53, 2.0**-50
_UNIT = 2.0**-53
_CHUNK = 65536
_LN2 = math.log(2.0)
_SAMPLES = 13


@dataclass(frozen=True)
class _Shape:
    """What the curve of a corner depends on, but for its factor."""

    width: float
    gamma: float
    lift: int
    terms: int

    @classmethod
    def of(cls, rise: Rise, terms: int) -> _Shape:
        return cls(rise.width, rise.gamma, rise.lift, terms)


@dataclass
class ExtendedSum:
    """Sums of `SeriesSum` with proven rounding, whatever cancels.

    Attributes
    ----------
    medium : Medium
    series : SeriesSum
    digits : int
        Decimal digits of the largest term that are carried.
    """

    medium: Medium
    series: SeriesSum
    digits: int
    _rows: dict = field(default_factory=dict, repr=False)
    _curves: dict = field(default_factory=dict, repr=False)

    @property
    def bits(self) -> int:
        """Working bits of the coefficients."""
        return math.ceil(self.digits * math.log2(10.0)) + 16

    @cached_property
    def _scaled(self) -> list[list[mpmath.mpf]]:
        return precise_scaled(self.medium, NAMES, max(self.series.terms), self.bits)

    def evaluate(self, names: list[str], times: np.ndarray, shift: int) -> np.ndarray:
        """Series of `NAMES` (or "target_pressure") at ``times`` [s], shape (len(names), N); ``shift`` as in `SeriesSum`."""
        index = [NAMES.index(name) if name in NAMES else -1 for name in names]
        known = self._scaled
        target = [mpmath.mpf(1)] + [mpmath.mpf(0)] * max(self.series.terms)

        def curve(shape: _Shape) -> CornerCurve:
            key = (shape, shift)
            if key not in self._curves:
                self._curves[key] = self._curve(shape, self._weights(shape, known, shift))
            return self._curves[key]

        out = np.zeros((len(names), times.size))
        coefficients = [target if i < 0 else known[i] for i in index]
        for start in range(0, times.size, _CHUNK):
            part = slice(start, start + _CHUNK)
            self._add(out[:, part], coefficients, times[part], shift, curve, index)
        return out

    def pressure(self, places: np.ndarray, times: np.ndarray) -> np.ndarray:
        """Pressure change at path coordinates ``places`` [m], shape (len(places), N)."""
        exact = [precise_pressure(self.medium, float(x), max(self.series.terms), self.bits) for x in places]
        made: dict[_Shape, CornerCurve] = {}

        def curve(shape: _Shape) -> CornerCurve:
            if shape not in made:
                made[shape] = self._curve(shape, self._weights(shape, exact, 0))
            return made[shape]

        out = np.zeros((len(places), times.size))
        self._add(out, exact, times, 0, curve, list(range(len(places))))
        return out

    def sampled(self, names: list[str], shift: int) -> np.ndarray:
        """The same at 25 places of every corner and at its ends, shape (len(names), N), to a few digits and without curves."""
        known = self._scaled
        index = [NAMES.index(name) for name in names]
        times = np.unique(np.concatenate([_sample_times(rise) for rise in self.series.rises]))
        out = np.zeros((len(names), times.size))
        self._add_low(out, [known[i] for i in index], times, shift)
        for rise, terms in zip(self.series.rises, self.series.terms, strict=True):
            shape = _Shape.of(rise, terms)
            weights = self._weights(shape, [known[i] for i in index], shift)
            for at, near, far, sign in _within(rise, times):
                # equal places of different corners differ in the last bits only
                places, back = np.unique(np.ldexp(np.rint(np.ldexp(near, 44)), -44), return_inverse=True)
                log_sizes = np.logaddexp.reduce(weights.logs, axis=1)
                values = self._values(shape, weights, places, _LN2 * -30.0 + log_sizes - self.digits * math.log(10.0))
                picked = values[back, far.astype(int)]
                out[:, at] += sign * rise.bump_factor * picked.T
        return out

    def rounding(self, name: str, shift: int, times: np.ndarray) -> float:
        """Proven bound on the distance between `evaluate` and the cut series, SI; the size of its smooth low orders is taken at ``times``.

        The coefficients' own error, the largest term times 10^-digits, comes on top.
        """
        row = NAMES.index(name)
        self.evaluate([name], np.zeros(1), shift)
        worst, low = 0.0, np.zeros(times.size)
        for rise, terms in zip(self.series.rises, self.series.terms, strict=True):
            for k, factor in low_factors(self.series.t_d, shift, rise.lift):
                if k <= terms and self._scaled[row][k]:
                    live = times > rise.start
                    low[live] += abs(float(self._scaled[row][k])) * factor * rise.low_order_size(times[live], k + shift)
            made = self._curves.get((_Shape.of(rise, terms), shift))
            if made is None:
                continue
            # times are exact; the places come from two differences and a quotient
            moved = _UNIT * (4.0 + 2.0 * rise.ramp / rise.width)
            largest = float(np.abs(made.values[..., row]).max(initial=0.0))
            made_exact = 2.0 * (_FINEST_VALUE * largest_growth() + _FINEST_CURVE) * largest
            one = abs(rise.bump_factor) * (float(made.errors(moved)[row]) + made_exact)
            worst = max(worst, one * (2.0 if 0.0 < rise.ramp < rise.width else 1.0))
        together = max(sum(o.start < r.end and o.end > r.start for o in self.series.rises) for r in self.series.rises)
        return worst * together + 64.0 * _UNIT * float(low.max(initial=0.0))

    # --- inside ----------------------------------------------------------------------------------

    def _add(
        self, out: np.ndarray, coefficients: list, times: np.ndarray, shift: int, curve: Callable[[_Shape], CornerCurve], index: list[int]
    ) -> None:
        self._add_low(out, coefficients, times, shift)
        wanted = [row for row, i in enumerate(index) if i >= 0]
        if not wanted:
            return
        columns = [index[row] for row in wanted]
        for rise, terms in zip(self.series.rises, self.series.terms, strict=True):
            if terms < max(rise.lift - shift, 0):
                continue
            made = curve(_Shape.of(rise, terms))
            for at, near, far, sign in _within(rise, times):
                values = made.evaluate(near, far)[columns]
                out[np.ix_(np.array(wanted), at)] += sign * rise.bump_factor * values

    def _add_low(self, out: np.ndarray, coefficients: list, times: np.ndarray, shift: int) -> None:
        """The smooth low orders: a double holds them to the accuracy asked, as they are not multiplied up."""
        for rise, terms in zip(self.series.rises, self.series.terms, strict=True):
            at = np.flatnonzero(times > rise.start)
            for k, factor in low_factors(self.series.t_d, shift, rise.lift):
                column = np.array([float(c[k]) for c in coefficients]) if k <= terms else np.zeros(0)
                if np.any(column):
                    out[:, at] += column[:, None] * (rise.low_order(times[at], k + shift) * factor)[None, :]

    def _weights(self, shape: _Shape, scaled: list[list[mpmath.mpf]], shift: int) -> Weights:
        """``w_n = ĉ_k n! X^k/(2k)! width^-shift`` with n = k + shift - lift."""
        lowest = max(shape.lift - shift, 0)
        first = lowest + shift - shape.lift
        bits = self.bits + 16
        with mpmath.workprec(bits + 32):
            x = mpmath.mpf(self.series.t_d) / mpmath.mpf(shape.width)
            weight = mpmath.factorial(first) * mpmath.mpf(shape.width) ** (-shift)
            for k in range(1, lowest + 1):
                weight *= x / (2 * k * (2 * k - 1))
            shared = []
            for i, k in enumerate(range(lowest, shape.terms + 1)):
                if i:
                    weight *= x * (first + i) / (2 * k * (2 * k - 1))
                shared.append(weight)
            rows, logs = [], np.full((len(scaled), len(shared)), -np.inf)
            for row, coefficients in enumerate(scaled):
                pairs = []
                for i, w in enumerate(shared):
                    mantissa, exponent = mpmath.frexp(w * coefficients[lowest + i])
                    pairs.append((mpz(int(mpmath.ldexp(mantissa, bits))), int(exponent) - bits) if mantissa else (mpz(0), 0))
                    if mantissa:
                        logs[row, i] = math.log(abs(float(mantissa))) + int(exponent) * _LN2
                rows.append(pairs)
        return Weights(first, rows, logs)

    def _curve(self, shape: _Shape, weights: Weights) -> CornerCurve:
        """The curves of several series, each to about the last place of its largest value."""
        live = 0.5 - math.sqrt(0.25 - (4.0**shape.gamma + 40.0) ** (-1.0 / shape.gamma))  # where the bump is above e^-40
        samples = live + (0.5 - live) * np.linspace(0.0, 1.0, _SAMPLES)[1:]
        nothing = ~np.isfinite(weights.logs).any(axis=1)  # the pressure at the target face has no terms beyond the first
        allowed = np.where(nothing, 0.0, np.logaddexp.reduce(weights.logs, axis=1) - self.digits * math.log(10.0))
        while True:
            values = self._values(shape, weights, samples, allowed)
            with np.errstate(divide="ignore"):
                top = np.log(np.abs(values).max(axis=(0, 1))) + math.log(_FINEST_VALUE)
            if np.all((allowed <= top + 16.0) | nothing):
                break
            allowed = np.where(nothing, 0.0, np.where(np.isfinite(top), np.minimum(allowed, top), allowed - 40.0))
        allowed = np.where(nothing, 0.0, top)
        close = allowed + math.log(_FINEST_CURVE / _FINEST_VALUE)
        needs = panel_needs(panels(shape.gamma, weights.logs, weights.first, close), shape.gamma, weights, allowed)
        edges = np.array([need.panel for need in needs]).reshape(-1, 2)
        rows = []
        for need in needs:
            key = (shape.gamma, need.panel)
            self._rows[key] = panel_row(need, shape.gamma, weights.first, self._rows.get(key))
            rows.append(self._rows[key])
        expansions = Expansions(weights, needs, rows, allowed, shape.gamma)
        values = np.array([expansions.values(p) for p in range(len(needs))]).reshape(-1, NODES, 2, len(weights.rows))
        return CornerCurve(edges, values)

    def _values(self, shape: _Shape, weights: Weights, places: np.ndarray, log_allowed: np.ndarray) -> np.ndarray:
        """Exact sums at places of the near half and their mirror images, shape (N, 2, series), each within what it is allowed."""
        count = weights.logs.shape[1]
        orders = weights.first + count - 1
        n = weights.first + np.arange(count)
        doublings, errors = log2_row_errors(places, shape.gamma, orders)
        # log2 of Σ |w_n| 2^(mn) over what is allowed, for each place and scale, the worst series
        scales = np.unique(doublings)
        gain = np.logaddexp.reduce(weights.logs[:, None, :] + (scales[:, None] * n[None, :] * _LN2)[None], axis=2)
        gain = (gain - log_allowed[:, None]).max(axis=0)
        need = (gain[np.searchsorted(scales, doublings)] + log_height(places, shape.gamma)[:, None]) / _LN2 + errors
        out = np.zeros((places.size, 2, len(weights.rows)))
        # (1) of `bump_rows` is above the largest coefficient: where less than one bit is needed the whole sum is under what is allowed
        for i in np.flatnonzero(need.min(axis=1) > 0.0):
            j = int(np.argmin(need[i]))
            bits = math.ceil(max(need[i, j], errors[i, j])) + 8
            row = bump_row(mpmath.mpf(float(places[i])), shape.gamma, orders, int(doublings[i, j]), bits, float(errors[i, j]))
            with mpmath.workprec(80):
                for r, pairs in enumerate(weights.rows):
                    even, odd = row.sums(FixedWeights.of(pairs, weights.first, row.doubling, bits + 16 + count.bit_length()))
                    out[i, 0, r], out[i, 1, r] = float(even + odd), float(even - odd)
        return out


def _within(rise: Rise, times: np.ndarray) -> Iterator[tuple[np.ndarray, np.ndarray, np.ndarray, float]]:
    """(where, distance from the nearer end, whether that is the later one, sign) for each corner that holds some of ``times``."""
    for after, sign in rise.bumps:
        elapsed = (times - rise.start) - after
        left = elapsed / rise.width
        right = (rise.width - elapsed) / rise.width
        at = np.flatnonzero((left > 0.0) & (right > 0.0))
        if at.size:
            left, right = left[at], right[at]
            yield at, np.minimum(left, right), left > right, sign


def _sample_times(rise: Rise) -> np.ndarray:
    live = 0.5 - math.sqrt(0.25 - (4.0**rise.gamma + 40.0) ** (-1.0 / rise.gamma))
    near = live + (0.5 - live) * np.linspace(0.0, 1.0, _SAMPLES)
    inside = np.concatenate([near, 1.0 - near[:-1]]) * rise.width
    return np.concatenate([start + inside for start, _ in rise.corners])

"""Crossing a stretch of rock that varies along the path, in any number of digits.

On a piece of the stretch, with v = 0 … 1 along it, ``dp/dv = R(v) F`` and ``dF/dv = s C(v) p + Λ(v) p``, where R, C and Λ are
resistance, storage and leakage of the piece: products of a power of the radius and the exponential of a cubic. Their Taylor
coefficients come from recurrences, those of p and F from products of series; each coefficient of p and F is an array over
the powers of s, as in `precise`, of integers times 2^-bits.
"""

from __future__ import annotations

import math

import mpmath
import numpy as np
from gmpy2 import mpz

from flatplan.site import Segment

_PIECES = 24  # on the whole path, shared by travel time: enough that tens of Taylor terms do at hundreds of orders
_BEND = 0.7  # largest change of a logarithm on one piece
_MOST_TAYLOR = 2000


def across_varying(
    segment: Segment, share: float, p: np.ndarray, f: np.ndarray, t_d: mpmath.mpf, unit: mpmath.mpf, work: int
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Carry (p, T p_x / unit), scaled polynomials in s, over the first ``share`` of a stretch; and ∫ S p dx over it [m³/Pa].

    Parameters
    ----------
    segment : Segment
    share : float
        0 < share ≤ 1.
    p, f : ndarray of int
        Multiples of 2^-work, one for each power of s.
    t_d, unit : mpf
        Scale of s, and of f.
    work : int
        Bits after the point.
    """
    pieces = _pieces(segment, share, float(t_d))
    content = np.zeros_like(p)
    up = np.array([mpz(2 * k * (2 * k - 1)) for k in range(1, len(p))], dtype=object)
    for i in range(pieces):
        start, step = mpmath.mpf(share) * i / pieces, mpmath.mpf(share) / pieces
        p, f, held = _piece(segment, start, step, p, f, up, t_d, unit, work)
        content = content + held
    return p, f, content


def _pieces(segment: Segment, share: float, t_d: float) -> int:
    bend = max(sum(map(abs, curve)) * (3.0 if curve else 1.0) for curve in (segment.mobility_curve, segment.capacity_curve))
    count = max(bend / _BEND, _PIECES * segment.slowness / math.sqrt(t_d), 1.0)
    if segment.power:
        radii = abs(segment.radius(segment.start)), abs(segment.radius(segment.end))
        count = max(count, segment.power * abs(math.log(radii[1] / radii[0])) / 0.3)
    return math.ceil(share * count)


def _piece(
    segment: Segment,
    start: mpmath.mpf,
    step: mpmath.mpf,
    p: np.ndarray,
    f: np.ndarray,
    up: np.ndarray,
    t_d: mpmath.mpf,
    unit: mpmath.mpf,
    work: int,
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """One piece, from ``start`` over ``step`` (shares of the stretch)."""
    along = mpmath.mpf(segment.length) * step
    area = mpmath.mpf(segment.area_factor)
    resist = _Coefficients(segment, segment.mobility_curve, -1, start, step, along * unit / (mpmath.mpf(segment.mobility) * area), work)
    store = _Coefficients(segment, segment.capacity_curve, 1, start, step, along * mpmath.mpf(segment.capacity) * area / unit, work)
    leak = _Coefficients(segment, (), 1, start, step, along * mpmath.mpf(segment.leakage) * area / unit, work)
    scale = mpz(int(mpmath.nint(mpmath.ldexp(1 / t_d, work))))
    series_p, lifted, series_f = _Series(p), _Series(_lifted(p, up, scale, work)), _Series(f)
    total_p, total_f, held = p.copy(), f.copy(), np.zeros_like(p)
    small, j = 0, 0
    while small < 4:
        new_p = _product(resist, series_f, j, work) // (j + 1)
        new_f = _product(store, lifted, j, work)
        if segment.leakage:
            new_f = new_f + _product(leak, series_p, j, work)
        new_f = new_f // (j + 1)
        held = held + _product(store, series_p, j, work) // (j + 1)  # ∫ v^j of the product's coefficient j
        total_p, total_f = total_p + new_p, total_f + new_f
        series_p.append(new_p)
        series_f.append(new_f)
        lifted.append(_lifted(new_p, up, scale, work))
        small = small + 1 if max(series_p.bits[-1], series_f.bits[-1]) <= 1 else 0
        j += 1
        if j > _MOST_TAYLOR:
            raise AssertionError("a piece is short against every length of its rock")
    storage = int(mpmath.nint(mpmath.ldexp(unit, work)))
    return total_p, total_f, held * storage >> work


def _lifted(p: np.ndarray, up: np.ndarray, scale: mpz, work: int) -> np.ndarray:
    """s times a polynomial in s, in the scaling t_D^k/(2k)!: one order up."""
    out = np.zeros_like(p)
    out[1:] = p[:-1] * up * scale >> work
    return out


class _Series:
    """Coefficients in v, arrays over the powers of s, each with the bits of its largest number."""

    def __init__(self, first: np.ndarray) -> None:
        self.values: list[np.ndarray] = []
        self.bits: list[int] = []
        self.append(first)

    def append(self, value: np.ndarray) -> None:
        """The next coefficient."""
        self.values.append(value)
        self.bits.append(max(max(map(abs, value)).bit_length(), 0))


def _product(known: _Coefficients, series: _Series, j: int, work: int) -> np.ndarray:
    """Coefficient j of the product of two series in v; what cannot reach the last bits is passed over."""
    known.upto(j)
    total = known.values[0] * series.values[j]
    least = work - 8 - j.bit_length()
    for i in range(1, j + 1):
        factor = known.values[i]
        if factor and factor.bit_length() + series.bits[j - i] > least:
            total = total + factor * series.values[j - i]
    return total >> work


class _Coefficients:
    """Taylor coefficients in v of ``value · (r/1)^±n · exp(± cubic)`` on a piece, as integers; made as they are asked for."""

    def __init__(
        self,
        segment: Segment,
        curve: tuple[float, ...],
        sign: int,
        start: mpmath.mpf,
        step: mpmath.mpf,
        value: mpmath.mpf,
        work: int,
    ) -> None:
        self.work = work
        a, b, c = (mpmath.mpf(v) for v in (curve or (0.0, 0.0, 0.0)))
        # ln = e_0 + e_1 v + e_2 v² + e_3 v³ about the start of the piece
        at = start * (a + start * (b + start * c))
        slope = sign * step * (a + start * (2 * b + 3 * start * c))
        self.log = (slope, sign * step**2 * (b + 3 * start * c), sign * step**3 * c)
        self.power = sign * segment.power
        x = mpmath.mpf(segment.start) + mpmath.mpf(segment.length) * start
        radius = mpmath.mpf(segment.origin) + mpmath.mpf(segment.direction) * x if segment.power else mpmath.mpf(1)
        self.ratio = mpmath.mpf(segment.direction) * mpmath.mpf(segment.length) * step / radius if segment.power else mpmath.mpf(0)
        self.factor = value * mpmath.exp(sign * at) * radius**self.power
        self.exact = [mpmath.mpf(1)]
        self.values = [self._whole(mpmath.mpf(1))]

    def _whole(self, value: mpmath.mpf) -> mpz:
        return mpz(int(mpmath.nint(mpmath.ldexp(value * self.factor, self.work))))

    def upto(self, j: int) -> None:
        """y' (1 + ρv) = y [n ρ + (1 + ρv)(e_1 + 2 e_2 v + 3 e_3 v²)], coefficient by coefficient."""
        e1, e2, e3 = self.log
        rho, n = self.ratio, self.power
        drive = (n * rho + e1, 2 * e2 + rho * e1, 3 * e3 + 2 * rho * e2, 3 * rho * e3)
        while len(self.exact) <= j:
            k = len(self.exact) - 1  # (k+1) y_(k+1) = Σ drive_i y_(k-i) - ρ k y_k
            total = -rho * k * self.exact[k]
            for i, d in enumerate(drive[: k + 1]):
                total += d * self.exact[k - i]
            self.exact.append(total / (k + 1))
            self.values.append(self._whole(self.exact[-1]))

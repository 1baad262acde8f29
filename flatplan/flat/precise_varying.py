"""Crossing a stretch of rock that varies along the path, in any number of digits.

The recurrence of `generating` by collocation, ``F_k' = S φ_(k-1) + Λ φ_k``, ``φ_k' = F_k / T``: on each piece of the stretch the
integrands are interpolated at Chebyshev places and integrated exactly [Trefethen2013]. Everything under the integrals is
non-negative, so a number of bits relative to the largest value on a piece is enough: the values of one order on one piece are
integers with a power of two of their own.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache
from operator import mul

import mpmath
import numpy as np
from gmpy2 import mpz

from flatplan.site import Segment

_PIECES = 24  # on the whole path, shared by travel time
_BEND = 1.5  # largest change of a logarithm on one piece
_GUARD = 64


def across_varying(
    segment: Segment, share: float, p: np.ndarray, f: np.ndarray, t_d: mpmath.mpf, unit: mpmath.mpf, work: int, bits: int
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
        Bits after the point of ``p`` and ``f``.
    bits : int
        Bits to be right, relative to each coefficient.
    """
    orders = len(p) - 1
    pieces = _pieces(segment, share, float(t_d))
    # on a piece the highest order grows like e^(2k h), h its share of the path
    swing = 1.0 + _BEND + 2.0 * orders * share * segment.slowness / math.sqrt(float(t_d)) / pieces
    bits = bits + _GUARD
    matrix = _integration(_places_needed(swing, bits), bits)
    with mpmath.workprec(bits + 16):
        pressure, rate = ([mpmath.ldexp(mpmath.mpf(int(v)), -work) for v in values] for values in (p, f))
        held = [mpmath.mpf(0)] * (orders + 1)
        for i in range(pieces):
            start, step = mpmath.mpf(share) * i / pieces, mpmath.mpf(share) / pieces
            piece = _Piece.of(segment, start, step, matrix, unit, t_d, bits)
            pressure, rate, stored = _crossed(piece, matrix, pressure, rate, bits)
            held = [a + b for a, b in zip(held, stored, strict=True)]

        def whole(values: list[mpmath.mpf]) -> np.ndarray:
            return np.array([mpz(int(mpmath.nint(mpmath.ldexp(v, work)))) for v in values], dtype=object)

        return whole(pressure), whole(rate), whole(held)


def _pieces(segment: Segment, share: float, t_d: float) -> int:
    curves = [curve or (0.0, 0.0, 0.0) for curve in (segment.mobility_curve, segment.capacity_curve)]
    bend = max(abs(a) + 2.0 * abs(b) + 3.0 * abs(c) for a, b, c in curves)
    part = segment.slowness / math.sqrt(t_d)
    leak = segment.slowness * math.sqrt(segment.leakage / segment.least_capacity)
    count = max(bend / _BEND, _PIECES * part, leak / 2.0, 1.0)
    if segment.power:
        radii = abs(segment.radius(segment.start)), abs(segment.radius(segment.end))
        count = max(count, segment.power * abs(math.log(radii[1] / radii[0])) / 0.5)
    return math.ceil(share * count)


def _places_needed(swing: float, bits: int) -> int:
    """n with ``(swing/2)^n / (2^n n!)`` below 2^-bits, twice over: the error of interpolating ``exp(swing x/2)``; multiples of 8."""
    n = 16
    while n * math.log2(0.25 * swing) - math.lgamma(n + 1.0) / math.log(2.0) > -bits - 16:
        n += 8
    return n


@dataclass(frozen=True)
class _Integration:
    """Chebyshev places on [0, 1], and the matrix of integrals from 0 to each of them and (last row) to 1, in units of 2^-bits."""

    places: list[mpmath.mpf]
    rows: list[list[mpz]]


@lru_cache(maxsize=16)
def _integration(count: int, bits: int) -> _Integration:
    with mpmath.workprec(bits + 64):
        angles = [mpmath.pi * (2 * i + 1) / (2 * count) for i in range(count)]
        # T_j at the places; the integral of T_j from -1 to each place and to 1
        table = [[mpmath.cos(j * a) for a in angles] for j in range(count + 1)]
        upto = []
        for j in range(count):
            ends = [*table[j + 1], mpmath.mpf(1)], [*(table[abs(j - 1)]), mpmath.mpf(1)]
            if j == 0:
                upto.append([v + 1 for v in ends[0]])
            elif j == 1:
                upto.append([(v * v - 1) / 2 for v in [*table[1], mpmath.mpf(1)]])
            else:
                sign = (-1) ** (j + 1)
                low = mpmath.mpf(sign) / (j + 1) - mpmath.mpf(sign) / (j - 1)
                upto.append([(a / (j + 1) - b / (j - 1) - low) / 2 for a, b in zip(*ends, strict=True)])
        fixed = [[int(mpmath.ldexp(v, bits + 32)) for v in row] for row in table[:count]]
        sums = [[int(mpmath.ldexp(v * (1 if j else mpmath.mpf(0.5)), bits + 32)) for v in row] for j, row in enumerate(upto)]
        by_place = [[mpz(fixed[j][i]) for j in range(count)] for i in range(count)]
        by_end = [[mpz(sums[j][m]) for j in range(count)] for m in range(count + 1)]
        # Σ_j (2/n) T_j(x_i) I_j(x_m), halved as [0, 1] is half as long as [-1, 1]
        rows = [[sum(map(mul, end, place)) // count >> (bits + 64) for place in by_place] for end in by_end]
        return _Integration([(1 + mpmath.cos(a)) / 2 for a in angles], rows)


@dataclass(frozen=True)
class _Piece:
    """Storage (over t_D), resistance and leakage along a piece at its places, as integers in units of 2^-bits times 2^exponent."""

    store: list[mpz]
    resist: list[mpz]
    leak: list[mpz] | None
    exponents: tuple[int, int, int]
    content: mpmath.mpf

    @classmethod
    def of(
        cls, segment: Segment, start: mpmath.mpf, step: mpmath.mpf, matrix: _Integration, unit: mpmath.mpf, t_d: mpmath.mpf, bits: int
    ) -> _Piece:
        """From ``start`` over ``step`` (shares of the stretch)."""
        along = mpmath.mpf(segment.length) * step
        store, resist, leak = [], [], []
        for v in matrix.places:
            u = start + step * v
            area = mpmath.mpf(segment.area_factor)
            if segment.power:
                x = mpmath.mpf(segment.start) + mpmath.mpf(segment.length) * u
                area *= (mpmath.mpf(segment.origin) + mpmath.mpf(segment.direction) * x) ** segment.power
            store.append(along * area * _along(segment.capacity, segment.capacity_curve, u) / unit / t_d)
            resist.append(along * unit / (area * _along(segment.mobility, segment.mobility_curve, u)))
            leak.append(along * area * mpmath.mpf(segment.leakage) / unit)
        made = [_block(values, bits) for values in (store, resist, leak)]
        return cls(made[0][0], made[1][0], made[2][0] if segment.leakage else None, (made[0][1], made[1][1], made[2][1]), unit * t_d)


def _along(value: float, curve: tuple[float, ...], u: mpmath.mpf) -> mpmath.mpf:
    if not curve:
        return mpmath.mpf(value)
    a, b, c = (mpmath.mpf(v) for v in curve)
    return mpmath.mpf(value) * mpmath.exp(u * (a + u * (b + u * c)))


def _block(values: list[mpmath.mpf], bits: int) -> tuple[list[mpz], int]:
    """Integers of at most ``bits`` bits and their common power of two."""
    top = max((int(mpmath.frexp(v)[1]) for v in values if v), default=0)
    return [mpz(int(mpmath.nint(mpmath.ldexp(v, bits - top)))) for v in values], top - bits


def _crossed(
    piece: _Piece, matrix: _Integration, pressure: list[mpmath.mpf], rate: list[mpmath.mpf], bits: int
) -> tuple[list[mpmath.mpf], list[mpmath.mpf], list[mpmath.mpf]]:
    """Both fields at the end of a piece, order after order, and what it holds."""
    ends_p, ends_f, held = [], [], []
    before: tuple[list[mpz], int] | None = None
    for k, (p_0, f_0) in enumerate(zip(pressure, rate, strict=True)):
        source = None
        if before is not None:
            up = 2 * k * (2 * k - 1)
            source = _cut([s * v * up for s, v in zip(piece.store, before[0], strict=True)], piece.exponents[0] + before[1], bits)
        values, p_end, f_end = _order(piece, matrix, p_0, f_0, source, bits)
        before = values
        inside = [s * v for s, v in zip(piece.store, values[0], strict=True)]
        total = sum(map(mul, matrix.rows[-1], inside))
        held.append(mpmath.ldexp(mpmath.mpf(total), piece.exponents[0] + values[1] - bits) * piece.content)
        ends_p.append(p_end)
        ends_f.append(f_end)
    return ends_p, ends_f, held


def _order(
    piece: _Piece, matrix: _Integration, p_0: mpmath.mpf, f_0: mpmath.mpf, source: tuple[list[mpz], int] | None, bits: int
) -> tuple[tuple[list[mpz], int], mpmath.mpf, mpmath.mpf]:
    """φ_k at the places, and both fields at the end: one sweep, or with leakage until nothing is added."""
    rates, f_end = _integrated(matrix, source, f_0, bits)
    slope = _cut([r * v for r, v in zip(piece.resist, rates[0], strict=True)], piece.exponents[1] + rates[1], bits)
    values, p_end = _integrated(matrix, slope, p_0, bits)
    more = values
    while piece.leak is not None:
        lost = _cut([c * v for c, v in zip(piece.leak, more[0], strict=True)], piece.exponents[2] + more[1], bits)
        rates, f_more = _integrated(matrix, lost, mpmath.mpf(0), bits)
        slope = _cut([r * v for r, v in zip(piece.resist, rates[0], strict=True)], piece.exponents[1] + rates[1], bits)
        more, p_more = _integrated(matrix, slope, mpmath.mpf(0), bits)
        f_end += f_more
        p_end += p_more
        values = _sum(values, more, bits)
        if not any(more[0]) or _top(more) < _top(values) - bits:
            break
    return values, p_end, f_end


def _integrated(
    matrix: _Integration, integrand: tuple[list[mpz], int] | None, start: mpmath.mpf, bits: int
) -> tuple[tuple[list[mpz], int], mpmath.mpf]:
    """The integral from the start of the piece plus ``start``, at the places and at the end."""
    count = len(matrix.places)
    constant = _block([start], bits)
    level = ([constant[0][0]] * count, constant[1])
    if integrand is None:
        return level, start
    values = [sum(map(mul, row, integrand[0])) >> bits for row in matrix.rows]
    end = start + mpmath.ldexp(mpmath.mpf(values[-1]), integrand[1])
    part = (values[:-1], integrand[1])
    return (_sum(part, level, bits) if start else part), end


def _top(block: tuple[list[mpz], int]) -> int:
    """Power of two above the largest number."""
    return max(map(abs, block[0])).bit_length() + block[1]


def _cut(values: list[mpz], exponent: int, bits: int) -> tuple[list[mpz], int]:
    """The same in integers of at most ``bits`` bits."""
    spare = max(max(map(abs, values)).bit_length() - bits, 0)
    return [v >> spare for v in values], exponent + spare


def _sum(a: tuple[list[mpz], int], b: tuple[list[mpz], int], bits: int) -> tuple[list[mpz], int]:
    """Sum of two blocks, in units ``bits`` bits below the larger."""
    unit = max(_top(a), _top(b)) + 1 - bits
    parts = [[v << (e - unit) if e >= unit else v >> (unit - e) for v in values] for values, e in (a, b)]
    return [x + y for x, y in zip(*parts, strict=True)], unit

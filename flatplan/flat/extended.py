"""The same sums in as many digits as the cancellation asks for, rounded to a double once at the end.

When the terms of the series are far larger than their sum, double precision is not enough. Here the
recurrences of `bump` and the sum of `summation` run on scaled integers: a number is an integer times
``2^-bits``, so that nothing is lost in a long sum of large terms that cancel. Elementary functions (one power,
one exponential for each time) come from mpmath.
"""

from __future__ import annotations

import math
from functools import lru_cache
from operator import mul

import mpmath
import numpy as np

from flatplan.flat.rise import Rise
from flatplan.flat.summation import SeriesSum, low_factors

_GUARD = 64
ROWS_KEPT = 256  # times whose rows are kept for the next sum at the same times


def evaluate_extended(series: SeriesSum, scaled: list[list[mpmath.mpf]], times: np.ndarray, shift: int, digits: int) -> np.ndarray:
    """`SeriesSum.evaluate` with ``digits`` correct decimal digits of the largest term, shape (channels, N).

    Parameters
    ----------
    series : SeriesSum
    scaled : list of list of mpf
        ĉ for each channel, in at least ``digits`` digits.
    times : ndarray
    shift : int
        Derivative of the output, -1 for its integral.
    digits : int
        Decimal digits carried.
    """
    totals = [[mpmath.mpf(0)] * times.size for _ in scaled]
    most = max(series.terms)
    bits = math.ceil(digits * math.log2(10.0)) + _GUARD + 2 * most
    with mpmath.workprec(bits):
        for rise, terms in zip(series.rises, series.terms, strict=True):
            _add_low(totals, series, rise, terms, scaled, times, shift)
            _add_bumps(totals, series, rise, terms, scaled, times, shift, bits)
        return np.array([[float(v) for v in row] for row in totals])


def _add_low(totals: list, series: SeriesSum, rise: Rise, terms: int, scaled: list, times: np.ndarray, shift: int) -> None:
    """The smooth low orders: a double holds them to the accuracy asked, as they are not multiplied up."""
    for k, factor in low_factors(series.t_d, shift, rise.lift):
        if k > terms:
            continue
        values = np.where(times > rise.start, rise.low_order(times, k + shift), 0.0) * factor
        for row, coefficients in enumerate(scaled):
            if coefficients[k]:
                for i in np.flatnonzero(values):
                    totals[row][i] += coefficients[k] * float(values[i])


def _add_bumps(totals: list, series: SeriesSum, rise: Rise, terms: int, scaled: list, times: np.ndarray, shift: int, bits: int) -> None:
    lowest = max(rise.lift - shift, 0)
    if terms < lowest:
        return
    first = lowest + shift - rise.lift
    x = mpmath.mpf(series.t_d) / mpmath.mpf(rise.width)
    # j! X^k/(2k)!, shared by the channels
    weight = mpmath.factorial(first)
    for k in range(1, lowest + 1):
        weight *= x / (2 * k * (2 * k - 1))
    shared = [weight]
    for i in range(1, terms - lowest + 1):
        k = lowest + i
        shared.append(shared[-1] * x * (first + i) / (2 * k * (2 * k - 1)))
    factor = mpmath.mpf(rise.bump_factor) * mpmath.mpf(rise.width) ** (-shift)
    rows = [_integers([w * coefficients[lowest + i] for i, w in enumerate(shared)], bits) for coefficients in scaled]
    for after, sign in rise.bumps:
        elapsed = (times - rise.start) - after
        for at in np.flatnonzero((elapsed > 0.0) & (elapsed < rise.width)):
            left = (mpmath.mpf(float(times[at])) - mpmath.mpf(rise.start) - mpmath.mpf(after)) / mpmath.mpf(rise.width)
            # a few orders to spare, so that the outputs of other shifts find the row made
            made = _bump_row(left, rise.gamma, max(terms + 2, first + len(shared) - 1), bits)
            if made is None:
                continue
            taylor, doubling, height = made
            for row, weights in enumerate(rows):
                totals[row][at] += sign * factor * height * _dot(weights, taylor[first : first + len(shared)], doubling, first, bits)


def _integers(values: list[mpmath.mpf], bits: int) -> list[tuple[int, int]]:
    """Each value as (integer of ``bits`` bits, power of two), relative precision kept however small it is."""
    out = []
    for value in values:
        if value == 0:
            out.append((0, 0))
            continue
        mantissa, exponent = mpmath.frexp(value)
        out.append((int(mpmath.ldexp(mantissa, bits)), int(exponent) - bits))
    return out


def _dot(weights: list[tuple[int, int]], taylor: list[int], doubling: int, first: int, bits: int) -> mpmath.mpf:
    """``Σ weight_j taylor_j 2^(doubling (first + j) - bits)``, to ``bits`` bits below its largest term."""
    terms = [(w * t, e + doubling * (first + j)) for j, ((w, e), t) in enumerate(zip(weights, taylor, strict=True)) if w and t]
    if not terms:
        return mpmath.mpf(0)
    unit = max(e + p.bit_length() for p, e in terms) - bits
    total = sum(p << (e - unit) if e >= unit else p >> (unit - e) for p, e in terms)
    return mpmath.ldexp(mpmath.mpf(total), unit - bits)


@lru_cache(maxsize=ROWS_KEPT)
def _bump_row(left: mpmath.mpf, gamma: float, orders: int, bits: int) -> tuple[list[int], int, mpmath.mpf] | None:
    """(scaled Taylor coefficients of b/b(σ) in τ = h 2^m, m, b(σ)) at one place σ; None where b is flat."""
    q0 = left * (1 - left)
    if q0 <= 0:
        return None
    steep = mpmath.power(q0, -mpmath.mpf(gamma))
    if steep > 1e6:
        return None
    near = float(min(left, 1 - left))
    doubling = math.ceil(-math.log2(near * min(0.5, max(orders, 1) / (gamma * float(steep)))))
    fixed = lambda v: int(mpmath.ldexp(v, bits))  # noqa: E731
    q1 = fixed(mpmath.ldexp((1 - 2 * left) / q0, -doubling))
    q2 = fixed(mpmath.ldexp(-1 / q0, -2 * doubling))
    g = fixed(mpmath.mpf(gamma))
    one = 1 << bits
    u = [-fixed(steep)]
    for n in range(1, orders + 1):
        value = ((g + (n - 1) * one) * q1 >> bits) * u[n - 1] >> bits
        if n > 1:
            value += ((2 * g + (n - 2) * one) * q2 >> bits) * u[n - 2] >> bits
        u.append(-value // n)
    weighted = [j * value for j, value in enumerate(u)]
    e = [one]
    for n in range(1, orders + 1):
        e.append((sum(map(mul, weighted[1 : n + 1], reversed(e))) >> bits) // n)
    return e, doubling, mpmath.exp(mpmath.power(4, mpmath.mpf(gamma)) - steep)

"""Taylor coefficients of the bump at one place to any number of bits, with a proven error.

As in `bump`, at a place σ ≤ 1/2 and with τ = h 2^m: ``b(σ + h) = b(σ) e(τ)``, ``e = exp(u - u_0)``, ``u = -q^-γ``.
Here the recurrences run on integers that stand for multiples of 2^-bits.

**Error.** Write q/q_0 = 1 + aτ - cτ² (a = (1-2σ) r/q_0, c = r²/q_0, r = 2^-m, a + c < 1), S = 1/(1-a-c) and compare power
series coefficient by coefficient (≪). Then u ≪ |u_0| (1-aτ-cτ²)^-γ, whose sum at τ = 1 is U = |u_0| S^γ, and
without its first term A = U - |u_0|. One step of the recurrence of u rounds by at most
``(γ+n+1)|u_(n-1)| + (2γ+n)|u_(n-2)| + 2 + n`` units over n, and an error is carried on by the same recurrence, so the errors of
u sum to at most

    H = S^γ (1 + S^μ (3(γ+1) U + 3K))   units,    μ = max(γ-1, 1),

as (1-x)^(γ-1) ≪ (1-x)^-μ. The step of e rounds by 2 units at most. If D is the error of e, û the computed u, then
D' ≪ Û'D + H'E + Δ', with E = e^(majorant of u): hence D ≪ e^Û (H E + Δ), and each coefficient of e is within

    e^(2A) 2H + e^A 4K   units (H ≤ ln 2 / 2^-bits makes the factor 2 enough).                     (1)

The bits follow from what a weighted sum of the coefficients may be off, place by place: few are needed near the ends
of the bump, where it is small. Comparison of power series: the method of majorants (Cauchy; e.g. Hille 1959) [Hille1959].
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache
from operator import add, mul

import gmpy2
import mpmath
import numpy as np
from gmpy2 import mpz

_DOUBLINGS = 14  # scales tried for τ, from the largest with a + c ≤ 1/2 on
_GUARD = 2  # bits on top of (1), for the rounding of the bound itself
_LN2 = math.log(2.0)
_SHORT = 36  # terms summed one by one


@dataclass(frozen=True)
class BumpRow:
    """``b^(k)(σ)/k! = coefficients[k] 2^(k doubling - bits) height``, k = 0 … K, at σ ≤ 1/2; odd orders change sign at 1 - σ.

    Each coefficient is within ``2^log2_error`` (in units of the real number, not of the integer) of the truth.
    """

    coefficients: list[mpz]
    doubling: int
    bits: int
    height: mpmath.mpf
    log2_error: float

    @property
    def orders(self) -> int:
        """K."""
        return len(self.coefficients) - 1

    def sums(self, weights: FixedWeights) -> tuple[float, float]:
        """``Σ weight_n b^(n)(σ)/n!`` over the even and over the odd orders, as far as the row has them."""
        ordered = self.coefficients[weights.first :]
        scale = self.height * mpmath.ldexp(1, weights.unit - self.bits)
        even, odd = (mpmath.mpf(sum(map(mul, weights.values[i::2], ordered[i::2]))) * scale for i in (0, 1))
        if weights.first % 2:
            even, odd = odd, even
        return even, odd


@dataclass(frozen=True)
class FixedWeights:
    """Weights of orders ``first + i`` times 2^((first + i) doubling), in whole units of 2^unit."""

    first: int
    values: list[mpz]
    unit: int

    @classmethod
    def of(cls, pairs: list[tuple[mpz, int]], first: int, doubling: int, bits: int) -> FixedWeights:
        """From mantissas and powers of two, units ``bits`` bits below the largest."""
        shifted = [(w, e + doubling * n) for n, (w, e) in enumerate(pairs, first)]
        unit = max((e + w.bit_length() for w, e in shifted if w), default=0) - bits
        return cls(first, [w << (e - unit) if e >= unit else w >> (unit - e) for w, e in shifted], unit)


def log2_row_errors(places: np.ndarray, gamma: float, orders: int) -> tuple[np.ndarray, np.ndarray]:
    """Bound (1) in units, as a power of two, for each place and each of several scales of τ.

    Parameters
    ----------
    places : ndarray
        σ, 0 < σ ≤ 1/2, shape (N,).
    gamma : float
    orders : int

    Returns
    -------
    doublings : ndarray of int
        m, shape (N, scales).
    errors : ndarray
        log2 of (1), shape (N, scales); and of H where that asks for more bits.
    """
    sigma = places[:, None]
    q0 = sigma * (1.0 - sigma)
    doublings = np.ceil(-np.log2(0.5 * places)).astype(np.int64)[:, None] + np.arange(_DOUBLINGS)[None, :]
    r = np.ldexp(1.0, -doublings)
    x = (1.0 - 2.0 * sigma) * r / q0 + r * r / q0
    with np.errstate(over="ignore", invalid="ignore"):
        log_s = -np.log1p(-np.minimum(x, 0.999))
        log_s = np.where(x < 0.75, log_s, np.inf)
        steep = q0**-gamma
        a = steep * np.expm1(gamma * log_s)
        log_h = gamma * log_s + np.log(1.0 + np.exp(max(gamma - 1.0, 1.0) * log_s) * 3.0 * ((gamma + 1.0) * (steep + a) + orders))
        errors = np.logaddexp(2.0 * a + log_h + _LN2, a + math.log(4.0 * max(orders, 1))) / _LN2 + _GUARD
    return doublings, np.where(np.isfinite(errors), errors, np.inf)


def log_height(places: np.ndarray, gamma: float) -> np.ndarray:
    """``ln b(σ)`` of the bump of height 1, from above."""
    with np.errstate(over="ignore"):
        return 4.0**gamma - (places * (1.0 - places)) ** -gamma * (1.0 - 1e-13)


def bump_row(place: mpmath.mpf, gamma: float, orders: int, doubling: int, bits: int, log2_units: float) -> BumpRow:
    """The row at one place σ ≤ 1/2 (exact), with ``bits`` bits after the point.

    ``log2_units`` is the bound (1) for this scale, from `log2_row_errors`.
    """
    with mpmath.workprec(bits + 64):
        q0 = place * (1 - place)
        g = mpmath.mpf(gamma)
        steep = mpmath.power(q0, -g)
        height = mpmath.exp(mpmath.power(4, g) - steep)

        def fixed(value: mpmath.mpf) -> mpz:
            return mpz(int(mpmath.ldexp(value, bits)))

        q1, q2 = fixed(mpmath.ldexp((1 - 2 * place) / q0, -doubling)), fixed(mpmath.ldexp(-1 / q0, -2 * doubling))
        g_int, last = fixed(g), -fixed(steep)
    one = mpz(1) << bits
    before = mpz(0)
    weighted = [mpz(0)]  # n u_n
    slope, curve = g_int * q1 >> bits, (2 * g_int - one) * q2 >> bits  # γ q1 and (2γ + n - 2) q2 for n = 1
    for n in range(1, orders + 1):
        now = -((slope * last >> bits) + (curve * before >> bits)) // n
        weighted.append(n * now)
        before, last = last, now
        slope += q1
        curve += q2
    e = exponential(weighted, bits)
    return BumpRow(e, doubling, bits, height, log2_units - bits)


def exponential(weighted: list[mpz], bits: int) -> list[mpz]:
    """``e_n = (Σ_(j=1..n) weighted_j e_(n-j) 2^-bits) / n`` from e_0 = 2^bits, rounded down twice.

    Products of long stretches are taken as products of single integers into which the stretches are packed (Kronecker's
    substitution), and a stretch is used as soon as it is known ([Knuth1997], sec. 4.3.3 and 4.7; [vanDerHoeven2002]).
    """
    count = len(weighted)
    e = [mpz(1) << bits] + [mpz(0)] * (count - 1)
    sums = [mpz(0)] * count
    held: dict[tuple[int, int], mpz] = {}
    size = max(map(abs, weighted)).bit_length()

    def solve(low: int, high: int) -> None:
        if high - low <= _SHORT:
            for n in range(max(low, 1), high):
                inner = sum(map(mul, weighted[1 : n - low + 1], e[n - 1 : low - 1 if low else None : -1]))
                e[n] = (sums[n] + inner >> bits) // n
            return
        middle = (low + high) // 2
        solve(low, middle)
        known = e[low:middle]
        length = high - low
        width = size + max(map(abs, known)).bit_length() + length.bit_length() + 2
        width += -width % 64
        if (length, width) not in held:
            held[length, width] = _packed(weighted[:length], width)
        product = _packed(known, width) * held[length, width]
        part = _unpacked(product, width, len(known) + length - 1)[middle - low : length]
        sums[middle:high] = map(add, sums[middle:high], part)
        solve(middle, high)

    solve(0, count)
    return e


@lru_cache(maxsize=512)
def _ones(width: int, count: int) -> mpz:
    """``Σ 2^(i width)``."""
    return ((mpz(1) << (width * count)) - 1) // ((mpz(1) << width) - 1)


def _packed(values: list[mpz], width: int) -> mpz:
    """``Σ values_i 2^(i width)``; sizes below ``2^(width - 1)``, either sign."""
    half = mpz(1) << (width - 1)
    return gmpy2.pack([v + half for v in values], width) - half * _ones(width, len(values))


def _unpacked(value: mpz, width: int, count: int) -> list[mpz]:
    """The inverse of `_packed`."""
    half = mpz(1) << (width - 1)
    parts = gmpy2.unpack(value + half * _ones(width, count), width)
    return [v - half for v in parts] + [-half] * (count - len(parts))

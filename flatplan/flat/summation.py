"""The truncated series of every channel at many times, in double precision.

``output(t) = Σ c_k y^(k)(t)`` with ``c_k = ĉ_k t_D^k/(2k)!`` and ``y`` a sum of rises. For one rise of bump
width D the derivative ``k`` is ``b^(j) D^-k`` with ``j = k - lift``, so all channels share the table

    g_j(t) = b^(j)(σ) · X^k/(2k)!,      X = t_D / D,

and each is one row of a matrix product ``ĉ @ g``. Factorials and powers are carried as a mantissa and a
power of two and joined with the bump's own exponent before anything leaves the range of a double.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from flatplan.flat.bump import BumpTable, bump_table
from flatplan.flat.rise import Rise

_CHUNK = 4096  # times at once: bounds memory, keeps the table in cache


@dataclass(frozen=True)
class Weights:
    """``weight[j] = mantissa[j] 2^exponent[j]`` for the bump's derivative ``first + j``."""

    first: int
    mantissa: np.ndarray
    exponent: np.ndarray


def _running_product(start: list[float], factors: list[float]) -> tuple[np.ndarray, np.ndarray]:
    """Products ``Π start · Π factors[:j]`` for j = 0 … len(factors), kept as mantissa and power of two."""
    m, e = 1.0, 0
    for factor in start:
        m, shift = math.frexp(m * factor)
        e += shift
    mantissa, exponent = [m], [e]
    for factor in factors:
        m, shift = math.frexp(m * factor)
        e += shift
        mantissa.append(m)
        exponent.append(e)
    return np.array(mantissa), np.array(exponent, dtype=np.int64)


def series_weights(x: float, lowest: int, first: int, count: int) -> Weights:
    """``j! X^k/(2k)!`` for ``k = lowest + i``, ``j = first + i``, i = 0 … count - 1."""
    start = [x / ((2.0 * k - 1.0) * 2.0 * k) for k in range(1, lowest + 1)] + [float(j) for j in range(1, first + 1)]
    factors = [x * (first + i) / ((2.0 * (lowest + i) - 1.0) * 2.0 * (lowest + i)) for i in range(1, count)]
    return Weights(first, *_running_product(start, factors))


def derivative_weights(width: float, lift: int, count: int) -> Weights:
    """``j! D^-(j + lift)`` for j = 0 … count - 1: the derivatives themselves."""
    return Weights(0, *_running_product([1.0 / width] * lift, [j / width for j in range(1, count)]))


def low_factors(t_d: float, shift: int, count: int) -> list[tuple[int, float]]:
    """(k, t_D^k/(2k)!) for the derivatives of order ``k + shift`` that lie below ``count``."""
    out = []
    for k in range(max(count - shift, 0)):
        if k + shift >= -1:
            out.append((k, t_d**k / math.factorial(2 * k)))
    return out


@dataclass(frozen=True)
class SeriesSum:
    """Sums ``Σ_k ĉ_k t_D^k/(2k)! y^(k + shift)`` over the rises of a target.

    Attributes
    ----------
    rises : tuple of Rise
    terms : tuple of int
        Highest k used for each rise.
    t_d : float
        Travel time [s].
    """

    rises: tuple[Rise, ...]
    terms: tuple[int, ...]
    t_d: float

    def evaluate(self, scaled: np.ndarray, times: np.ndarray, shift: int = 0, *, sizes: bool = False) -> np.ndarray:
        """Values at ``times`` [s], shape (channels, len(times)).

        Parameters
        ----------
        scaled : ndarray
            ĉ, shape (channels, at least the most terms + 1).
        times : ndarray
        shift : int
            Derivative of the output, -1 for its integral from the start.
        sizes : bool
            Sum the sizes of the terms instead: what cancellation and rounding are judged by.
        """
        return self.evaluate_all({shift: scaled}, times, sizes=sizes)[shift]

    def evaluate_all(self, scaled: dict[int, np.ndarray], times: np.ndarray, *, sizes: bool = False) -> dict[int, np.ndarray]:
        """The same for several derivatives, {shift: ĉ}, from one table of the bump."""
        out = {shift: np.zeros((hats.shape[0], times.size)) for shift, hats in scaled.items()}
        if sizes:
            scaled = {shift: np.abs(hats) for shift, hats in scaled.items()}
        for rise, most in zip(self.rises, self.terms, strict=True):
            self._add(out, rise, most, scaled, times, sizes)
        return out

    def _add(self, out: dict, rise: Rise, most: int, scaled: dict, times: np.ndarray, sizes: bool) -> None:
        live = np.flatnonzero(times > rise.start)
        if not live.size:
            return
        series = []
        for shift, hats in scaled.items():
            for k, factor in low_factors(self.t_d, shift, rise.lift):
                column = hats[:, k]
                if k <= most and np.any(column):
                    value = (rise.low_order_size if sizes else rise.low_order)(times[live], k + shift)
                    out[shift][:, live] += factor * column[:, None] * value[None, :]
            # k + shift = lift is the bump itself; with a large shift the bump's first orders are skipped
            lowest = max(rise.lift - shift, 0)
            if most >= lowest and np.any(hats[:, lowest : most + 1]):
                weights = series_weights(self.t_d / rise.width, lowest, lowest + shift - rise.lift, most - lowest + 1)
                series.append((out[shift], hats[:, lowest : most + 1] * (rise.bump_factor * rise.width**-shift), weights))
        if not series:
            return
        orders = max(weights.first + weights.mantissa.size - 1 for _, _, weights in series)
        for after, sign in rise.bumps:
            for at, table in bump_tables(rise, after, times, orders):
                for rows, coefficients, weights in series:
                    values = table.weighted(weights.mantissa, weights.exponent, weights.first)
                    if sizes:
                        rows[:, at] += np.abs(coefficients) @ np.abs(values)
                    else:
                        rows[:, at] += (sign * coefficients) @ values


def bump_tables(rise: Rise, after: float, times: np.ndarray, orders: int) -> Iterator[tuple[np.ndarray, BumpTable]]:
    """(where, the bump's derivatives to ``orders``) for each chunk of ``times`` inside the bump that begins ``after`` the rise.

    Places are taken from the start of the rise: a sum such as start + width would be rounded to the clock's own grain,
    which matters for a short corner years from the start.
    """
    elapsed = (times - rise.start) - after
    left_all = elapsed / rise.width
    right_all = (rise.width - elapsed) / rise.width
    inside = np.flatnonzero((left_all > 0.0) & (right_all > 0.0))
    for at in np.array_split(inside, math.ceil(inside.size / _CHUNK)) if inside.size else ():
        yield at, bump_table(left_all[at], right_all[at], rise.gamma, orders)


def corner_tables(rise: Rise, after: float, times: np.ndarray, weights: Weights) -> Iterator[tuple[np.ndarray, np.ndarray]]:
    """(where, weighted derivatives of the bump), the latter of shape (len(weights), len(where))."""
    for at, table in bump_tables(rise, after, times, weights.first + weights.mantissa.size - 1):
        yield at, table.weighted(weights.mantissa, weights.exponent, weights.first)

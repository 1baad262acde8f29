"""A corner's sums at all places of a panel from one row of Taylor coefficients at its centre.

With τ = (σ - c)/r, r = 2^-m, and the row ``b^(k)(c)/k! = e_k r^-k b(c)`` of `bump_rows`,

    G(σ) = Σ_n w_n b^(n)(σ)/n! = b(c) Σ_j τ^j Σ_n w_n r^-n C(n+j, j) e_(n+j),

one polynomial in τ, cut after j = J: what is left out is below ``M (ℓ/A)^(J+1)/(1 - ℓ/A)`` by Cauchy's estimate, M and A as in
`corner_curve`, ℓ half the panel. An error D of each e_k moves a value by at most ``D b(c) Σ |w_n| (r - ℓ)^-n/(1 - ℓ/r)``, as
``Σ_j C(n+j, j) q^j = (1-q)^-(n+1)``: from that follow the bits of the row. At the mirror image odd n change sign.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from functools import lru_cache
from operator import mul

import mpmath
import numpy as np
from gmpy2 import mpz

from flatplan.flat.bump_rows import BumpRow, bump_row, log2_row_errors, log_height
from flatplan.flat.corner_curve import NODES, log_largest, log_sums, orders_needed, places_and_weights, taylor_terms

_LN2 = math.log(2.0)
_TO_SPARE = 8  # orders, so that the sums of other derivatives find the row made
_BITS_TO_SPARE = 24
_MANY_BITS, _MANY_BITS_PER_ORDER = 1000, 5
_GUARD = 12  # bits below what is allowed at which integers are cut


@dataclass(frozen=True)
class Weights:
    """``w_n`` of several series for ``b^(n)/n!``, n = first …, each as mantissa and power of two; logarithms of their sizes."""

    first: int
    rows: list[list[tuple[mpz, int]]]
    logs: np.ndarray


@dataclass(frozen=True)
class PanelNeed:
    """What a panel takes.

    Attributes
    ----------
    panel : (float, float)
    count : int
        How many of the weights count.
    terms : int
        J.
    doubling : int
        m.
    bits : int
        Of the row.
    log2_units : float
        Error bound of the row's coefficients, in its units.
    """

    panel: tuple[float, float]
    count: int
    terms: int
    doubling: int
    bits: int
    log2_units: float

    @property
    def centre(self) -> float:
        return 0.5 * (self.panel[0] + self.panel[1])

    @property
    def half(self) -> float:
        return 0.5 * (self.panel[1] - self.panel[0])

    def orders(self, first: int) -> int:
        """Orders the row must have."""
        return first + self.count - 1 + self.terms


def panel_need(panel: tuple[float, float], gamma: float, weights: Weights, log_allowed: np.ndarray) -> PanelNeed:
    """Orders, scale and bits for a panel, so that each series is within ``log_allowed`` (natural logarithms) there."""
    centre, half = 0.5 * (panel[0] + panel[1]), 0.5 * (panel[1] - panel[0])
    part = log_allowed - math.log(4.0)  # the cut in n, the cut in j, the row, the integers
    count = orders_needed(centre, half, gamma, weights.logs, weights.first, part)
    terms = taylor_terms(centre, half, gamma, weights.logs[:, :count], weights.first, part)
    orders = weights.first + count - 1 + terms
    doublings, errors = (v[0] for v in log2_row_errors(np.array([centre]), gamma, orders + _TO_SPARE))
    radius = np.ldexp(1.0, -doublings)
    fits = np.flatnonzero((radius > 1.05 * half) & np.isfinite(errors))
    sums = log_sums(weights.logs[:, :count], weights.first, radius[fits] - half) - np.log1p(-half / radius[fits])[None, :]
    gain = (sums - part[:, None]).max(axis=0) + log_height(np.array([centre]), gamma)[0]
    need = gain / _LN2 + errors[fits]
    best = int(np.argmin(need))
    units = float(errors[fits[best]])
    return PanelNeed(panel, count, terms, int(doublings[fits[best]]), math.ceil(max(need[best], units, 8.0)), units)


def panel_needs(panels: list[tuple[float, float]], gamma: float, weights: Weights, log_allowed: np.ndarray) -> list[PanelNeed]:
    """What each panel takes; one that would take very many bits is halved until it takes fewer, or proves to be of no account."""
    stack, out = panels[::-1], []
    while stack:
        a, b = stack.pop()
        centre, half = 0.5 * (a + b), 0.5 * (b - a)
        if np.all(log_largest(centre, half, gamma, weights.logs, weights.first) <= log_allowed):
            continue
        need = panel_need((a, b), gamma, weights, log_allowed)
        if need.bits > _MANY_BITS + _MANY_BITS_PER_ORDER * need.orders(weights.first) and half > 1e-3 * centre:
            stack += [(centre, b), (a, centre)]
        else:
            out.append(need)
    return out


def panel_row(need: PanelNeed, gamma: float, first: int, held: BumpRow | None) -> BumpRow:
    """The row at a panel's centre: the one that is held if it serves."""
    error = need.log2_units - need.bits
    if held is not None and held.doubling == need.doubling and held.log2_error <= error and held.orders >= need.orders(first):
        return held
    bits = need.bits + _BITS_TO_SPARE
    row = bump_row(mpmath.mpf(need.centre), gamma, need.orders(first) + _TO_SPARE, need.doubling, bits, need.log2_units)
    # what is far below the proven error is not worth carrying on
    drop = max(math.floor(need.log2_units) - _GUARD, 0)
    return replace(row, coefficients=[c >> drop for c in row.coefficients], bits=bits - drop, log2_error=row.log2_error + 1e-3)


class Expansions:
    """Values on panels for one set of weights; tables that several panels need are made once.

    Parameters
    ----------
    weights : Weights
    needs : list of PanelNeed
    rows : list of BumpRow
        One for each panel.
    log_allowed : ndarray
        What each series may be off, natural logarithms.
    gamma : float
    """

    def __init__(self, weights: Weights, needs: list[PanelNeed], rows: list[BumpRow], log_allowed: np.ndarray, gamma: float) -> None:
        self.weights, self.needs, self.rows = weights, needs, rows
        # equal series are summed once: without skin and storage there are few different ones
        self.distinct: list[int] = []
        self.same_as: list[int] = []
        for row in weights.rows:
            match = next((i for i, d in enumerate(self.distinct) if weights.rows[d] == row), None)
            if match is None:
                match = len(self.distinct)
                self.distinct.append(len(self.same_as))
            self.same_as.append(match)
        # for each panel, what its row sums may be off (as powers of two), the height apart
        heights = log_height(np.array([need.centre for need in needs]), gamma)
        self.log2_allowed = (log_allowed[:, None] - heights[None, :]) / _LN2
        self.size: dict[int, tuple[int, int, float]] = {}  # for each m: most weights, most terms, log2 of what weights may be off
        for i, (need, made) in enumerate(zip(needs, rows, strict=True)):
            total = int(sum(map(abs, made.coefficients))).bit_length() - made.bits
            share = math.log2(1.0 - need.half * 2.0**need.doubling)
            known = self.size.get(need.doubling, (0, 0, math.inf))
            self.size[need.doubling] = (
                max(known[0], need.count),
                max(known[1], need.terms),
                min(known[2], share - total - heights[i] / _LN2),
            )
        self.log_allowed = log_allowed / _LN2
        self.tables: dict[tuple[int, int], tuple[list[list[mpz]], int]] = {}

    def _table(self, series: int, doubling: int) -> tuple[list[list[mpz]], int]:
        """``w_n 2^(mn) C(n+j, j)`` for j = 0 … J (outer) and n, in whole units of a power of two, and that power."""
        key = (series, doubling)
        if key not in self.tables:
            count, terms, room = self.size[doubling]
            first = self.weights.first
            row = self.weights.rows[series][:count]
            unit = math.floor(self.log_allowed[series] + room) - _GUARD
            spare = 32  # bits that the products with binomials may lose again
            current = []
            for n, (w, e) in enumerate(row, first):
                shift = e + doubling * n - unit + spare
                current.append(w << shift if shift >= 0 else w >> -shift)
            table = []
            for j in range(terms + 1):
                if j:  # C(n+j, j) = C(n+j-1, j-1) (n+j)/j
                    current = [v * (n + j) // j for n, v in enumerate(current, first)]
                table.append([v >> spare for v in current])
            self.tables[key] = (table, unit)
        return self.tables[key]

    def values(self, panel: int) -> np.ndarray:
        """G at the interpolation places of a panel and at their mirror images, shape (ν, 2, series)."""
        out = np.empty((NODES, 2, len(self.weights.rows)))
        found = [self._series(series, panel) for series in self.distinct]
        for r, i in enumerate(self.same_as):
            out[:, :, r] = found[i]
        return out

    def _series(self, series: int, panel: int) -> np.ndarray:
        need, row = self.needs[panel], self.rows[panel]
        first, count = self.weights.first, need.count
        table, unit = self._table(series, need.doubling)
        e = row.coefficients
        drop = max(math.floor(self.log2_allowed[series, panel]) - unit + row.bits - _GUARD - (need.terms + 1).bit_length(), 0)
        even, odd = [], []
        for j in range(need.terms + 1):
            at = first + j
            weights = table[j]
            sums = [sum(map(mul, weights[i:count:2], e[at + i : at + count : 2])) for i in (0, 1)]
            even.append(sums[first % 2] >> drop)
            odd.append(sums[1 - first % 2] >> drop)
        ratio = need.half * 2.0**need.doubling  # exact: a dyadic number
        size = max(sum(map(abs, even)), sum(map(abs, odd))).bit_length() + len(even).bit_length() + 4
        places = _powers(ratio, need.terms + 64 - need.terms % 64, size + 64 - size % 64)
        shift = size + 64 - size % 64
        scale = row.height * mpmath.ldexp(1, unit - row.bits + drop - shift)
        out = np.empty((NODES, 2))
        middle = NODES // 2
        parts = [[value[i::2] for i in (0, 1)] for value in (even, odd)]
        with mpmath.workprec(80):
            for i in range(middle):
                up, down = [], []
                for by_even, by_odd in parts:
                    a, b = sum(map(mul, by_even, places[i][0])), sum(map(mul, by_odd, places[i][1]))
                    up.append(a + b)
                    down.append(a - b)
                for at, (s, d) in ((i, down), (NODES - 1 - i, up)):
                    out[at] = float(mpmath.mpf(s + d) * scale), float(mpmath.mpf(s - d) * scale)
        return out


@lru_cache(maxsize=64)
def _powers(ratio: float, terms: int, bits: int) -> list[tuple[list[mpz], list[mpz]]]:
    """Even and odd powers of ``-u_i ratio`` for the first half of the places (u_i < 0), in units of 2^-bits."""
    u, _, _ = places_and_weights()
    out = []
    with mpmath.workprec(bits + 64):
        for value in u[: NODES // 2]:
            tau = mpz(int(mpmath.ldexp(-mpmath.mpf(float(value)) * mpmath.mpf(ratio), bits + 32)))
            powers = [mpz(1) << (bits + 32)]
            for _ in range(terms):
                powers.append(powers[-1] * tau >> (bits + 32))
            powers = [p >> 32 for p in powers]
            out.append((powers[0::2], powers[1::2]))
    return out

"""Sums of bump derivatives as a curve: polynomials through few exact values, with a proven distance from the sum.

For one corner ``G(σ) = Σ_n w_n b^(n)(σ)/n!``. Values to more digits than a double are dear, so they are made at a
few places only, and everything else is interpolated. On a panel with centre c and half length ℓ, let R < c be the radius
of a circle about c, m the least ``Re (z(1-z))^-γ`` on it, and ℓ < A < R. Cauchy's estimate in the discs of radius
R - A gives

    |G(z)| ≤ M = Σ_n |w_n| (R - A)^-n e^(4^γ - m)          for |z - c| ≤ A,

and the ellipse with foci at the ends of the panel and major half axis A lies in that disc: with ν Chebyshev places the
interpolant is within ``4 M ρ^-(ν-1)/(ρ - 1)``, ρ = A/ℓ + √(A²/ℓ² - 1) [Trefethen2013], Theorem 8.2. Panels are halved
until that is below what is allowed. Only the half 0 < σ ≤ 1/2 is cut into panels: the bump is even, so a place
and its mirror image share the sums over even and odd n.

Between grid nodes on the circle the least of Re h is found as in `bounds`, from a bound on its second derivative. Below
the lowest panel ``|G| ≤ Σ |w_n| (θσ)^-n e^(4^γ - μσ^-γ)`` (part iv in `bounds`), which still grows with σ there.

The polynomials are evaluated by the second barycentric formula, which is forward stable: [Higham2004].
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache

import mpmath
import numpy as np

NODES = 56  # ν
_ANGLES = 96
_CIRCLES = np.geomspace(0.04, 1.6, 24)  # R as multiples of c tan ψ
_NEARNESS = 0.97  # R/c at most
_SHARES = np.array([0.12, 0.25, 0.4, 0.55, 0.7, 0.85])  # (A - ℓ)/(R - ℓ)
_MOST_TAYLOR = 160  # terms of the expansion about the centre that yields the values at the places
_MOST_HALF = 0.25  # of the distance to the end: so that some scale of the row's variable reaches over the panel
_MOST_HALVINGS = 12
_UNIT = 2.0**-53


@lru_cache(maxsize=1)
def places_and_weights() -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Chebyshev places on [-1, 1] as doubles, the barycentric weights that belong to exactly these, and the matrix of derivatives."""
    u = np.polynomial.chebyshev.chebpts1(NODES)
    with mpmath.workprec(200):
        exact = [mpmath.mpf(v) for v in u]
        weights = [1 / mpmath.fprod(x - y for j, y in enumerate(exact) if j != i) for i, x in enumerate(exact)]
        top = max(abs(w) for w in weights)
        w = np.array([float(v / top) for v in weights])
    with np.errstate(divide="ignore"):
        slope = (w[None, :] / w[:, None]) / (u[:, None] - u[None, :])
    np.fill_diagonal(slope, 0.0)
    np.fill_diagonal(slope, -slope.sum(axis=1))
    return u, w, slope


def largest_growth() -> float:
    """Largest factor by which interpolation can raise an error at the places (Lebesgue constant), from above."""
    return 2.0 / math.pi * math.log(NODES) + 1.0


@dataclass(frozen=True)
class _Least:
    """4^γ - m for one panel and each of the circles about its centre, and their radii."""

    radius: np.ndarray
    log_bump: np.ndarray


@lru_cache(maxsize=4096)
def _largest_on_circles(centre: float, gamma: float) -> _Least:
    """``ln max |b|`` in the discs about ``centre``, from above."""
    tan = math.tan(math.pi / (2.0 * (gamma + 1.0)))
    radius = np.unique(centre * np.minimum(_CIRCLES * tan, _NEARNESS))
    phi = np.linspace(0.0, math.pi, _ANGLES + 1)
    w = radius[:, None] * np.exp(1j * phi)[None, :]
    z = centre + w
    q = z * (1.0 - z)
    size_q = np.abs(q)
    with np.errstate(over="ignore", invalid="ignore"):
        h = size_q**-gamma
        f = h * np.cos(gamma * np.angle(q))
        # |z| falls with φ and |1 - z| grows with it (centre ≤ 1/2), |1 - 2z| grows
        q_least = np.abs(z)[:, 1:] * np.abs(1.0 - z)[:, :-1]
        lever = radius[:, None] * np.abs(1.0 - 2.0 * z)[:, 1:] / q_least
        bend = q_least**-gamma * (gamma * (gamma + 1.0) * lever**2 + 2.0 * gamma * radius[:, None] ** 2 / q_least + gamma * lever)
        least = np.minimum(f[:, 1:], f[:, :-1]) - bend * (math.pi / _ANGLES) ** 2 / 8.0
        log_bump = 4.0**gamma - least.min(axis=1) + 1e-11 * (1.0 + 4.0**gamma + h.max(axis=1))
    return _Least(radius, np.where(np.isfinite(log_bump), log_bump, np.inf))


def log_sums(log_weights: np.ndarray, first: int, radius: np.ndarray) -> np.ndarray:
    """``ln Σ_n |w_n| radius^-n``, shape (rows, len(radius)); ``radius`` above 0."""
    n = first + np.arange(log_weights.shape[1])
    terms = log_weights[:, :, None] - n[None, :, None] * np.log(radius)[None, None, :]
    largest = terms.max(axis=1)
    floor = np.where(np.isfinite(largest), largest, 0.0)
    with np.errstate(divide="ignore"):  # a series without terms
        return floor + np.log(np.exp(terms - floor[:, None, :]).sum(axis=1)) + 1e-12


def log_largest(centre: float, half: float, gamma: float, log_weights: np.ndarray, first: int) -> np.ndarray:
    """``ln |G|`` on a panel, from above, for each row of weights."""
    known = _largest_on_circles(centre, gamma)
    fits = known.radius > 1.02 * half
    if not np.any(fits):
        return np.full(log_weights.shape[0], np.inf)
    return (log_sums(log_weights, first, known.radius[fits] - half) + known.log_bump[fits]).min(axis=1)


def log_distance(centre: float, half: float, gamma: float, log_weights: np.ndarray, first: int) -> np.ndarray:
    """``ln`` of the proven distance between G and its interpolant on a panel, for each row of weights."""
    known = _largest_on_circles(centre, gamma)
    fits = known.radius > 1.1 * half
    if not np.any(fits):
        return np.full(log_weights.shape[0], np.inf)
    radius, log_bump = known.radius[fits][:, None], known.log_bump[fits][:, None]
    major = half + _SHARES[None, :] * (radius - half)
    ratio = major / half
    rho = ratio + np.sqrt(ratio**2 - 1.0)
    # the places are rounded to doubles: far below the millionth that is added
    fixed = math.log(4.0) + 1e-6 + log_bump - (NODES - 1) * np.log(rho) - np.log(rho - 1.0)
    sums = log_sums(log_weights, first, (radius - major).ravel())
    return (sums + fixed.ravel()[None, :]).min(axis=1)


def taylor_terms(centre: float, half: float, gamma: float, log_weights: np.ndarray, first: int, log_allowed: np.ndarray) -> int:
    """Degree of the Taylor polynomial about the centre that is within what is allowed on the whole panel, for every row of weights."""
    known = _largest_on_circles(centre, gamma)
    fits = known.radius > 1.1 * half
    radius = known.radius[fits][:, None]
    major = half + _SHARES[None, :] * (radius - half)
    q = half / major
    sums = log_sums(log_weights, first, (radius - major).ravel()) + np.repeat(known.log_bump[fits], _SHARES.size)[None, :]
    over = sums - np.log1p(-q).ravel()[None, :] + 1e-6 - log_allowed[:, None]
    terms = np.ceil(over / -np.log(q).ravel()[None, :]).min(axis=1, initial=np.inf)
    return max(int(np.max(np.where(np.isfinite(log_weights).any(axis=1), terms, 0.0))), 1)


def orders_needed(centre: float, half: float, gamma: float, log_weights: np.ndarray, first: int, log_allowed: np.ndarray) -> int:
    """How many of the weights count on a panel: what the rest adds is under what is allowed, for every row of weights."""
    known = _largest_on_circles(centre, gamma)
    fits = known.radius > 1.02 * half
    n = first + np.arange(log_weights.shape[1])
    if not np.any(fits):
        return n.size
    sup = (known.log_bump[fits][None, :] - n[:, None] * np.log(known.radius[fits] - half)[None, :]).min(axis=1)
    rest = np.logaddexp.accumulate((log_weights + sup[None, :])[:, ::-1], axis=1)[:, ::-1]
    over = np.flatnonzero(np.any(rest > log_allowed[:, None] - 1e-6, axis=0))
    return int(over[-1]) + 1 if over.size else 1


def lowest_place(gamma: float, log_weights: np.ndarray, first: int, log_allowed: np.ndarray) -> float:
    """A place 2^-i below which |G| is under what is allowed, for every row of weights."""
    psi = math.pi / (2.0 * (gamma + 1.0))
    best = math.sin(psi) * math.cos(psi) ** gamma
    most = first + log_weights.shape[1] - 1
    for i in range(2, 60):
        place = 2.0**-i
        with np.errstate(over="ignore"):
            damping = best * np.float64(place) ** -gamma
        grows = place**-gamma * gamma * best >= most
        if grows and np.all(
            log_sums(log_weights, first, np.array([math.tan(psi) * place]))[:, 0] + 4.0**gamma - damping <= log_allowed - 1e-6
        ):
            return place
    raise AssertionError("a bump is flat at its ends")


def panels(gamma: float, log_weights: np.ndarray, first: int, log_allowed: np.ndarray) -> list[tuple[float, float]]:
    """(start, end) of the panels of the near half, in order, on each of which the interpolants are near enough.

    Parts where every row is below what is allowed are left out: there the curve is taken as 0.
    """
    stack = [(0.25, 0.5)]
    low = lowest_place(gamma, log_weights, first, log_allowed)
    start = 0.25
    while start > low:
        stack.append((0.5 * start, start))
        start *= 0.5
    out = []
    while stack:
        a, b = stack.pop()
        centre, half = 0.5 * (a + b), 0.5 * (b - a)
        small = half <= _MOST_HALF * centre
        near = small and np.all(log_distance(centre, half, gamma, log_weights, first) <= log_allowed)
        if near and taylor_terms(centre, half, gamma, log_weights, first, log_allowed) <= _MOST_TAYLOR:
            out.append((a, b))
        elif not np.all(log_largest(centre, half, gamma, log_weights, first) <= log_allowed):
            if b - a <= 2.0**-_MOST_HALVINGS * b:
                raise AssertionError("a bump is analytic inside")
            stack += [(centre, b), (a, centre)]
    return sorted(out)


@dataclass(frozen=True)
class CornerCurve:
    """G and its mirror image as polynomials on panels.

    Attributes
    ----------
    edges : ndarray
        Start and end of each panel, shape (P, 2).
    values : ndarray
        G at the places of each panel, at the near side and at the mirror image: shape (P, ν, 2, rows).
    """

    edges: np.ndarray
    values: np.ndarray

    def evaluate(self, near: np.ndarray, far_side: np.ndarray) -> np.ndarray:
        """Values, shape (rows, N), at the distance ``near`` ≤ 1/2 from the nearer end, which is the later one where ``far_side``."""
        out = np.zeros((self.values.shape[3], near.size))
        u, w, _ = places_and_weights()
        if not len(self.edges):
            return out
        panel = np.searchsorted(self.edges[:, 0], near, side="right") - 1
        inside = (panel >= 0) & (near <= self.edges[panel, 1])
        order = np.flatnonzero(inside)
        order = order[np.lexsort((far_side[order], panel[order]))]
        group = 2 * panel[order] + far_side[order]
        cuts = np.flatnonzero(np.diff(group)) + 1
        for at in np.split(order, cuts) if order.size else ():
            a, b = self.edges[panel[at[0]]]
            place = (near[at] - 0.5 * (a + b)) / (0.5 * (b - a))
            gap = place[:, None] - u[None, :]
            hit_row, hit = np.nonzero(gap == 0.0)
            gap[hit_row, hit] = 1.0
            share = w / gap
            share /= share.sum(axis=1)[:, None]
            share[hit_row] = 0.0
            share[hit_row, hit] = 1.0
            out[:, at] = (share @ self.values[panel[at[0]], :, int(far_side[at[0]])]).T
        return out

    def errors(self, shift_of_place: float) -> np.ndarray:
        """Bound on the rounding of `evaluate` for each row, when places are within ``shift_of_place`` [of the bump's width].

        (3ν+4 + 3ν+2) units by Theorem 4.2 of [Higham2004], one for the value at each place, and the slope times the shift.
        """
        rows = self.values.shape[3]
        if not len(self.edges):
            return np.zeros(rows)
        _, _, slope = places_and_weights()
        growth = largest_growth()
        largest = np.abs(self.values).max(axis=(0, 1, 2))
        steepness = np.einsum("ij,pjsr->pisr", slope, self.values) / (0.5 * np.diff(self.edges, axis=1))[:, :, None, None]
        return growth * (_UNIT * (6 * NODES + 7) * largest + shift_of_place * 1.01 * np.abs(steepness).max(axis=(0, 1, 2)))

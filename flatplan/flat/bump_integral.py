"""Integrals of the normalised bump: the step (once), the eased corner (twice), and once more.

With ``I = ∫ b`` and ``B1 = (1/I) ∫ b``, ``B2 = ∫ B1``, ``B3 = ∫ B2``, all from σ = 0. They are held
as Chebyshev series on panels of the near half and carried to the far half by the bump's symmetry::

    B1(1-σ) = 1 - B1(σ)      B2(1-σ) = 1/2 - σ + B2(σ)      B3(1-σ) = (σ-1/2)²/2 + 2 B3(1/2) - B3(σ)

so nothing is lost to cancellation at the far end. Integration of Chebyshev series: [Trefethen2013].
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.polynomial import chebyshev

_PANELS = 48
_DEGREE = 24


@dataclass(frozen=True)
class BumpIntegral:
    """The integral of one bump and its running integrals on the near half.

    Attributes
    ----------
    total : float
        ``I``, integral of the bump of height 1.
    series : tuple of ndarray
        Chebyshev coefficients of B1, B2, B3, each of shape ``(degree + 1, panels)``.
    half : tuple of float
        B1, B2, B3 at the middle.
    """

    total: float
    series: tuple[np.ndarray, ...]
    half: tuple[float, ...]

    def near(self, times: int, sigma: np.ndarray) -> np.ndarray:
        """``B_times`` at σ clipped to [0, 1/2]."""
        scaled = np.clip(sigma, 0.0, 0.5) * (2 * _PANELS)
        panel = np.minimum(scaled.astype(np.int64), _PANELS - 1)
        u = 2.0 * (scaled - panel) - 1.0
        c = self.series[times - 1]
        # Clenshaw's recurrence, the coefficients gathered panel by panel.
        b1 = np.zeros_like(u)
        b2 = np.zeros_like(u)
        for row in c[:0:-1]:
            b1, b2 = row[panel] + 2.0 * u * b1 - b2, b1
        return c[0][panel] + u * b1 - b2


@lru_cache(maxsize=256)
def bump_integral(gamma: float) -> BumpIntegral:
    """Integrals of the bump of this γ, computed once."""
    edges = np.linspace(0.0, 0.5, _PANELS + 1)
    half_width = 0.25 / _PANELS
    nodes = chebyshev.chebpts1(_DEGREE + 1)
    sigma = edges[:-1][None, :] + half_width * (nodes[:, None] + 1.0)
    with np.errstate(over="ignore"):  # σ^-γ may reach infinity at the flat end: exp(-inf) is the right 0
        values = np.exp(4.0**gamma * -np.expm1(-gamma * np.log1p(-np.square(1.0 - 2.0 * sigma))))
    vandermonde = chebyshev.chebvander(nodes, _DEGREE)
    vandermonde[:, 1:] *= 2.0
    coefficients = vandermonde.T @ values / (_DEGREE + 1)
    integrated: list[np.ndarray] = []
    half: list[float] = []
    for _ in range(3):
        coefficients = chebyshev.chebint(coefficients, lbnd=-1.0, scl=half_width)
        ends = coefficients.sum(axis=0)
        starts = np.concatenate([[0.0], np.cumsum(ends)[:-1]])
        coefficients[0] += starts
        if not integrated:
            total = 2.0 * float(starts[-1] + ends[-1])
            coefficients /= total
        integrated.append(coefficients)
        half.append(float(coefficients[:, -1].sum()))
    return BumpIntegral(total=total, series=tuple(integrated), half=tuple(half))

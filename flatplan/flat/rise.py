"""The building block of every target: a straight ramp of some length smoothed by a bump of some width.

``y(t) = weight · (1/ℓ) ∫_0^ℓ Φ((t - start - r)/D) dr``, with ``Φ`` the normalised integral of the bump.
``ℓ = 0`` is the plain step (a move of one bump); a piecewise-linear table convolved with a bump is one
rise per piece. All derivatives from the first (``ℓ = 0``) or second (``ℓ > 0``) are bumps at the corners::

    ℓ = 0:   y^(k) = weight b^(k-1)(σ) / (I D^k)                          k ≥ 1
    ℓ > 0:   y^(k) = weight [b^(k-2)(σ_1) - b^(k-2)(σ_2)] / (I ℓ D^(k-1))   k ≥ 2
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from flatplan.flat.bump_integral import BumpIntegral, bump_integral


@dataclass(frozen=True)
class Rise:
    """A smoothed ramp.

    Attributes
    ----------
    start : float
        When it leaves rest [s].
    width : float
        Width D of the smoothing bump [s], above zero.
    ramp : float
        Length ℓ of the straight ramp [s], zero or more; the rise lasts ``width + ramp``.
    weight : float
        Total change.
    gamma : float
        Exponent γ of the bump; Gevrey order ``1 + 1/γ``.
    """

    start: float
    width: float
    ramp: float
    weight: float
    gamma: float

    @property
    def end(self) -> float:
        """When it is at rest again [s]."""
        return self.start + self.width + self.ramp

    @property
    def order(self) -> float:
        """Gevrey order ``s = 1 + 1/γ``."""
        return 1.0 + 1.0 / self.gamma

    @property
    def lift(self) -> int:
        """How many times the bump is integrated: derivative ``k`` is the bump's derivative ``k - lift``."""
        return 2 if self.ramp > 0.0 else 1

    @property
    def bump_factor(self) -> float:
        """``weight / I`` times ``width/ramp`` for a ramp: what multiplies ``b^(k - lift) / width^k``."""
        factor = self.weight / bump_integral(self.gamma).total
        return factor * self.width / self.ramp if self.ramp > 0.0 else factor

    @property
    def bumps(self) -> tuple[tuple[float, float], ...]:
        """(when after the start, sign) for each bump of the derivatives."""
        return ((0.0, 1.0), (self.ramp, -1.0)) if self.ramp > 0.0 else ((0.0, 1.0),)

    @property
    def corners(self) -> tuple[tuple[float, float], ...]:
        """The same with the time [s] at which each begins."""
        return tuple((self.start + after, sign) for after, sign in self.bumps)

    def low_order(self, times: np.ndarray, order: int) -> np.ndarray:
        """Derivative of order -1 (integral from the start), 0, or (for a ramp) 1, at ``times`` [s].

        These are not confined to the corners; higher ones come from the bump.
        """
        t = times - self.start
        integral = bump_integral(self.gamma)
        first = t / self.width
        if self.ramp == 0.0:
            if order == 0:
                return self.weight * _step(integral, first)
            return self.weight * (np.maximum(t - 0.5 * self.width, 0.0) + self.width * _corner(integral, first))
        second = (t - self.ramp) / self.width
        middle = t - 0.5 * self.width
        if order == 1:
            return self.weight / self.ramp * (_step(integral, first) - _step(integral, second))
        if order == 0:
            straight = np.clip(middle / self.ramp, 0.0, 1.0)
            return self.weight * (straight + self.width / self.ramp * (_corner(integral, first) - _corner(integral, second)))
        within = np.clip(middle, 0.0, self.ramp)
        straight = within**2 / (2.0 * self.ramp) + np.maximum(middle - self.ramp, 0.0)
        eased = self.width**2 / self.ramp * (_corner_area(integral, first) - _corner_area(integral, second))
        return self.weight * (straight + eased)

    def low_order_size(self, times: np.ndarray, order: int) -> np.ndarray:
        """Size of what `low_order` adds and subtracts: rounding is judged by it. A short ramp is a difference of large numbers."""
        if self.ramp == 0.0 or self.ramp >= self.width:
            return np.abs(self.low_order(times, order))
        integral = bump_integral(self.gamma)
        first, second = (times - self.start) / self.width, (times - self.start - self.ramp) / self.width
        part = {1: _step, 0: _corner, -1: _corner_area}[order]
        under_way = (first > 0.0) & (times < self.end)
        parts = np.abs(self.weight) * self.width ** (1 - order) / self.ramp * (part(integral, first) + part(integral, second))
        return np.abs(self.low_order(times, order)) + np.where(under_way, parts, 0.0)


def _confined(values: Callable[[np.ndarray], np.ndarray], sigma: np.ndarray, after: float) -> np.ndarray:
    """``values`` where 0 < σ < 1, 0 before and ``after`` beyond: only the corner itself is computed."""
    out = np.where(sigma >= 1.0, after, 0.0)
    inside = np.flatnonzero((sigma > 0.0) & (sigma < 1.0))
    if inside.size:
        out[inside] = values(sigma[inside])
    return out


def _step(integral: BumpIntegral, sigma: np.ndarray) -> np.ndarray:
    """Φ: 0 before, 1 after."""

    def values(s: np.ndarray) -> np.ndarray:
        near = integral.near(1, np.minimum(s, 1.0 - s))
        return np.where(s > 0.5, 1.0 - near, near)

    return _confined(values, sigma, 1.0)


def _corner(integral: BumpIntegral, sigma: np.ndarray) -> np.ndarray:
    """∫Φ minus the broken line max(σ - 1/2, 0): confined to 0 < σ < 1 and even about the middle."""
    return _confined(lambda s: integral.near(2, np.minimum(s, 1.0 - s)), sigma, 0.0)


def _corner_area(integral: BumpIntegral, sigma: np.ndarray) -> np.ndarray:
    """∫∫Φ minus half the square of the broken line: 0 before, the constant ``2 B3(1/2)`` after."""

    def values(s: np.ndarray) -> np.ndarray:
        near = integral.near(3, np.minimum(s, 1.0 - s))
        return np.where(s > 0.5, 2.0 * integral.half[2] - near, near)

    return _confined(values, sigma, 2.0 * integral.half[2])

"""One eased ramp from rest to rest on a fixed grid: every channel of any duration by one small matrix product.

A move of order s and easing e is the same curve at every duration, so the derivatives of its bump are computed once. With the bump's
width w and ``X = t_D / w``, the term of the derivative ``k + shift`` of a channel ``Σ ĉ_k t_D^k/(2k)! y^(k)`` is

    ĉ_k X^k w^-shift · b^(j)(σ)/(2k)! · factor,        j = k + shift - lift,

and only the powers of X and w change with the duration. This is what a search over shapes and durations is made with; what it finds is
checked on the plan itself.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from flatplan.flat.bump import bump_table
from flatplan.flat.bump_integral import bump_integral
from flatplan.flat.generating import scaled_coefficients
from flatplan.flat.rise import Rise
from flatplan.flat.summation import series_weights
from flatplan.site import Medium

POINTS = 400  # intervals across a corner
_ORDERS = 90  # derivatives of the bump held
_PLATEAU = 40  # places between the two corners
# A sum whose last terms exceed this share of its peak is not resolved; one whose terms cancel further than this is left alone: its plan
# would need hundreds of terms in more digits than a double's, for a move with corners that no pump would follow.
_UNRESOLVED = 1e-10
_MOST_CANCELLATION = 1e5
_MOST_X = 30.0  # travel time over corner, beyond which none is resolved


@lru_cache(maxsize=96)
def _bump_rows(gamma: float) -> np.ndarray:
    """``b^(j)(σ)/(2j)!`` at σ = i/POINTS, shape (orders + 1, POINTS + 1)."""
    half = np.arange(1, POINTS // 2 + 1) / POINTS
    weights = series_weights(1.0, 0, 0, _ORDERS + 1)
    rows = np.zeros((_ORDERS + 1, POINTS + 1))
    near = bump_table(half, 1.0 - half, gamma, _ORDERS).weighted(weights.mantissa, weights.exponent)
    rows[:, 1 : POINTS // 2 + 1] = near
    rows[:, POINTS // 2 : POINTS] = near[:, ::-1]  # the bump is even about its middle
    rows[1::2, POINTS // 2 + 1 :] *= -1.0
    return rows


@dataclass(frozen=True, eq=False)
class MoveShape:
    """A unit move of one order and easing on a grid; made by `move_shape`.

    Attributes
    ----------
    order, easing : float
    places : ndarray
        Times of the grid from the start of the move, in bump widths, shape (n,).
    rows : ndarray
        Derivatives of the bump, see `_bump_rows`.
    low : dict of int to ndarray
        The unit move's integral, itself and (for a ramp) first derivative, in powers of the width.
    """

    order: float
    easing: float
    places: np.ndarray
    rows: np.ndarray
    low: dict[int, np.ndarray]

    @property
    def ramp(self) -> float:
        """Length of the straight ramp, in bump widths."""
        return 1.0 / self.easing - 1.0

    def channel(self, scaled: np.ndarray, t_d: float, duration: float, shift: int = 0) -> np.ndarray | None:
        """A channel of the unit move, or a time derivative of it.

        Parameters
        ----------
        scaled : ndarray
            ĉ_k, shape (at least `COEFFICIENTS`,).
        t_d : float
            Travel time [s].
        duration : float
            Of the move [s].
        shift : int
            Derivative of the channel; -1 for its integral from the start.

        Returns
        -------
        ndarray or None
            At ``places``, shape (n,); None where the terms held do not resolve it.
        """
        width = self.easing * duration
        x = t_d / width
        if x > _MOST_X:
            return None
        lift = 1 if self.ramp == 0.0 else 2
        out = np.zeros(self.places.size)
        factor = 1.0
        for i in range(max(lift - shift, 0)):  # derivative i + shift is not a bump yet
            if i:
                factor *= x / ((2.0 * i - 1.0) * 2.0 * i)
            if i + shift >= -1 and scaled[i]:
                out += (scaled[i] * factor * width**-shift) * self.low[i + shift]
        lowest = max(lift - shift, 0)
        first = lowest + shift - lift
        k = np.arange(lowest, lowest + _ORDERS + 1 - first)
        j = k + (shift - lift)
        # (2j)!/(2k)! with j - k = shift - lift: from -3 to 0, or above for a second derivative
        ratio = _factorial_ratio(j, k)
        weights = scaled[k] * ratio * x**k
        if not np.any(weights):
            return out
        scale = width**-shift / bump_integral(1.0 / (self.order - 1.0)).total / (self.ramp if lift == 2 else 1.0)
        rows = self.rows[first:]
        corner = weights @ rows
        last = np.abs(weights[-4:, None] * rows[-4:]).max()
        peak = np.abs(corner).max()
        if last > _UNRESOLVED * peak or np.max(np.abs(weights) @ np.abs(rows)) > _MOST_CANCELLATION * peak:
            return None
        self._place(out, scale * corner, lift)
        return out

    def _place(self, out: np.ndarray, corner: np.ndarray, lift: int) -> None:
        """Add the first corner and take away the second."""
        out[: POINTS + 1] += corner
        if lift == 1:
            return
        if self.ramp >= 1.0:
            out[-(POINTS + 1) :] -= corner
            return
        whole = round(self.ramp * POINTS)
        if abs(whole - self.ramp * POINTS) < 1e-9 * POINTS:
            out[whole : whole + POINTS + 1] -= corner
            return
        from scipy.interpolate import CubicSpline

        at = self.places - self.ramp
        inside = (at > 0.0) & (at < 1.0)
        out[inside] -= CubicSpline(np.linspace(0.0, 1.0, POINTS + 1), corner)(at[inside])


COEFFICIENTS = _ORDERS + 5


def _factorial_ratio(j: np.ndarray, k: np.ndarray) -> np.ndarray:
    """``(2j)!/(2k)!`` where j - k is the same small number throughout."""
    apart = int(k[0] - j[0])
    ratio = np.ones(len(k))
    for step in range(abs(apart)):
        top = (k if apart > 0 else j) - step
        ratio *= 2.0 * top * (2.0 * top - 1.0)
    return 1.0 / ratio if apart > 0 else ratio


@lru_cache(maxsize=512)
def move_shape(order: float, easing: float) -> MoveShape:
    """The unit move of this order and easing, prepared once."""
    gamma = 1.0 / (order - 1.0)
    ramp = 0.0 if easing == 1.0 else 1.0 / easing - 1.0
    step = 1.0 / POINTS
    first = np.arange(POINTS + 1) * step
    if ramp >= 1.0:
        places = np.concatenate([first, np.linspace(1.0, ramp, _PLATEAU + 2)[1:-1], ramp + first])
    else:
        places = np.arange(round((1.0 + ramp) * POINTS) + 1) * step
        if places[-1] < 1.0 + ramp - 1e-9:
            places = np.append(places, 1.0 + ramp)
    rise = Rise(0.0, 1.0, ramp, 1.0, gamma)
    low = {order: rise.low_order(places, order) for order in ((-1, 0) if ramp == 0.0 else (-1, 0, 1))}
    return MoveShape(order, easing, places, _bump_rows(gamma), low)


@lru_cache(maxsize=64)
def coefficients(medium: Medium, channel: str) -> np.ndarray:
    """ĉ_0 … of a channel, as many as a shape takes."""
    if channel == "target_pressure":
        unit = np.zeros(COEFFICIENTS)
        unit[0] = 1.0
        return unit
    return np.asarray(scaled_coefficients(medium, channel, COEFFICIENTS - 1))

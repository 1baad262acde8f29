"""A proven bound on every scaled channel coefficient ``ĉ_k``, for the tail of the series.

With the admittance ``Y = sqrt(S T)`` and the path coordinate ``τ = ∫ sqrt(S/T) dx`` (so τ(L)² = t_D), the
travelling parts ``a = (Y^½ p + Y^-½ T p_x / √s) / 2`` and ``b = (Y^½ p - Y^-½ T p_x / √s) / 2`` of the
Laplace-domain field obey ``a' = √s a + r b``, ``b' = -√s b + r a`` with ``r = (ln Y)'/2``. Expanded in powers
of √s by the series of its iterated integrals (all of them bounded by replacing r with |r|, whose integral is
V/2), the field of a sealed face starts from a = b = Y(0)^½/2, that of a held face from a = -b. Coefficient by
coefficient in √s, with V the total variation of ln Y and V⁻ its total decrease on the way to the sandface:

    sealed   φ_k(L) ≤ e^(V⁻) t_D^k/(2k)!                               F_k(L) ≤ √(Y(0)Y(L)) e^(V/2) t_D^(k-½)/(2k-1)!
    held     φ_k(L) ≤ e^(V/2)/√(Y(0)Y(L)) t_D^(k+½)/(2k+1)!             F_k(L) ≤ √(Y(L)/Y(0)) e^(V/2) t_D^k/(2k)!
    face     sealed_k + κ held_k + C_f held_(k-1)

For one slab Y is constant, V = 0 and the sealed bounds are the coefficients themselves. With leakage the series
in s is taken at s + λ, λ = max Λ/S (coefficients only grow with Λ); as C(j+i, i) (2j)!/(2j+2i)! ≤ 1/(2i)!
(Vandermonde: C(2n, 2i) ≥ C(n, i)², and C(2n-1, 2i) ≥ C(n, i) C(n-1, i) for i < n, n = j+i), that multiplies each
bound for k ≥ 1 by at most cosh √(λ t_D).
"""

from __future__ import annotations

import math

import numpy as np

from flatplan.flat.generating import scaled_coefficients
from flatplan.site import Medium

# Coefficients come from floating-point sums of non-negative terms; far above their relative error.
_SLACK = 1.0 + 1e-9


def admittance_variation(medium: Medium) -> tuple[float, float, float, float]:
    """(Y(0), Y(L), V, V⁻) of a medium, V and V⁻ from above: each monotone part of ln Y is counted by itself."""
    first, last = medium.segments[0], medium.segments[-1]
    steps: list[float] = []
    before = None
    for s in medium.segments:
        start, end = (0.5 * math.log(float(s.storage(x)) * float(s.conductance(x))) for x in (s.start, s.end))
        if before is not None:
            steps.append(start - before)
        steps.extend(s.log_admittance_steps)
        before = end
    ends = [math.sqrt(float(s.storage(x)) * float(s.conductance(x))) for s, x in ((first, first.start), (last, last.end))]
    return ends[0], ends[1], sum(abs(v) for v in steps), sum(max(-v, 0.0) for v in steps)


def _face_bounds(medium: Medium, k: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Bounds on φ̂_k(L) and F̂_k(L) without leakage in the layer, k ≥ 1."""
    t_d = medium.travel_time
    y_0, y_l, v, v_down = admittance_variation(medium)
    root = math.sqrt(t_d)
    held_p = math.exp(0.5 * v) / math.sqrt(y_0 * y_l) * root
    held_f = math.exp(0.5 * v) * math.sqrt(y_l / y_0)
    if medium.face.held:
        return held_p / (2.0 * k + 1.0), held_f * np.ones_like(k)
    kappa, store = medium.face.leak, medium.face.storage
    up = _one_order_up(k, t_d)
    pressure = math.exp(v_down) + kappa * held_p / (2.0 * k + 1.0) + store * held_p / (2.0 * k - 1.0) * up
    rate = math.exp(0.5 * v) * math.sqrt(y_0 * y_l) / root * 2.0 * k + kappa * held_f + store * held_f * up
    return pressure, rate


def _one_order_up(k: np.ndarray, t_d: float) -> np.ndarray:
    """What carries a coefficient from order k - 1 to k in the scaling t_D^k/(2k)!."""
    return 2.0 * k * (2.0 * k - 1.0) / t_d


def scaled_bounds(medium: Medium, channel: str, orders: np.ndarray) -> np.ndarray:
    """Bound on ``|ĉ_k|`` for each k ≥ 2 in ``orders``; it grows no faster than k⁴.

    ``φ_k(x)`` grows with x, so the sandface bound serves the pressure anywhere.
    """
    k = np.asarray(orders, dtype=float)
    if channel == "target_pressure":
        return np.zeros_like(k)
    pressure, rate = _face_bounds(medium, k)
    resistance, storage = abs(medium.well_resistance), medium.well.storage
    if channel in ("sandface_pressure", "pressure"):
        out = pressure
    elif channel == "sandface_rate":
        out = rate
    elif channel == "bottomhole_pressure":
        out = pressure + resistance * rate
    else:
        out = rate
        if storage:
            before_pressure, before_rate = _face_bounds(medium, k - 1.0)
            out = out + storage * (before_pressure + resistance * before_rate) * _one_order_up(k, medium.travel_time)
    leak = max(s.leakage / s.least_capacity for s in medium.segments)
    return out * (math.cosh(math.sqrt(leak * medium.travel_time)) * _SLACK)


def scaled_sizes(medium: Medium, channel: str, orders: int) -> np.ndarray:
    """``|ĉ_0| … |ĉ_orders|`` from the coefficients themselves, from above.

    They are sums of terms of one sign, with an error far below the 1e-9 by which they are raised; for a stimulated well (negative
    skin) some are differences, and there 1e-9 of the bound on the parts is added instead.
    """
    out = np.abs(scaled_coefficients(medium, channel, orders)) * _SLACK
    if medium.well_resistance < 0.0:
        k = np.arange(orders + 1, dtype=float)
        low = np.abs(scaled_coefficients(medium, "sandface_pressure", orders)) + abs(medium.well_resistance) * np.abs(
            scaled_coefficients(medium, "sandface_rate", orders)
        )
        out += 1e-9 * np.where(k < 2.0, low, scaled_bounds(medium, channel, np.maximum(k, 2.0)))
    return out

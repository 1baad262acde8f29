"""How large a derivative of the bump can be: a bound for each order, and a closed form to infinity.

Notation: ``b(σ) = exp(4^γ - (σ(1-σ))^-γ)``, height 1; ``h(z) = (z(1-z))^-γ``, analytic in the strip
``0 < Re z < 1``, where ``Re z(1-z) > 0``. Cauchy's estimate on the circle ``z = σ + θσ e^(iφ)`` gives, for
``σ ≤ 1/2`` (the other half is its mirror image) and ``θ < 1`` (θ = 1, met at γ = 1 only, as a limit),

    |b^(k)(σ)| ≤ k! (θσ)^-k exp(4^γ - m),     m = min over φ of Re h(z).                          (1)

**Closed form.** With ``ψ = π / (2(γ+1))`` and ``θ = tan ψ``, for γ ≥ 1,

    sup |b^(k)| ≤ e^(4^γ) (k!)^s / ρ^k,     s = 1 + 1/γ,    ρ = γ^(1/γ) (sin ψ)^(1+1/γ).            (2)

*Proof.* (i) For z on the circle with Re z ≤ 1/2, write z = r e^(iα), 1 - z = r' e^(-iβ). Both have the same
height above the real axis and Re(1-z) ≥ Re z, so β ≤ α, and |1-z| ≤ 1. Hence |arg z(1-z)| = |α - β| ≤ α, and
with γα ≤ π/2 (shown in iii) Re h(z) ≥ r^-γ cos γα = Re z^-γ. (ii) For Re z > 1/2 the mirror point 1 - z
has real part below 1/2 and, as σ ≤ 1/2, lies no farther from σ than z does: it is in the disc, h has the
same value there, and (i) applies with the minimum principle for the harmonic Re z^-γ on the disc. So
m ≥ σ^-γ μ, μ = min over |z - 1| = θ of Re z^-γ. (iii) The far point of the circle at angle α has
r(α) = cos α + (θ² - sin²α)^(1/2), and d/dα ln(r^-γ cos γα) = γ (tan η - tan γα) with sin η = sin α / θ. Its
sign is that of 1/θ - sin γα / sin α, and sin γα / sin α decreases on (0, π/γ), so there is one minimum, where
sin γα = sin α / θ; at θ = tan ψ that is α = ψ (γψ = π/2 - ψ). There r = 1/cos ψ, so μ = cos^γ ψ sin ψ. As
sin γα / sin α at α = π/(2γ) > ψ is 1/sin(π/2γ) ≤ 1/tan ψ, all angles on the circle satisfy γα ≤ π/2.
(iv) The right side of (1), k! (θσ)^-k e^(-μ σ^-γ), is largest at σ^-γ = k/(γμ): k! θ^-k (k/(e γ μ))^(k/γ), and
k^k ≤ e^k k!. So ρ = θ (γμ)^(1/γ) = γ^(1/γ) tan ψ (cos^γ ψ sin ψ)^(1/γ), which is (2).  ∎

**Bound per order.** (2) keeps only the near end of the bump; the far end damps further, by a great deal for
large γ. So `log_bump_bounds` evaluates (1) itself on a grid of (ln σ, φ) for several θ. Between grid
nodes it uses |f - bilinear| ≤ (δ²/8) sup|f_LL| + (Δ²/8) sup|f_φφ| for f = Re h, with, for q = z(1-z) and w = z - σ,

    |f_LL| ≤ |h| (γ² |p|² + γ |z|/|1-z|²),  p = (1-2z)/(1-z)
    |f_φφ| ≤ |h| (γ(γ+1) |w(1-2z)/q|² + 2γ |w|²/|q| + γ |w(1-2z)/q|)

and on each cell the monotone factors at the corner that is worst: |z| falls with φ and grows with σ, |1-z|
grows with φ and falls with σ (for θ ≤ 1, σ ≤ 1/2), |1-2z| grows with φ and is convex in σ. Since -k ln(θσ) is
linear in ln σ it needs no such term, and neither does the largest over a cell of a bound that is linear there.
Below the grid, (iv) at the grid's end: it still grows with σ there, as σ^-γ > k/(γμ).
Rounding is outwards throughout: ρ is an interval's lower end; on the grid every f is lowered by 1e-12 |h| (a power, a cosine and
their arguments are within a few 2^-53 times γ + |ln q|, so 1e-13), and what is added up afterwards is below 1e4 in size, its
rounding below 1e-11, under `_SLACK`. Cauchy's estimate as a way to Gevrey bounds: [Gevrey1918].
"""

from __future__ import annotations

import math
from functools import lru_cache
from typing import Any

import numpy as np
from scipy.special import gammaln

from flatplan.flat.intervals import IV, lower

# Added to every logarithm: bounds may only be too large.
_SLACK = 1e-9
_ROUNDING = 1e-12  # of |h|
_CELL = 0.02  # δ, step of the grid in ln σ
_ANGLES = 64  # cells in φ, the finer the nearer they are to π, where |z| is least
# θ as multiples of tan ψ: steps of a fifth, as the bound loses about e^(k step²), finer where it is steep in θ.
# Those below 0.1 serve the middle of the bump at large γ only.
_CIRCLES = np.unique(np.concatenate([np.geomspace(0.02, 0.7, 20), np.linspace(0.75, 1.25, 14), [1.0]]))
_LARGEST = 0.988  # θ stays clear of 1, where the circle reaches the end of the bump


@lru_cache(maxsize=256)
def radius_interval(gamma: float) -> Any:
    """ρ of the closed form (2) as an interval."""
    g = IV.mpf(gamma)
    return g ** (1 / g) * IV.sin(IV.pi / (2 * (g + 1))) ** (1 + 1 / g)


def closed_form_radius(gamma: float) -> float:
    """ρ of the closed form (2), rounded down."""
    return lower(radius_interval(gamma))


def log_closed_form(gamma: float, orders: np.ndarray) -> np.ndarray:
    """Logarithm of the closed form (2) at the given orders; γ ≥ 1."""
    return 4.0**gamma + (1.0 + 1.0 / gamma) * gammaln(orders + 1.0) - orders * math.log(closed_form_radius(gamma)) + _SLACK


def _grid(gamma: float, sigma_low: float) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
    """For every cell [L_j, L_j+1] and θ: least value of f seen from its lower and from its upper edge."""
    cells = math.ceil(math.log(0.5 / sigma_low) / _CELL)
    log_sigma = np.linspace(math.log(sigma_low), math.log(0.5), cells + 1)
    circles = _CIRCLES if gamma >= 3.0 else _CIRCLES[_CIRCLES > 0.1]
    theta = np.unique(np.minimum(circles * math.tan(math.pi / (2.0 * (gamma + 1.0))), _LARGEST))
    phi = math.pi * (1.0 - np.linspace(1.0, 0.0, _ANGLES + 1) ** 2)
    sigma = np.exp(log_sigma)[:, None, None]
    w = sigma * theta[None, :, None] * np.exp(1j * phi)[None, None, :]
    z = sigma + w
    q = z * (1.0 - z)
    log_q = np.log(np.abs(q))
    f = np.exp(-gamma * log_q) * np.cos(gamma * np.angle(q))

    def worst(values: np.ndarray, up_sigma: int, up_phi: int) -> np.ndarray:
        """Corner of each cell where a monotone factor is largest (1) or smallest (0) in σ and φ."""
        v = values[1:] if up_sigma else values[:-1]
        return v[..., 1:] if up_phi else v[..., :-1]

    z_least = worst(np.abs(z), 0, 1)
    z_most = worst(np.abs(z), 1, 0)
    far_least = worst(np.abs(1.0 - z), 1, 0)
    slope = np.abs(1.0 - 2.0 * z)
    slope_most = np.maximum(worst(slope, 0, 1), worst(slope, 1, 1))
    w_most = worst(np.abs(w), 1, 1)
    q_least = z_least * far_least
    h_most = q_least**-gamma
    lever = w_most * slope_most / q_least
    by_sigma = gamma**2 * (slope_most / far_least) ** 2 + gamma * z_most / far_least**2
    by_phi = gamma * (gamma + 1.0) * lever**2 + 2.0 * gamma * w_most**2 / q_least + gamma * lever
    step_l = log_sigma[1] - log_sigma[0]
    give = h_most * ((by_sigma * step_l**2 + by_phi * np.diff(phi) ** 2) / 8.0 + _ROUNDING)
    lower = np.minimum(f[:-1, :, 1:], f[:-1, :, :-1]) - give
    upper = np.minimum(f[1:, :, 1:], f[1:, :, :-1]) - give
    return log_sigma, theta, lower.min(axis=2), upper.min(axis=2)


@lru_cache(maxsize=256)
def log_bump_bounds(gamma: float, orders: int) -> np.ndarray:
    """Logarithm of a proven bound on ``sup |b^(k)|`` for k = 0 … orders.

    Parameters
    ----------
    gamma : float
        γ ≥ 1.
    orders : int
        Highest order.

    Returns
    -------
    ndarray
        Shape ``(orders + 1,)``; never below the truth, and never above the closed form.
    """
    psi = math.pi / (2.0 * (gamma + 1.0))
    k = np.arange(orders + 1, dtype=float)
    best = math.sin(psi) * math.cos(psi) ** gamma
    # Below sigma_low the bound of part (iii) still grows with σ for every order asked, so its end is its
    # largest; half as far again, and below the height of the bump, it is too small to matter.
    sigma_low = 0.5 * min((gamma * best / max(orders, 1)) ** (1.0 / gamma), 0.25 * best ** (1.0 / gamma))
    log_sigma, theta, lower, upper = _grid(gamma, sigma_low)
    radius = np.log(theta)[None, :] + log_sigma[:, None]
    height = 4.0**gamma
    # from both edges of a cell the worse, then the best circle, then the worst cell
    cell = np.full((orders + 1, log_sigma.size - 1), np.inf)
    for c in range(theta.size):
        low = -k[:, None] * radius[None, :-1, c] - lower[None, :, c]
        high = -k[:, None] * radius[None, 1:, c] - upper[None, :, c]
        np.minimum(cell, np.maximum(low, high, out=low), out=cell)
    inside = cell.max(axis=1)
    theta_end = math.tan(psi)
    below = -k * math.log(min(theta_end, 1.0) * sigma_low) - best * sigma_low**-gamma
    bound = gammaln(k + 1.0) + height + np.maximum(inside, below) + _SLACK * (1.0 + height)
    bound[0] = 0.0  # the bump's height is 1
    return np.minimum(bound, np.maximum(log_closed_form(gamma, k), 0.0))

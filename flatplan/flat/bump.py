"""The bump and its derivatives of any order, by power-series arithmetic at each time.

``b(σ) = exp(4^γ - (σ (1 - σ))^-γ)`` on ``0 < σ < 1``, 0 elsewhere: height 1 at the middle, every
derivative 0 at both ends, Gevrey order ``s = 1 + 1/γ`` [Gevrey1918]. (The factor ``exp(4^γ)`` keeps
it away from underflow: ``exp(-4^γ)`` is below the smallest double from γ = 4.77 on.)

At one σ, write ``σ + h`` with ``h = τ 2^-m``. The exponent ``u = -q^-γ`` of the quadratic
``q(τ) = q0 + q1 τ + q2 τ²`` obeys a two-term recurrence (power of a series), and ``e = exp(u - u0)``
obeys ``n e_n = Σ j u_j e_(n-j)`` (exponential of a series); both are in Knuth, *The Art of Computer
Programming* vol. 2, sec. 4.7 [Knuth1997]. No finite difference, no symbolic differentiation.

Near an end ``b`` underflows while its scaled coefficients overflow. So a row never holds
``b^(k)/k!`` itself: it holds ``e_k``, and the two powers of two that belong to it.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

# Where (σ(1-σ))^-γ exceeds this the bump and all derivatives up to order 1000 are below 1e-9000 of
# the largest: by Cauchy's estimate on a circle of radius σ tan ψ, ln|b^(k)| ≤ k ln(k / (σ tan ψ)) -
# c (σ(1-σ))^-γ with c ≥ sin ψ cos^γ ψ > 0.07 for γ ≤ 6, and k ln(...) stays below 2.5e4 there.
FLAT_EXPONENT = 1.0e6
# The double path keeps |e_k| ≤ e^(orders): beyond this many orders it would leave the range of a double.
MOST_ORDERS = 650


@dataclass(frozen=True)
class BumpTable:
    """Derivatives of the bump at N places, orders 0 … K, with their exponents kept apart.

    ``b^(k)(σ_i) = k! · rows[k, i] · 2^(k · order_exponent[i] + exponent[i])``
    """

    rows: np.ndarray  # (K + 1, N) float64
    order_exponent: np.ndarray  # (N,) int
    exponent: np.ndarray  # (N,) int

    def weighted(self, mantissa: np.ndarray, exponent: np.ndarray, first: int = 0) -> np.ndarray:
        """``b^(k)/k! · mantissa · 2^exponent`` for k = first … first + len(mantissa) - 1, all powers of two joined before use.

        Shape (len(mantissa), N).
        """
        last = first + mantissa.size
        k = np.arange(first, last)[:, None]
        shift = k * self.order_exponent[None, :] + self.exponent[None, :] + exponent[:, None]
        return np.ldexp(self.rows[first:last] * mantissa[:, None], np.clip(shift, -100_000, 100_000))


def bump_table(left: np.ndarray, right: np.ndarray, gamma: float, orders: int) -> BumpTable:
    """Scaled Taylor coefficients of the bump.

    Parameters
    ----------
    left, right : ndarray
        σ and 1 - σ, each accurate relative to itself, shape (N,), strictly between 0 and 1.
    gamma : float
        γ > 0; Gevrey order ``1 + 1/γ``.
    orders : int
        Highest derivative K, at most `MOST_ORDERS`.

    Returns
    -------
    BumpTable
    """
    if orders > MOST_ORDERS:
        raise ValueError(f"orders: got {orders}; double precision takes at most {MOST_ORDERS}.")
    # The bump is even about its middle: work on the near side, then give odd orders their sign.
    near = np.minimum(left, right)
    mirrored = left > right
    q0 = left * right
    slope = np.where(mirrored, left - right, right - left)  # 1 - 2 σ, not negative
    with np.errstate(over="ignore"):  # infinitely steep is flat too
        steep = q0**-gamma
    live = steep < FLAT_EXPONENT
    steep = np.where(live, steep, 1.0)
    q0 = np.where(live, q0, 0.25)
    near = np.where(live, near, 0.5)
    slope = np.where(live, slope, 0.0)

    # Series variable τ = h / r with r a power of two near the radius where order K is best scaled.
    radius = near * np.minimum(0.5, max(orders, 1) / (gamma * steep))
    m = np.ceil(-np.log2(radius)).astype(np.int64)
    r = np.ldexp(1.0, -m)
    q1 = slope * r / q0
    q2 = -r * r / q0

    n_times = near.size
    u = np.empty((orders + 1, n_times))
    u[0] = -steep
    for n in range(1, orders + 1):
        u[n] = (-gamma - (n - 1)) * q1 * u[n - 1]
        if n > 1:
            u[n] += (-2.0 * gamma - (n - 2)) * q2 * u[n - 2]
        u[n] /= n
    u *= np.arange(orders + 1)[:, None]  # j u_j
    e = np.empty((orders + 1, n_times))
    e[0] = 1.0
    for n in range(1, orders + 1):
        e[n] = np.einsum("jt,jt->t", u[1 : n + 1], e[n - 1 :: -1]) / n
    e[1::2, mirrored] *= -1.0

    # 4^γ - q0^-γ without cancellation at the middle: 4 q0 = 1 - (1 - 2σ)².
    four_q0 = -np.square(slope)
    middle = np.log1p(np.maximum(four_q0, -0.75))
    offset = np.where(four_q0 > -0.75, -(4.0**gamma) * np.expm1(-gamma * middle), 4.0**gamma - steep)
    offset = np.where(live, offset, -FLAT_EXPONENT)
    exponent = np.floor(offset / np.log(2.0)).astype(np.int64)
    e *= np.exp(offset - exponent * np.log(2.0))[None, :]
    return BumpTable(rows=e, order_exponent=m, exponent=exponent)

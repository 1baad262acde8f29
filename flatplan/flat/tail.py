"""How much of a series is left when it is cut: a proven bound for each channel, and the terms to keep.

For one rise and one channel, cut after term N,

    |tail| ≤ Σ_(k>N) C_k t_D^k/(2k)! sup|y^(k)|,

C_k from the coefficients themselves up to some K and from `coefficient_bounds` beyond, sup|y^(k)| from `bounds`: per order up to
K, and the closed form beyond, where successive terms fall by a ratio that itself falls with k, so the rest is at most a geometric
series. The rest is taken with intervals; the sums before it are made in double precision, logarithms of up to 1e4 with an error
below 1e-10, and raised by 1e-9.
"""

from __future__ import annotations

import math
from functools import lru_cache

import numpy as np
from scipy.special import gammaln

from flatplan.flat.bounds import closed_form_radius, log_bump_bounds, radius_interval
from flatplan.flat.bump import MOST_ORDERS
from flatplan.flat.bump_integral import bump_integral
from flatplan.flat.coefficient_bounds import scaled_bounds, scaled_sizes
from flatplan.flat.intervals import IV, upper
from flatplan.flat.rise import Rise
from flatplan.site import Medium

MOST_TERMS = MOST_ORDERS - 2  # that a series may use
# Orders bounded one by one go further: with a low Gevrey order the closed form is close only after many hundreds.
MOST_BOUNDED = 1300
_INTEGRAL_SLACK = 1e-9  # relative, on the quadrature of the bump's integral (its error is near 1e-15)


@lru_cache(maxsize=512)
def rise_log_bounds(width: float, ramp: float, gamma: float, orders: int) -> np.ndarray:
    """Logarithm of a bound on ``sup |y^(k)| / |weight|`` of a rise, k = 0 … orders."""
    log_b = log_bump_bounds(gamma, orders)
    k = np.arange(orders + 1, dtype=float)
    log_total = math.log(bump_integral(gamma).total) - 2.0 * _INTEGRAL_SLACK
    out = np.zeros(orders + 1)
    out[1:] = log_b[:-1] - log_total - k[1:] * math.log(width)
    if ramp > 0.0:
        # its derivative is the mean of the step's over the ramp, and a difference of two corners
        corner = 0.0 if ramp >= width else math.log(2.0)
        out[1] = min(out[1], -math.log(ramp))
        out[2:] = np.minimum(out[2:], log_b[:-2] - log_total - math.log(ramp) - (k[2:] - 1.0) * math.log(width) + corner)
    return out


def tail_table(medium: Medium, rise: Rise, channels: tuple[tuple[str, int], ...], orders: int) -> np.ndarray:
    """Tail bounds of one rise, SI, shape (channels, orders + 1): entry N is the bound when term N ≥ 1 is the last.

    Parameters
    ----------
    medium : Medium
    rise : Rise
    channels : tuple of (str, int)
        Channel and derivative of it.
    orders : int
        K, the last order bounded one by one; at least 8.

    Returns
    -------
    ndarray
        inf where the terms do not yet fall at K; inf for N = 0.
    """
    t_d = medium.travel_time
    out = np.empty((len(channels), orders + 1))
    k = np.arange(1, orders + 1, dtype=float)
    shape = k * math.log(t_d) - gammaln(2.0 * k + 1.0)
    for row, (channel, shift) in enumerate(channels):
        sup = rise_log_bounds(rise.width, rise.ramp, rise.gamma, orders + max(shift, 0))
        at = np.maximum(k.astype(int) + shift, 0)
        own = min(orders, MOST_TERMS)
        bound = np.concatenate([scaled_sizes(medium, channel, own)[1:], scaled_bounds(medium, channel, k[own:])])
        with np.errstate(divide="ignore", over="ignore"):
            terms = np.exp(np.log(bound) + shape + sup[at] + math.log(abs(rise.weight)))
            rest = _rest(medium, rise, channel, shift, orders)
            out[row, :-1] = np.cumsum(np.concatenate([terms, [rest]])[::-1])[::-1][:-1]
            out[row, -1] = rest
    out[:, 0] = np.inf
    return out * (1.0 + 1e-9)


def _rest(medium: Medium, rise: Rise, channel: str, shift: int, orders: int) -> float:
    """Σ over k > orders by the closed form and a geometric series.

    From k to k + 1 a term changes by ``(X/ρ) (k+a)^s / ((2k+1)(2k+2))`` (a the shift) and the growth of C_k, a
    polynomial of degree 4 at most; both are below the falling ``(X/4ρ) ((k+a)/k)² k^(s-2) (1+2/k)^4``.
    """
    bound = float(scaled_bounds(medium, channel, np.array([orders + 1.0]))[0])
    if bound == 0.0:
        return 0.0
    return bound * abs(rise.weight) * _unit_rest(medium.travel_time, rise.width, rise.gamma, shift, orders) * (1.0 + 1e-15)


@lru_cache(maxsize=1024)
def _unit_rest(t_d: float, width: float, gamma: float, shift: int, orders: int) -> float:
    """The rest for C_k = 1 at K + 1 and a rise of weight 1, from above; inf where the terms do not fall yet."""
    k = orders + 1
    g, x = IV.mpf(gamma), IV.mpf(t_d) / IV.mpf(width)
    order = 1 + 1 / g
    rho = radius_interval(gamma)
    least_total = IV.mpf(bump_integral(gamma).total) * (1 - IV.mpf(_INTEGRAL_SLACK))
    ratio = x / (4 * rho) * IV.mpf(k) ** (order - 2) * (IV.mpf(max(k + shift, k)) / k) ** 2 * (1 + IV.mpf(2) / k) ** 4
    if not upper(ratio) < 1.0:
        return math.inf
    # sup |y^(n)| ≤ e^(4^γ) ((n-1)!)^s / (ρ^(n-1) I width^n), n = k + shift
    n = k + shift
    sup = IV.exp(IV.mpf(4) ** g) * IV.mpf(math.factorial(n - 1)) ** order / rho ** (n - 1) / least_total
    first = x**k / IV.mpf(math.factorial(2 * k)) * sup / IV.mpf(width) ** shift
    total = upper(first / (1 - ratio))
    return total if math.isfinite(total) else math.inf


def gevrey_radius(rise: Rise) -> float:
    """ρ of the uniform Gevrey bound ``sup|y^(k)| ≤ M (k!)^s / ρ^k`` of a rise [s]."""
    return closed_form_radius(rise.gamma) * rise.width


def gevrey_log_constant(rises: tuple[Rise, ...]) -> float:
    """ln M of ``sup|y^(k)| ≤ M (k!)^s / ρ^k``, k ≥ 1, for a sum of rises, with s the largest order and ρ the smallest radius; from above.

    One rise has ``y^(k) = w b^(k-1)/(I D^k)`` or means of it over a ramp, so by (2) of `bounds` M = |w| ρ_b e^(4^γ)/I, as
    ((k-1)!)^s ≤ (k!)^s; a larger s and a smaller ρ only raise the bound, so the M of a sum is the sum.
    """
    logs = [
        math.log(abs(rise.weight) * closed_form_radius(rise.gamma) * (1.0 + 1e-12) / bump_integral(rise.gamma).total) + 4.0**rise.gamma
        for rise in rises
    ]
    largest = max(logs)
    return largest + math.log(sum(math.exp(v - largest) for v in logs)) + _INTEGRAL_SLACK

"""How far proven bounds are above the truth: the bump's derivatives order by order, and a plan's tail."""

from __future__ import annotations

import math

import numpy as np
from flint import arb

from flatplan.flat.bounds import log_bump_bounds
from flatplan.flat.bump_integral import bump_integral
from flatplan.flat.tail import rise_log_bounds

from .balls import BallRate, bump_series, precision
from .jobs import one_bump, with_terms
from .table import Row

ORDERS = (5, 20, 60, 150)
GAMMAS = (1.05, 1.25, 1.5, 2.0, 3.0, 4.0, 5.0)
AIM = 50.0
_BITS = 600


def _log_sizes(gamma: float, sigmas: np.ndarray) -> np.ndarray:
    """``ln |b^(k)(σ)|`` for the orders and places, shape (orders, places)."""
    out = np.empty((len(ORDERS), sigmas.size))
    with precision(_BITS, ORDERS[-1] + 1):
        g = arb(gamma)
        height = arb(4) ** g
        for i, sigma in enumerate(sigmas.tolist()):
            series = bump_series(arb(sigma), g, height, ORDERS[-1] + 1)
            for row, k in enumerate(ORDERS):
                size = abs(series[k])
                out[row, i] = float((size.mid() * arb(k).fac()).log()) if size > 0 else -math.inf
    return out


def _log_largest(gamma: float, count: int) -> np.ndarray:
    """``ln max_σ |b^(k)|`` for the orders: a grid, then a finer one around the best place of each order."""
    sigmas = np.geomspace(0.002, 0.5, count)
    sizes = _log_sizes(gamma, sigmas)
    best = sizes.max(axis=1)
    for row in range(len(ORDERS)):
        i = int(sizes[row].argmax())
        around = np.linspace(sigmas[max(i - 1, 0)], sigmas[min(i + 1, count - 1)], 17)
        best[row] = max(best[row], _log_sizes(gamma, around)[row].max())
    return best


def tightness(quick: bool) -> list[Row]:
    """Bound over truth."""
    gammas = GAMMAS[::3] if quick else GAMMAS
    ratios = np.array([np.exp(log_bump_bounds(g, ORDERS[-1])[list(ORDERS)] - _log_largest(g, 120 if quick else 400)) for g in gammas])
    rows = []
    for i, k in enumerate(ORDERS):
        worst = int(ratios[:, i].argmax())
        within = bool(np.all((ratios[:, i] >= 1.0) & (ratios[:, i] <= AIM)))
        span = f"{ratios[:, i].min():.3g} to {ratios[worst, i]:.3g} ×"
        against = f"flint's largest over σ, γ = {gammas[0]:g} … {gammas[-1]:g}"
        rows.append(Row(f"bound on bump derivative {k}", against, "", "", span, "", f"1 to {AIM:g} ×", within))
    rows += _eased(quick)
    for job in (one_bump(0.5, 1.8), with_terms(60, 1.8)):
        times = job.times(40 if quick else 150)
        cut, full = BallRate(job, 800), BallRate(job, 800, 3 * job.terms)
        truth = float(np.abs(np.array([float((a - b).mid()) for a, b in zip(cut.balls(times), full.balls(times), strict=True)])).max())
        bound = job.plan.certificate.tail["injection_rate"]
        peak = job.plan.certificate.peak["injection_rate"]
        ours, other = f"{bound / peak:.1e} of peak", f"{truth / peak:.1e} of peak"
        what = f"tail bound of rate, {job.name}"
        rows.append(Row(what, "what flint finds cut off", ours, other, f"{bound / truth:.3g} ×", "", "≥ 1 ×", bound >= truth))
    return rows


def _eased(quick: bool) -> list[Row]:
    """The same for an eased ramp of three corners' length, and for one of a third of a corner, whose two bumps overlap."""
    rows = []
    orders = [k for k in ORDERS if k <= 60] if quick else list(ORDERS)
    for ratio in (3.0, 1.0 / 3.0):
        found = []
        for gamma in (1.25, 3.0):
            bound = rise_log_bounds(1.0, ratio, gamma, max(orders) + 2)
            log_factor = -math.log(bump_integral(gamma).total * ratio)
            found.append([bound[k + 2] - log_factor - size for k, size in zip(orders, _log_overlapping(gamma, ratio, orders), strict=True)])
        ratios = np.exp(np.array(found))
        # where two bumps of opposite sign overlap, the bound takes it that they add up at their largest
        aim = AIM if ratio >= 1.0 else 2.0 * AIM
        within = bool(np.all((ratios >= 1.0) & (ratios <= aim)))
        span = f"{ratios.min():.3g} to {ratios.max():.3g} ×"
        what = f"bound on derivatives {orders[0] + 2} to {orders[-1] + 2} of an eased ramp {ratio:.2g} corners long"
        rows.append(Row(what, "flint's largest, γ = 1.25 and 3", "", "", span, "", f"1 to {aim:g} ×", within))
    return rows


def _log_overlapping(gamma: float, ratio: float, orders: list[int]) -> list[float]:
    """``ln max |b^(k)(σ) - b^(k)(σ - ratio)|`` over a grid."""
    best = [-math.inf] * len(orders)
    with precision(_BITS, max(orders) + 1):
        g = arb(gamma)
        height = arb(4) ** g
        for sigma in np.linspace(0.003, min(1.0, 1.0 + ratio) - 0.003, 700).tolist():
            parts = [bump_series(arb(place), g, height, max(orders) + 1) for place in (sigma, sigma - ratio) if 0.0 < place < 1.0]
            for row, k in enumerate(orders):
                value = parts[0][k] - parts[1][k] if len(parts) == 2 else parts[0][k]
                size = abs(value)
                if size > 0:
                    best[row] = max(best[row], float((size.mid() * arb(k).fac()).log()))
    return best

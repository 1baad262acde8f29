"""The bump, its derivatives and its integrals, against ball arithmetic and published-style tables.

Reference: `ball_reference` (python-flint), which shares no code with the package.
"""

from __future__ import annotations

import math

import ball_reference as balls
import numpy as np
import pytest
from flint import arb

from flatplan.flat.bump import MOST_ORDERS, bump_table
from flatplan.flat.bump_integral import bump_integral
from flatplan.flat.rise import Rise
from flatplan.flat.summation import series_weights

GAMMAS = (1.0, 1.05, 1.25, 1.5, 2.0, 3.0, 4.0, 5.0)


def derivatives(sigma, gamma, orders):
    """b^(k)(σ)/k! as (mantissa, power of two): what the table holds, nothing lost to the range of a double."""
    sigma = np.asarray(sigma, dtype=float)
    table = bump_table(sigma, 1.0 - sigma, gamma, orders)
    k = np.arange(orders + 1)[:, None]
    return table.rows, k * table.order_exponent[None, :] + table.exponent[None, :]


# --- derivatives -------------------------------------------------------------------------------


@pytest.mark.parametrize("gamma", GAMMAS)
def test_derivatives_to_order_150_agree_with_balls(gamma):
    """Every order at places on both halves, to 1e-10 of the size that the series gives it there.

    The size is ``max_j |b^(j)/j!| r^(j-k)`` with r the distance to the nearer end over the steepness: a derivative
    near its own zero cannot keep digits of itself.
    """
    low = (4.0**gamma + 300.0) ** (-1.0 / gamma)
    places = np.concatenate([np.geomspace(1.2 * low, 0.5, 9), 1.0 - np.geomspace(1.2 * low, 0.49, 8)])
    rows, shift = derivatives(places, gamma, 150)
    for i, sigma in enumerate(places):
        exact = balls.bump_taylor(arb(sigma), gamma, 151)
        logs = np.array([balls.log_size(v) for v in exact])
        near = min(sigma, 1.0 - sigma)
        steep = (near * (1.0 - near)) ** -gamma
        for k in (0, 1, 2, 3, 5, 10, 20, 40, 60, 100, 150):
            radius = near * min(0.5, max(k, 1) / (gamma * steep))
            size = np.max(logs[: k + 1] + (np.arange(k + 1) - k) * math.log(radius))
            with balls.precision(balls.BITS):
                got = arb(float(rows[k, i])) * arb(2) ** int(shift[k, i])
                error = float((abs(got - exact[k]) * arb(-size).exp()).upper())
            assert error < 1e-10, f"γ {gamma}, σ {sigma}, k {k}: {error}"


@pytest.mark.parametrize("gamma", (1.05, 1.5, 3.0, 5.0))
@pytest.mark.parametrize("orders", (0, 1, 60, 150, MOST_ORDERS))
def test_ends_give_neither_nan_nor_overflow_nor_warning(gamma, orders):
    """σ = 1e-300 … 1e-3 and their mirror images: a flat end is an exact or a harmless 0."""
    near = np.array([5e-324, 1e-300, 1e-100, 1e-12, 1e-9, 1e-6, 1e-4, 1e-3, 0.01, 0.1, 0.3])
    left = np.concatenate([near, 1.0 - near[4:]])
    right = np.concatenate([1.0 - near, near[4:]])
    with np.errstate(all="raise", under="ignore"):
        table = bump_table(left, right, gamma, orders)
        weights = series_weights(1.0, 0, 0, orders + 1)  # k!/(2k)!, as in a series at X = 1
        values = table.weighted(weights.mantissa, weights.exponent)
    assert np.all(np.isfinite(table.rows))
    assert np.all(np.isfinite(values))
    for i in np.flatnonzero(np.minimum(left, right) <= 1e-6):
        assert np.all(values[:, i] == 0.0)


@pytest.mark.parametrize("sigma", (1e-6, 1e-3, 1.0 - 1e-9))
@pytest.mark.parametrize("gamma", (1.05, 2.0))
def test_values_near_an_end_are_as_small_as_balls_say(gamma, sigma):
    exact = balls.bump_taylor(arb(sigma), gamma, 41)
    table = bump_table(np.array([sigma]), np.array([1.0 - sigma]), gamma, 40)
    got = table.weighted(np.ones(41), np.zeros(41, dtype=int))[:, 0]
    for k in range(41):
        with balls.precision(balls.BITS):
            assert abs(exact[k]) < arb("1e-100") or float((abs(arb(float(got[k])) - exact[k]) / abs(exact[k])).upper()) < 1e-9
        assert abs(got[k]) < 1e-100


@pytest.mark.parametrize("gamma", GAMMAS)
def test_the_bump_is_even_about_its_middle(gamma):
    sigma = np.linspace(0.02, 0.5, 25)[:-1]
    left, right = bump_table(sigma, 1.0 - sigma, gamma, 40), bump_table(1.0 - sigma, sigma, gamma, 40)
    assert np.array_equal(left.order_exponent, right.order_exponent) and np.array_equal(left.exponent, right.exponent)
    signs = (-1.0) ** np.arange(41)[:, None]
    assert np.array_equal(left.rows, signs * right.rows)
    middle = bump_table(np.array([0.5]), np.array([0.5]), gamma, 40).rows[:, 0]
    assert middle[0] == 1.0 or middle[0] * 2.0 ** float(bump_table(np.array([0.5]), np.array([0.5]), gamma, 0).exponent[0]) == 1.0
    assert np.all(middle[1::2] == 0.0)


# sup over (0, 1) of |b^(n)|, b = exp(-1/(t(1-t))) of height exp(-4): the shared check values, section 7.2, computed
# there with Taylor coefficients at 60 digits and golden-section refinement.
SUPREMA_ORDER_2 = {
    1: 0.07757846,
    2: 0.5907573,
    3: 8.365551,
    4: 201.5534,
    5: 8413.53,
    10: 1.385931e14,
    20: 3.505211e40,
    40: 2.113079e105,
    80: 9.003011e258,
}


@pytest.mark.parametrize("n", SUPREMA_ORDER_2)
def test_suprema_at_order_2_agree_with_the_tabulated_ones(n):
    """γ = 1 is not planned with, but the table of derivatives takes it: largest |b^(n)| on a grid refined twice."""
    sigma = np.geomspace(1e-3, 0.5, 6001)
    for _ in range(3):
        rows, shift = derivatives(sigma, 1.0, n)
        logs = np.log(np.maximum(np.abs(rows[n]), 1e-300)) + shift[n] * math.log(2.0)
        at = int(np.argmax(logs))
        best = logs[at] + math.lgamma(n + 1.0) - 4.0
        sigma = np.linspace(sigma[max(at - 1, 0)], sigma[min(at + 1, sigma.size - 1)], 401)
    assert best == pytest.approx(math.log(SUPREMA_ORDER_2[n]), abs=5e-7)  # seven digits


def test_more_orders_than_doubles_hold_are_refused():
    with pytest.raises(ValueError, match=f"orders: got {MOST_ORDERS + 1}; double precision takes at most {MOST_ORDERS}"):
        bump_table(np.array([0.3]), np.array([0.7]), 1.5, MOST_ORDERS + 1)


# --- integrals ---------------------------------------------------------------------------------

# ∫ exp(-1/(t(1-t))^γ): the shared check values, section 7.2.
INTEGRALS = {1.0: 0.00702985840660966, 2.0: 1.70645002681e-8, 1.5: 8.02031171459e-5, 1.1: 3.52169011678e-3}


@pytest.mark.parametrize("gamma", INTEGRALS)
def test_integrals_agree_with_the_tabulated_ones(gamma):
    assert bump_integral(gamma).total * math.exp(-(4.0**gamma)) == pytest.approx(INTEGRALS[gamma], rel=3e-12)


@pytest.mark.parametrize("gamma", (*GAMMAS, 1.001, 5.5, 5.88))
def test_integrals_agree_with_balls_to_the_least_order_that_is_planned(gamma):
    """Rigorous integration; 1e-13 is far inside what the tail bounds allow for it."""
    exact = balls.bump_integral(gamma)
    assert balls.distance(bump_integral(gamma).total, exact) <= 1e-13 * float(exact)


# Step of order 2 (γ = 1): the shared check values, section 7.2.
STEPS = {0.1: 1.80978653039e-5, 0.25: 0.0317549577276, 0.4: 0.25301828523, 0.5: 0.5}


@pytest.mark.parametrize("sigma", STEPS)
def test_step_values_agree_with_the_tabulated_ones(sigma):
    step = Rise(0.0, 1.0, 0.0, 1.0, 1.0)
    assert step.low_order(np.array([sigma]), 0)[0] == pytest.approx(STEPS[sigma], rel=1e-11)


@pytest.mark.parametrize("gamma", (1.05, 1.5, 3.0, 5.0))
def test_running_integrals_agree_with_balls(gamma):
    """Φ, ∫Φ and ∫∫Φ (the step, the eased corner, its area) on both halves and beyond the end."""
    places = np.array([1e-4, 0.1, 0.27, 0.45, 0.499, 0.5, 0.501, 0.62, 0.9, 0.9999, 1.0, 1.7])
    step = Rise(0.0, 1.0, 0.0, 1.0, gamma)
    narrow = Rise(0.0, 1.0, 1.0, 1.0, gamma)  # ramp as long as the bump
    for sigma in places:
        t = np.array([sigma])
        first, second, third = (balls.bump_running(gamma, arb(sigma), n) for n in (1, 2, 3))
        assert balls.distance(step.low_order(t, 0)[0], first) < 2e-14
        assert balls.distance(step.low_order(t, -1)[0], second) < 2e-14
        late = [balls.bump_running(gamma, arb(sigma) - 1, n) for n in (1, 2, 3)]
        for order, early, other in ((1, first, late[0]), (0, second, late[1]), (-1, third, late[2])):
            assert balls.distance(narrow.low_order(t, order)[0], early - other) < 2e-14, (sigma, order)

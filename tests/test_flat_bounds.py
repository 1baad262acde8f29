"""The proven bounds on the bump, the step and eased ramps: never below the truth, and not far above it.

Truth: `ball_reference`, the least size that ball arithmetic allows at thousands of places, best places refined. That is
below the supremum, never above it, so it can only make a bound look better than it is by what refinement missed.
"""

from __future__ import annotations

import math

import ball_reference as balls
import numpy as np
import pytest
from flint import arb
from hypothesis import given, settings
from hypothesis import strategies as st

from flatplan.flat.bounds import _grid, closed_form_radius, log_bump_bounds, log_closed_form
from flatplan.flat.tail import rise_log_bounds

ORDERS = (0, 1, 2, 3, 5, 10, 20, 40, 60, 100, 150, 160)
TIGHT = (5, 20, 60, 150)


@pytest.mark.parametrize("gamma", (1.001, 1.05, 2.25, 3.5, 5.0))
def test_bump_bounds_hold_and_are_within_a_factor_of_50(gamma):
    truth = balls.log_bump_suprema(gamma, list(ORDERS))
    bound = log_bump_bounds(gamma, 160)
    closed = log_closed_form(gamma, np.arange(161.0))
    for k in ORDERS:
        assert bound[k] >= truth[k], f"γ {gamma}, k {k}: {bound[k]} is below {truth[k]}"
        assert closed[k] >= truth[k], f"γ {gamma}, k {k}: the closed form is below the truth"
    for k in TIGHT:
        assert bound[k] <= truth[k] + math.log(50.0), f"γ {gamma}, k {k}: {math.exp(bound[k] - truth[k]):.0f} times the truth"
    assert np.all(bound <= np.maximum(closed, 0.0))


@given(gamma=st.floats(1.0, 5.88), sigma=st.floats(0.0, 1.0))
@settings(max_examples=25)
def test_no_derivative_anywhere_is_above_its_bound(gamma, sigma):
    """Random γ to the least order that is planned with, places crowded towards both ends, every k to 160."""
    low = (4.0**gamma + 1200.0) ** (-1.0 / gamma)
    place = low * (0.5 / low) ** (2.0 * min(sigma, 1.0 - sigma))
    place = place if sigma <= 0.5 else 1.0 - place
    bound = log_bump_bounds(gamma, 160)
    for k, value in enumerate(balls.bump_taylor(arb(place), gamma, 161)):
        assert balls.log_size(value) + math.lgamma(k + 1.0) <= bound[k], (gamma, place, k)


@pytest.mark.parametrize("gamma", (1.001, 1.05, 1.7, 3.0, 5.0))
def test_between_its_nodes_the_grid_is_below_the_function(gamma):
    """Re h on circles of random cells at random places, 1201 angles: never below what is interpolated from the edges (seed 11)."""
    log_sigma, theta, lower, upper = _grid(gamma, 1e-3)
    rng = np.random.default_rng(11)
    phi = np.linspace(0.0, np.pi, 1201)
    closest = np.inf
    for cell in rng.integers(0, log_sigma.size - 1, 25):
        share = rng.uniform()
        sigma = math.exp((1.0 - share) * log_sigma[cell] + share * log_sigma[cell + 1])
        for circle in range(theta.size):
            z = sigma * (1.0 + theta[circle] * np.exp(1j * phi))
            least = float(np.min(((z * (1.0 - z)) ** -gamma).real))
            given_away = least - ((1.0 - share) * lower[cell, circle] + share * upper[cell, circle])
            assert given_away >= -1e-12 * abs(least), (sigma, theta[circle])
            closest = min(closest, given_away / max(abs(least), 1e-300))
    assert closest < 1e-2  # and it does not give much away everywhere


@pytest.mark.parametrize("gamma", (1.05, 1.7, 3.0, 5.0))
def test_bounds_per_order_are_those_of_cauchys_estimate(gamma):
    """max over σ of min over θ of ``k! (θσ)^-k exp(4^γ - m)``, by a search that shares nothing with the grid [Gevrey1918]."""
    phi = np.linspace(0.0, np.pi, 301)
    theta = np.minimum(np.geomspace(0.02, 1.3, 320) * math.tan(math.pi / (2.0 * (gamma + 1.0))), 0.995)
    orders = np.array([1, 5, 20, 60, 150])
    largest = np.full(orders.size, -np.inf)
    for sigma in np.geomspace(1.5e-3, 0.5, 50):
        z = sigma * (1.0 + theta[:, None] * np.exp(1j * phi)[None, :])
        least = np.min(((z * (1.0 - z)) ** -gamma).real, axis=1)
        estimate = np.min(-orders[:, None] * np.log(theta * sigma)[None, :] - least[None, :], axis=1)
        largest = np.maximum(largest, estimate)
    cauchy = largest + np.array([math.lgamma(k + 1.0) for k in orders]) + 4.0**gamma
    bound = log_bump_bounds(gamma, 150)[orders]
    assert np.all(bound >= cauchy - 0.03)  # the search stops short of the best θ
    assert np.all(bound <= cauchy + math.log(5.0))


@pytest.mark.parametrize("orders", (0, 1, 5, 96, 300, 648))
def test_bounds_do_not_depend_much_on_how_many_are_asked_for(orders):
    """The grid ends where the highest order asked for allows: what the lower ones get must not change."""
    for gamma in (1.05, 2.0, 5.0):
        few, many = log_bump_bounds(gamma, orders), log_bump_bounds(gamma, 648)[: orders + 1]
        assert np.all(np.isfinite(few)) and np.all(np.abs(few - many) <= 0.3)


@pytest.mark.parametrize("gamma", (1.0, 1.05, 1.5, 2.0, 3.0, 5.0))
def test_closed_form_constant(gamma):
    """ρ = γ^(1/γ) (sin ψ)^(1 + 1/γ), ψ = π/(2(γ+1)): the shared check values have 1/2 at γ = 1 and γ = 2.

    Recomputed as θ (γ μ)^(1/γ) with μ the least Re z^-γ on |z - 1| = θ, the best θ found by search [Gevrey1918].
    """
    phi = np.linspace(0.0, np.pi, 20001)
    best = 0.0
    for theta in math.tan(math.pi / (2.0 * (gamma + 1.0))) * np.linspace(0.9, 1.1, 201):
        z = 1.0 + theta * np.exp(1j * phi)
        if theta < 1.0:
            least = float(np.min((z**-gamma).real))
            best = max(best, theta * (gamma * max(least, 0.0)) ** (1.0 / gamma))
    assert closed_form_radius(gamma) == pytest.approx(best, rel=0.02 if gamma == 1.0 else 1e-4)
    if gamma in (1.0, 2.0):
        assert closed_form_radius(gamma) == pytest.approx(0.5, rel=1e-14)


def test_closed_form_constant_is_the_growth_of_the_derivatives():
    """sup|b^(n)|/(n!)² grows by 1.966 a step between n = 40 and 80 at γ = 1 (shared check values, 7.2), towards 1/ρ = 2."""
    truth = balls.log_bump_suprema(1.0, [40, 80])
    growth = math.exp(((truth[80] - 2 * math.lgamma(81.0)) - (truth[40] - 2 * math.lgamma(41.0))) / 40.0)
    assert growth == pytest.approx(1.966, abs=5e-4)
    assert growth < 1.0 / closed_form_radius(1.0)


# --- the step and eased ramps ------------------------------------------------------------------


@pytest.mark.parametrize(
    ("order", "easing"), [(1.25, 1.0), (1.5, 0.9), (1.25, 0.6), (1.95, 0.6), (1.8, 0.5), (1.5, 0.3), (1.95, 0.3), (1.25, 0.05), (1.8, 0.05)]
)
def test_rise_bounds_hold_for_ramps_shorter_and_longer_than_their_bump(order, easing):
    """Bump of width D, ramp ℓ: ℓ < D where the easing is above a half (the corners overlap), ℓ > D below it."""
    duration, gamma = 7.0, 1.0 / (order - 1.0)
    move = balls.Move(0.0, duration, 1.0, order, easing)
    width = easing * duration
    bound = rise_log_bounds(width, duration - width if easing < 1.0 else 0.0, gamma, 60)
    low = (4.0**gamma + 250.0) ** (-1.0 / gamma)
    places = np.concatenate([np.geomspace(1.5 * low, 0.5, 20), 1.0 - np.geomspace(1.5 * low, 0.49, 20)])
    largest = np.full(61, -np.inf)
    for sigma in places:
        for t in {sigma * width, duration - width + sigma * width}:
            y = balls.move_derivatives(move, float(t), 1, 60)
            sizes = np.array([balls.log_size(y[k]) for k in range(1, 61)])
            largest[1:] = np.maximum(largest[1:], sizes)
    assert bound[0] == 0.0
    assert np.all(largest[1:] <= bound[1:])
    assert np.all(largest[1:21] >= bound[1:21] - math.log(300.0))  # and they are of use


@given(
    order=st.floats(1.2, 1.98),
    easing=st.one_of(st.just(1.0), st.floats(0.02, 0.999)),
    where=st.floats(0.0, 1.0),
)
@settings(max_examples=25)
def test_no_derivative_of_a_move_is_above_its_bound(order, easing, where):
    duration = 3.0
    move = balls.Move(0.0, duration, 1.0, order, easing)
    width = easing * duration
    ramp = duration - width if easing < 1.0 else 0.0
    bound = rise_log_bounds(width, ramp, 1.0 / (order - 1.0), 50)
    for t in (where * width, ramp + where * width):
        y = balls.move_derivatives(move, t, 1, 50)
        for k in range(1, 51):
            assert balls.log_size(y[k]) <= bound[k], (t, k)

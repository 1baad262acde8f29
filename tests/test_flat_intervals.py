"""Bounds are rounded outwards, and published statements on Gevrey functions and cut flatness series hold for ours."""

from __future__ import annotations

import math

import mpmath
import numpy as np
import pytest
from ball_reference import precision
from flint import acb, arb
from hypothesis import given, settings
from hypothesis import strategies as st

import flatplan as fp
from flatplan.flat import bounds
from flatplan.flat.bounds import closed_form_radius, log_closed_form
from flatplan.flat.bump_integral import bump_integral
from flatplan.flat.intervals import IV, lower, upper
from flatplan.flat.rise import Rise
from flatplan.flat.tail import MOST_TERMS, gevrey_radius, tail_table


def test_an_interval_is_rounded_outwards():
    third = IV.mpf(1) / 3
    assert mpmath.mpf(lower(third)) < mpmath.mpf(1) / 3 < mpmath.mpf(upper(third))
    assert upper(third) - lower(third) <= 4.0 * math.ulp(1.0 / 3.0)
    assert upper(IV.mpf(10) ** 400) == math.inf


@given(gamma=st.floats(1.0, 6.0))
def test_the_radius_is_not_above_the_truth(gamma):
    with mpmath.workdps(60):
        g = mpmath.mpf(gamma)
        exact = g ** (1 / g) * mpmath.sin(mpmath.pi / (2 * (g + 1))) ** (1 + 1 / g)
    assert 0.0 <= exact - mpmath.mpf(closed_form_radius(gamma)) <= 1e-15


@given(gamma=st.sampled_from([1.0, 1.3, 2.0, 4.5]), cell=st.floats(0.0, 1.0), circle=st.floats(0.0, 1.0), along=st.floats(0.0, 1.0))
@settings(max_examples=150, deadline=None)
def test_no_value_on_a_circle_is_below_what_the_grid_says(gamma, cell, circle, along):
    """Re (z(1-z))^-γ in ball arithmetic, at places between the nodes of the grid, against the line between the edges of its cell."""
    log_sigma, theta, low, high = bounds._grid(gamma, 0.02)
    j = min(int(cell * (log_sigma.size - 1)), log_sigma.size - 2)
    c = min(int(circle * theta.size), theta.size - 1)
    share = along
    sigma = math.exp((1.0 - share) * log_sigma[j] + share * log_sigma[j + 1])
    claimed = (1.0 - share) * low[j, c] + share * high[j, c]
    with precision(120):
        for phi in np.linspace(0.0, math.pi, 40):
            z = acb(sigma) * (1 + acb(theta[c]) * acb(0, float(phi)).exp())
            value = ((z * (1 - z)) ** (-arb(gamma))).real
            assert value > arb(claimed), (sigma, theta[c], phi)


# --- published statements (shared values, section 7.1) ---------------------------------------------


@pytest.mark.parametrize("n", [1, 5, 20, 80])
def test_our_closed_form_at_order_two_is_below_the_published_bound(n):
    """``8^n (n!)²`` is published for exp(-1/t); with R = 1/2 ours is ``e^4 2^n (n!)²`` for the bump of height 1."""
    ours = log_closed_form(1.0, np.array([float(n)]))[0]
    assert ours == pytest.approx(4.0 + n * math.log(2.0) + 2.0 * math.lgamma(n + 1.0), abs=1e-8)
    assert ours <= 4.0 + n * math.log(8.0) + 2.0 * math.lgamma(n + 1.0)


def slab():
    rock = fp.Rock(permeability="40 mD", porosity=0.12, compressibility="5e-10 1/Pa")
    return fp.slab(length="140 m", area="6000 m^2", rock=rock, fluid=fp.Fluid(viscosity="0.5 cP", compressibility="4.5e-10 1/Pa"))


def test_at_order_two_the_tail_is_finite_just_below_the_published_length_only():
    """Convergence for x < 2 √R in units of the diffusivity [LarocheMartinRouchon2000]_: travel time < 4 R, twice the corner."""
    medium = slab()
    rate = (("injection_rate", 0),)
    for share, finite in ((0.9, True), (0.97, True), (1.0, False), (1.2, False)):
        rise = Rise(0.0, medium.travel_time / (2.0 * share), 0.0, 1.0, 1.0)
        assert medium.travel_time / (4.0 * gevrey_radius(rise)) == pytest.approx(share, rel=1e-12)
        table = tail_table(medium, rise, rate, MOST_TERMS)
        assert bool(np.isfinite(table[0, -1])) is finite


@pytest.mark.parametrize("order", [1.3, 1.6, 1.9])
def test_below_two_the_tail_falls_for_every_length_and_stays_below_the_classical_estimate(order):
    """What is left out after term N is classically bounded by ``Σ c_k M (k!)^s/R^k``: ours is never above it [MartinRosierRouchon2014]_."""
    medium = slab()
    for x in (0.05, 1.0, 3.0):
        rise = Rise(0.0, medium.travel_time / x, 0.0, 1.0, 1.0 / (order - 1.0))
        table = tail_table(medium, rise, (("sandface_pressure", 0),), 300)[0]
        k = np.arange(1.0, 4000.0)
        log_terms = log_closed_form(rise.gamma, k - 1.0) + k * math.log(x) - np.array([math.lgamma(2.0 * v + 1.0) for v in k])
        log_terms -= math.log(bump_integral(rise.gamma).total)
        rest = np.logaddexp.accumulate(log_terms[::-1])[::-1]
        for n in (5, 20, 80, 200):
            if 1e-300 < table[n] < math.inf:
                assert math.log(table[n]) <= rest[n] + 1e-6
        if math.isfinite(table[-1]):
            assert np.all(np.diff(table[1:]) <= 0.0)


def test_the_constants_of_a_certificate_bound_every_derivative_of_the_target():
    """sup|y^(k)| ≤ M (k!)^s / ρ^k for a sum of unlike moves."""
    medium = slab()
    over = 3.0 * medium.travel_time
    target = fp.Target(start=0.0).move(by=1e6, over=over, order=1.5).move(by=-4e5, over=2.0 * over, order=1.8, easing=0.3, at=0.5 * over)
    c = fp.feedforward(medium, target).certificate
    y = target.derivatives(np.linspace(0.0, target.end, 2001), 60)
    for k in range(1, 61):
        bound = c.log_constant + c.order * math.lgamma(k + 1.0) - k * math.log(c.radius)
        assert math.log(np.abs(y[k]).max()) <= bound
    one = fp.feedforward(medium, fp.Target(start=0.0).move(by=1e6, over=over, order=1.5)).certificate
    assert one.log_constant < c.log_constant < one.log_constant + math.log(1e9)

"""More digits than a double's: exact rows, curves between them, and the bounds that are claimed for both.

Reference: python-flint's ball arithmetic (`ball_reference`), which shares no code with the package.
"""

from __future__ import annotations

import math

import ball_reference as balls
import mpmath
import numpy as np
import pytest
from flint import arb
from gmpy2 import mpz
from hypothesis import assume, given, settings
from hypothesis import strategies as st

import flatplan as fp
from flatplan.flat import corner_curve
from flatplan.flat.bump_rows import bump_row, exponential, log2_row_errors, log_height
from flatplan.flat.expansion import Expansions, Weights, panel_need, panel_row
from flatplan.flat.extended import NAMES, ExtendedSum

ROCK = fp.Rock(permeability="40 mD", porosity=0.12, compressibility="5e-10 1/Pa")
WATER = fp.Fluid(viscosity="0.5 cP", compressibility="4.5e-10 1/Pa")


def slab(**rest):
    return fp.slab(length="140 m", area="6000 m^2", rock=ROCK, fluid=WATER, **rest)


# --- rows -----------------------------------------------------------------------------------------


@given(
    gamma=st.floats(1.0, 5.9),
    orders=st.integers(1, 150),
    depth=st.floats(0.0, 1.0),
    scale=st.integers(0, 9),
    spare=st.integers(0, 90),
)
@settings(max_examples=60, deadline=None)
def test_every_coefficient_of_a_row_is_within_its_bound(gamma, orders, depth, scale, spare):
    place = 0.5 * (0.4 * (4.0**gamma + 60.0) ** (-1.0 / gamma) / 0.5) ** depth
    doublings, errors = log2_row_errors(np.array([place]), gamma, orders)
    assume(np.isfinite(errors[0, scale]) and errors[0, scale] < 3000.0)
    bits = math.ceil(errors[0, scale]) + spare
    row = bump_row(mpmath.mpf(place), gamma, orders, int(doublings[0, scale]), bits, float(errors[0, scale]))
    with balls.precision(4000 + 2 * bits):
        taylor = balls._bump_taylor(arb(place), gamma, orders + 1)
        assume(taylor[0] > 0)
        largest = arb(2) ** arb(row.log2_error)
        for k in range(orders + 1):
            exact = taylor[k] / taylor[0] / arb(2) ** (k * row.doubling)
            assert abs(exact - arb(int(row.coefficients[k])) / arb(2) ** row.bits) <= largest, k


@given(st.lists(st.integers(-(2**90), 2**90), min_size=1, max_size=150), st.integers(10, 200))
@settings(deadline=None)
def test_the_packed_exponential_is_the_recurrence_itself(values, bits):
    weighted = [mpz(0), *map(mpz, values)]
    plain = [mpz(1) << bits]
    for n in range(1, len(weighted)):
        plain.append((sum(weighted[j] * plain[n - j] for j in range(1, n + 1)) >> bits) // n)
    assert exponential(weighted, bits) == plain


def test_log_height_is_from_above():
    places = np.geomspace(0.01, 0.5, 50)
    for gamma in (1.0, 2.5, 5.0):
        with mpmath.workdps(60):
            exact = [mpmath.power(4, gamma) - (mpmath.mpf(p) * (1 - mpmath.mpf(p))) ** -mpmath.mpf(gamma) for p in places]
        assert all(found >= value for found, value in zip(log_height(places, gamma), exact, strict=True))


# --- panels ---------------------------------------------------------------------------------------


def weights_of(gamma, x, count):
    """Weights of a slab's rate: ``n! X^k/(2k)!``, n = k - 1; and the curve they make in balls."""
    values = [mpmath.mpf(x) ** (n + 1) * mpmath.factorial(n) / mpmath.factorial(2 * n + 1) for n in range(count)]
    pairs, logs = [], []
    with mpmath.workprec(500):
        for value in values:
            mantissa, exponent = mpmath.frexp(value)
            pairs.append((mpz(int(mpmath.ldexp(mantissa, 400))), int(exponent) - 400))
            logs.append(float(mpmath.log(value)))
    return Weights(0, [pairs], np.array([logs]))


def exact_curve(gamma, weights, places, mirrored=False):
    out = []
    with balls.precision(1500):
        for place in places:
            taylor = balls._bump_taylor(1 - arb(place) if mirrored else arb(place), gamma, weights.logs.shape[1])
            out.append(sum((arb(int(w)) * arb(2) ** e * t for (w, e), t in zip(weights.rows[0], taylor, strict=True)), arb(0)))
    return out


@pytest.mark.parametrize(("gamma", "x", "count"), [(1.0, 1.5, 40), (1.25, 4.0, 120), (2.0, 16.0, 150), (4.0, 8.0, 80)])
def test_panels_are_as_near_as_they_say(gamma, x, count):
    """Values at the places, the curve between them, the largest value, and what lies below the lowest panel."""
    weights = weights_of(gamma, x, count)
    top = max(float(abs(v).upper()) for v in exact_curve(gamma, weights, np.linspace(0.02, 0.5, 60)))
    allowed = np.array([math.log(top * 1e-14)])
    found = corner_curve.panels(gamma, weights.logs, 0, allowed)
    needs = [panel_need(panel, gamma, weights, allowed) for panel in found]
    rows = [panel_row(need, gamma, 0, None) for need in needs]
    expansions = Expansions(weights, needs, rows, allowed, gamma)
    values = np.array([expansions.values(p) for p in range(len(needs))])
    u, _, _ = corner_curve.places_and_weights()
    for p, (a, b) in enumerate(found):
        centre, half = 0.5 * (a + b), 0.5 * (b - a)
        with balls.precision(300):
            pick = [0, 17, corner_curve.NODES - 1]
            places = [arb(centre) + arb(half) * arb(float(u[i])) for i in pick]
        for side in (0, 1):
            for i, exact in zip(pick, exact_curve(gamma, weights, places, bool(side)), strict=True):
                value = float(values[p, i, side, 0])
                assert balls.distance(value, exact) <= 1e-14 * top + 2.0**-53 * abs(value), (a, b, side)
        largest = corner_curve.log_largest(centre, half, gamma, weights.logs, 0)[0]
        assert all(balls.log_size(v) <= largest for v in exact_curve(gamma, weights, np.linspace(a, b, 5)))
    curve = corner_curve.CornerCurve(np.array(found), values)
    bound = 2e-14 * corner_curve.largest_growth() * top + float(curve.errors(0.0)[0])
    rng = np.random.default_rng(2)
    near = np.concatenate([rng.uniform(0.0, 0.5, 40), rng.uniform(0.0, found[0][0], 4), [found[0][0], 0.5]])
    for far in (False, True):
        exact = exact_curve(gamma, weights, near, far)
        for value, ball in zip(curve.evaluate(near, np.full(near.size, far))[0], exact, strict=True):
            assert balls.distance(float(value), ball) <= bound


@pytest.mark.parametrize(
    ("gamma", "x", "count", "panel"), [(1.25, 4.0, 120, (0.02, 0.03)), (2.0, 16.0, 150, (0.06, 0.085)), (4.0, 8.0, 80, (0.36, 0.48))]
)
def test_the_distance_of_a_coarse_interpolant_is_below_its_bound(gamma, x, count, panel):
    """Panels so long that the distance is far above rounding. The bound takes no cancellation into account: terms here are up to 1e12
    times their sum."""
    weights = weights_of(gamma, x, count)
    a, b = panel
    centre, half = 0.5 * (a + b), 0.5 * (b - a)
    u, _, _ = corner_curve.places_and_weights()
    values = np.array([float(v.mid()) for v in exact_curve(gamma, weights, centre + half * u)])
    curve = corner_curve.CornerCurve(np.array([panel]), np.repeat(values[None, :, None, None], 2, axis=2))
    near = np.linspace(a, b, 43)[1:-1]
    found = curve.evaluate(near, np.zeros(near.size, dtype=bool))[0]
    worst = max(balls.distance(float(v), e) for v, e in zip(found, exact_curve(gamma, weights, near), strict=True))
    bound = corner_curve.log_distance(centre, half, gamma, weights.logs, 0)[0]
    assert math.log(worst) <= bound <= math.log(worst) + 50.0


def test_far_from_an_end_fewer_orders_count_and_what_is_left_out_is_small():
    weights = weights_of(2.0, 16.0, 170)
    allowed = np.array([math.log(1e-3)])
    count = corner_curve.orders_needed(0.4375, 0.0625, 2.0, weights.logs, 0, allowed)
    assert count < 100
    rest = Weights(0, [[(mpz(0), 0)] * count + weights.rows[0][count:]], weights.logs)
    assert all(abs(v) < 1e-3 for v in exact_curve(2.0, rest, np.linspace(0.375, 0.5, 9)))


# --- sums -----------------------------------------------------------------------------------------


@pytest.mark.parametrize(("x", "order", "easing"), [(4.0, 1.3, 0.4), (8.0, 1.25, 1.0), (2.0, 1.7, 0.35)])
def test_sums_are_within_their_rounding_bound(x, order, easing):
    """Every series and several derivatives, against balls of the same cut series."""
    medium = slab(well=fp.Well(storage=1e-6, resistance=3e8))
    target = fp.Target(start=0.0).move(by=1e6, over=medium.travel_time / x, order=order, easing=easing)
    plan = fp.feedforward(medium, target, tolerance=1e-8)
    terms = plan.series.terms[0]
    exact = ExtendedSum(medium, plan.series, 40)
    (move,) = target.moves
    reference = balls.Slab.of(medium)
    grid = np.linspace(0.0, target.end, 300)
    times = np.array([0.21, 0.4, 0.5, 0.77]) * easing * target.end
    times = np.concatenate([times, target.end - times[:2]])
    as_ball = [balls.Move(move.start, move.duration, move.change, move.order, move.easing)]
    for shift in (0, 1, 2):
        names = [n for n in NAMES if n != "stored_volume"]
        values = exact.evaluate(names, times, shift)
        for name, row in zip(names, values, strict=True):
            bound = exact.rounding(name, shift, grid)
            assert bound <= 1e-9 * np.abs(exact.evaluate([name], grid, shift)).max()
            for t, value in zip(times, row, strict=True):
                ball = reference.evaluate([name], as_ball, float(t), terms, derivative=shift)[name]
                assert balls.distance(float(value), ball) <= bound, (name, shift, t)


def test_one_time_at_a_time_gives_the_same():
    medium = slab()
    plan = fp.feedforward(medium, fp.Target(start=0.0).move(by=1e6, over=medium.travel_time / 8.0, order=1.25))
    assert plan.extended is not None and plan.certificate.digits > 16
    times = np.linspace(0.1, 0.9, 7) * plan.end
    together = plan.rate(times)
    np.testing.assert_allclose([plan.rate([t])[0] for t in times], together, rtol=0.0, atol=1e-13 * np.abs(together).max())


def test_corners_of_equal_shape_share_a_curve():
    """Two moves of the same duration and order: one curve, whatever their changes."""
    medium = slab()
    over = medium.travel_time / 8.0
    target = fp.Target(start=0.0).move(by=1e6, over=over, order=1.25).hold(over).move(by=-4e5, over=over, order=1.25)
    plan = fp.feedforward(medium, target)
    plan.rate(np.linspace(0.0, plan.end, 100))
    assert len({shape for shape, shift in plan.extended._curves if shift == 0}) == 1

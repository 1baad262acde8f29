"""What is cut off is never more than the stated tail.

The terms past the cut come from `ball_reference`: exact coefficients times exact derivatives, in ball arithmetic.
"""

from __future__ import annotations

import math
from functools import cache

import ball_reference as balls
import numpy as np
import pytest
from flint import arb
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.special import gammaln, logsumexp

import flatplan as fp
from flatplan.flat.bounds import log_closed_form
from flatplan.flat.bump_integral import bump_integral
from flatplan.flat.coefficient_bounds import scaled_bounds
from flatplan.flat.tail import gevrey_radius, tail_table
from flatplan.flat.target import Move
from flatplan.site.medium import Medium
from flatplan.site.segment import Segment

CHANNELS = (
    ("injection_rate", 0),
    ("sandface_rate", 0),
    ("bottomhole_pressure", 0),
    ("sandface_pressure", 0),
    ("injection_rate", -1),
    ("injection_rate", 1),
)
ROCK = fp.Rock(permeability="40 mD", porosity=0.12, compressibility="5e-10 1/Pa")
WATER = fp.Fluid(viscosity="0.5 cP", compressibility="4.5e-10 1/Pa")
EXTRA = 50  # terms past the cut that are summed; each adds to what must stay below the bound


def slab(**rest):
    return fp.slab(length="140 m", area="6000 m^2", rock=ROCK, fluid=WATER, **rest)


def cut_off(coefficients, move, t, shift, after):
    """Balls of ``Σ c_k y^(k + shift)`` over k = N + 1 … for every N in ``after``."""
    last = len(coefficients) - 1
    y = balls.move_derivatives(move, t, after[0] + 1 + shift, last + shift)
    out, total = {}, arb(0)
    with balls.precision(balls.BITS):
        for k in range(last, after[0], -1):
            total += coefficients[k] * y[k + shift]
            out[k - 1] = total
    return {n: out[n] for n in after}


def assert_no_tail_is_above_its_bound(medium, coefficients, move, places, after):
    rise = Move(move.start, move.duration, move.change, move.order, move.easing).rise
    table = tail_table(medium, rise, CHANNELS, 96)
    for t in places:
        for row, (channel, shift) in enumerate(CHANNELS):
            for n, ball in cut_off(coefficients[channel], move, t, shift, after).items():
                assert balls.log_size(ball) <= math.log(table[row, n]), f"{channel} {shift}, N = {n}, t = {t}: the tail is above its bound"


@given(
    order=st.floats(1.2, 1.97),
    easing=st.one_of(st.just(1.0), st.floats(0.05, 0.95)),
    slowness=st.floats(-3.0, 1.5),
    storage=st.sampled_from([0.0, 1e-8, 5e-6]),
    resistance=st.sampled_from([0.0, 1e7, 3e9]),
    where=st.lists(st.floats(0.0, 1.0), min_size=2, max_size=2),
)
@settings(max_examples=40)
def test_no_tail_of_a_slab_is_above_its_bound(order, easing, slowness, storage, resistance, where):
    """Order, easing, X (from 1e-3 to 30 per corner) and the well at random, cuts after term 1 … 40."""
    medium = slab(well=fp.Well(storage=storage, resistance=resistance))
    width = medium.travel_time / 10.0**slowness
    move = balls.Move(0.0, width / easing, -3e5, order, easing)
    reference = balls.Slab.of(medium)
    coefficients = {name: reference.coefficients(name, 40 + EXTRA) for name in {c for c, _ in CHANNELS}}
    gamma = 1.0 / (order - 1.0)
    live = (4.0**gamma + 60.0) ** (-1.0 / gamma)
    places = [(live + (1.0 - 2.0 * live) * w) * width for w in where]
    assert_no_tail_is_above_its_bound(medium, coefficients, move, places, list(range(1, 41)))


ZONES = (
    Segment(0.0, 60.0, 8e-11, 1e-10, 900.0, 0.0, 1, 200.0, -1.0),
    Segment(60.0, 190.0, 8e-10, 2e-10, 900.0, 2e-16, 1, 200.0, -1.0),
    Segment(190.0, 199.9, 8e-12, 1e-10, 900.0, 0.0, 1, 200.0, -1.0),
)
MEDIA = {
    "slab with everything": slab(leakage=3e-15, face=fp.Face(leak=2e-10, storage=3e-6), well=fp.Well(storage=1e-6, resistance=3e8)),
    "held slab": slab(face=fp.Face(held=True), well=fp.Well(storage=1e-6, resistance=3e8)),
    "three radial zones": Medium("radial", ZONES, face=fp.Face(leak=1e-10), well=fp.Well(storage=1e-6), well_resistance=1e8),
}


@cache
def exact_coefficients(name):
    return balls.path_taylor(MEDIA[name], 60, scaled=False)


@pytest.mark.parametrize("name", MEDIA)
@pytest.mark.parametrize(("order", "easing", "slowness"), [(1.5, 1.0, 1.0), (1.9, 0.4, 3.0)])
def test_no_tail_of_another_medium_is_above_its_bound(name, order, easing, slowness):
    medium = MEDIA[name]
    move = balls.Move(0.0, slowness * medium.travel_time / easing, 2e5, order, easing)
    coefficients = exact_coefficients(name)
    places = [s * easing * move.duration for s in (0.2, 0.35, 0.5, 0.6)]
    assert_no_tail_is_above_its_bound(medium, coefficients, move, places, list(range(1, 31)))


# --- the sum to infinity -----------------------------------------------------------------------


@pytest.mark.parametrize("order", (1.25, 1.6, 1.9))
@pytest.mark.parametrize("easing", (1.0, 0.5))
def test_the_closed_form_is_above_the_orders_it_stands_for(order, easing):
    """With fewer orders bounded one by one, more is left to the closed form: the rest can only grow."""
    medium = slab(well=fp.Well(storage=1e-6, resistance=3e8))
    rise = Move(0.0, 4.0 * medium.travel_time, 1e6, order, easing).rise
    few, many = tail_table(medium, rise, CHANNELS, 96), tail_table(medium, rise, CHANNELS, 400)
    assert np.all(few[:, 96] >= many[:, 96])
    assert np.all(few[:, 1:] >= 0.95 * many[:, 1:97])  # the grids of the two differ a little
    assert np.all(np.isinf(many[:, 0]))
    assert np.all(np.diff(many[:, 1:], axis=1) <= 0.0)


@given(
    order=st.floats(1.2, 1.98),
    ratio=st.floats(-3.0, 1.0),
    start=st.integers(9, 640),
    shift=st.sampled_from([-1, 0, 1]),
    storage=st.sampled_from([0.0, 1e-9, 1e-6, 1e-2]),
    face=st.sampled_from([0.0, 1e-8, 1e-3]),
)
def test_successive_terms_of_the_closed_form_fall_as_the_geometric_series_says(order, ratio, start, shift, storage, face):
    """(X/4ρ) ((k+a)/k)² k^(s-2) (1+2/k)⁴ is above every later ratio of terms, not only the next one."""
    medium = slab(well=fp.Well(storage=storage, resistance=1e9), face=fp.Face(storage=face, leak=1e-9))
    rise = Move(0.0, medium.travel_time / 10.0**ratio, 1.0, order, 1.0).rise
    k = np.arange(float(start), start + 200.0)
    log_terms = np.log(scaled_bounds(medium, "injection_rate", k)) + k * math.log(medium.travel_time / rise.width)
    log_terms += log_closed_form(rise.gamma, k + shift - 1.0) - np.array([math.lgamma(2.0 * v + 1.0) for v in k])
    claimed = math.log(medium.travel_time / (4.0 * gevrey_radius(rise))) + (order - 2.0) * math.log(start)
    claimed += 2.0 * math.log(max(start + shift, start) / start) + 4.0 * math.log1p(2.0 / start)
    assert np.all(np.diff(log_terms) <= claimed + 1e-9)


@pytest.mark.parametrize("orders", (48, 96, 300))
@pytest.mark.parametrize(("order", "x"), [(1.3, 2.0), (1.6, 4.0), (1.85, 2.2), (1.95, 1.6)])
@pytest.mark.parametrize("shift", (-1, 0, 1))
def test_the_rest_is_above_the_sum_of_what_it_stands_for(order, x, orders, shift):
    """Thousands of terms of the closed form added up, for a channel whose bound grows like k⁴ (well and face store much)."""
    medium = slab(face=fp.Face(storage=1e-2, leak=1e-9), well=fp.Well(storage=1e-2, resistance=1e9))
    rise = Move(0.0, medium.travel_time / x, 1.0, order, 1.0).rise
    rest = tail_table(medium, rise, (("injection_rate", shift),), orders)[0, -1]
    k = np.arange(orders + 1.0, orders + 4000.0)
    terms = np.log(scaled_bounds(medium, "injection_rate", k)) + k * math.log(medium.travel_time / rise.width)
    terms += log_closed_form(rise.gamma, k + shift - 1.0) - shift * math.log(rise.width) - gammaln(2.0 * k + 1.0)
    total = math.exp(min(float(logsumexp(terms)) - math.log(bump_integral(rise.gamma).total), 709.0))
    assert rest >= total
    if math.isfinite(rest) and total > 1e-290 and terms[1] - terms[0] < math.log(0.7):
        assert rest <= 3.0 * total


def test_no_bound_where_terms_do_not_fall_yet():
    """X/ρ = 60 at order 1.95: terms fall only after thousands of orders, and the table says so."""
    medium = slab()
    rise = Move(0.0, medium.travel_time / 30.0, 1e6, 1.95, 1.0).rise
    assert np.all(np.isinf(tail_table(medium, rise, CHANNELS, 96)))


def test_a_rest_too_large_for_a_float_is_infinite_not_clipped():
    """At order 1.2 the closed form carries exp(4⁵): after few orders the rest is beyond a float."""
    medium = slab()
    rise = Move(0.0, 20.0 * medium.travel_time, 1e6, 1.2, 1.0).rise
    assert np.all(np.isinf(tail_table(medium, rise, CHANNELS, 12)))
    assert np.all(np.isfinite(tail_table(medium, rise, CHANNELS, 640)[:, 1:]))


def test_tails_are_in_proportion_to_the_change():
    medium = slab()
    one, other = (Move(0.0, 2.0 * medium.travel_time, change, 1.7, 0.5).rise for change in (1e5, -7e5))
    assert tail_table(medium, other, CHANNELS, 60)[:, 1:] == pytest.approx(7.0 * tail_table(medium, one, CHANNELS, 60)[:, 1:], rel=1e-12)


def test_the_target_has_no_tail():
    medium = slab()
    rise = Move(0.0, medium.travel_time, 1e6, 1.7, 1.0).rise
    assert np.all(tail_table(medium, rise, (("target_pressure", 0),), 60)[:, 1:] == 0.0)

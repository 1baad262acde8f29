"""Extremes of a plan: against dense sampling, ball arithmetic and a known solution; hypothesis runs derandomised (conftest.py)."""

from __future__ import annotations

import ball_reference as balls
import numpy as np
import pytest
from helpers_decide import HELD, LEAKING, MEDIUM, held, one_move, sampled_extremes, slab, up, up_and_down
from hypothesis import given, settings
from hypothesis import strategies as st

import flatplan as fp
from flatplan.decide.extremes import Extremes, all_extremes, bracketed_zeros, extremes, time_grid

LOOKED_AT = [
    ("injection_rate", 0),
    ("injection_rate", 1),
    ("bottomhole_pressure", 0),
    ("target_pressure", 1),
    ("injected_volume", 0),
    ("sandface_pressure", 0),
]


def assert_as_sampled(plan, channel, derivative, rel=1e-9, count=200_000):
    """Never below what the samples reach, and above it by no more than what lies between them."""
    found = extremes(plan, channel, derivative)
    least, least_at, largest, largest_at = sampled_extremes(plan, channel, derivative, count)
    scale = max(abs(least), abs(largest))
    assert found.largest == pytest.approx(largest, rel=0.0, abs=rel * scale), channel
    assert found.least == pytest.approx(least, rel=0.0, abs=rel * scale), channel
    # values are as found, where found
    values = plan.evaluate(channel, np.array([found.least_at, found.largest_at]), derivative)
    assert np.allclose(values, [found.least, found.largest], rtol=0.0, atol=1e-13 * scale)
    return found, (least_at, largest_at)


@pytest.mark.parametrize(("channel", "derivative"), LOOKED_AT)
def test_against_200000_samples(channel, derivative):
    plan = one_move("20 h", order=1.75, easing=0.55, medium=slab(well=fp.Well(skin=2, storage="0.03 m^3/bar"), height=20.0))
    assert_as_sampled(plan, channel, derivative)


@pytest.mark.parametrize(("channel", "derivative"), LOOKED_AT[:3])
@pytest.mark.parametrize("plan", (up, up_and_down, held), ids=lambda p: p.__name__)
def test_several_moves_and_faces_against_samples(plan, channel, derivative):
    assert_as_sampled(plan(), channel, derivative)


@given(order=st.floats(1.2, 1.95), easing=st.one_of(st.just(1.0), st.floats(0.05, 0.99)), slowness=st.floats(0.0, 1.7), up=st.booleans())
@settings(max_examples=10)
def test_of_any_move_against_samples(order, easing, slowness, up):
    """Corners from 1 to 50 travel times, orders 1.2 to 1.95, up and down."""
    plan = one_move(MEDIUM.travel_time * 10.0**slowness / easing, order, easing, to="22.5 MPa" if up else "19 MPa")
    for channel, derivative in (("injection_rate", 0), ("injection_rate", 1), ("bottomhole_pressure", 0)):
        assert_as_sampled(plan, channel, derivative, count=8_000)


@given(order=st.floats(1.35, 1.8), easing=st.floats(0.3, 0.99), slowness=st.floats(-0.6, 0.0))
@settings(max_examples=6)
def test_of_fast_moves_against_samples(order, easing, slowness):
    """Corners down to a quarter of the travel time: the rate swings many times."""
    plan = one_move(MEDIUM.travel_time * 10.0**slowness / easing, order, easing)
    for channel in ("injection_rate", "bottomhole_pressure"):
        assert_as_sampled(plan, channel, 0, count=4_000)


@pytest.mark.parametrize(("over", "order", "easing"), [("3 d", 1.8, 0.3), ("10 h", 1.6, 1.0), ("5 h", 1.5, 1.0)])
def test_the_rates_extremes_in_ball_arithmetic(over, order, easing):
    """At the time found the exact slope changes sign, and the exact value is the one found: python-flint, sharing no code."""
    plan = one_move(over, order, easing)
    found = extremes(plan, "injection_rate")
    (move,) = plan.target.moves
    moves = [balls.Move(move.start, move.duration, move.change, move.order, move.easing)]
    reference, terms = balls.Slab.of(MEDIUM), plan.certificate.terms + 12
    peak = max(found.largest, -found.least)
    for value, when, sign in ((found.largest, found.largest_at, 1.0), (found.least, found.least_at, -1.0)):
        exact = reference.evaluate(["injection_rate"], moves, when, terms)["injection_rate"]
        assert balls.distance(value, exact) <= 1e-9 * peak
        before, after = (
            float(reference.evaluate(["injection_rate"], moves, when + shift, terms, derivative=1)["injection_rate"].mid()) * sign
            for shift in (-1e-5 * plan.end, 1e-5 * plan.end)
        )
        assert before > 0.0 > after


def test_extremes_lie_between_samples():
    """The time found is no point of the grid, and the value beats every point of it."""
    plan = up()
    grid = time_grid(plan)
    values = plan.rate(grid)
    found = extremes(plan, "injection_rate")
    assert found.largest > values.max() and found.least < values.min()
    assert np.min(np.abs(grid - found.largest_at)) > 1.0
    assert abs(plan.evaluate("injection_rate", found.largest_at, 1)[0]) <= 1e-9 * extremes(plan, "injection_rate", 1).size[0]


def test_steepest_slope_of_one_bump_is_known():
    """The pressure of a single bump changes fastest at its middle, by Δp b(1/2)/(I D): symmetric, and the bump is largest there."""
    plan = one_move("40 h", order=1.5, easing=1.0)
    found = extremes(plan, "target_pressure", 1)
    with balls.precision(balls.BITS):
        exact = float((balls.arb(1.5e6) / balls.bump_integral(2.0) / balls.arb(144000)).mid())
    assert found.largest == pytest.approx(exact, rel=1e-13)
    assert found.largest_at == pytest.approx(72000.0, rel=1e-9)
    assert found.least == 0.0 and found.size == (found.largest, found.largest_at)


def test_all_at_once_is_the_same_as_one_by_one():
    plan = up_and_down()
    together = all_extremes(plan, LOOKED_AT)
    for (channel, derivative), found in zip(LOOKED_AT, together, strict=True):
        alone = extremes(plan, channel, derivative)
        scale = alone.size[0]
        assert found.largest == pytest.approx(alone.largest, abs=1e-13 * scale)
        assert found.least == pytest.approx(alone.least, abs=1e-13 * scale)


def test_size_is_the_larger_with_its_time():
    assert Extremes(-3.0, 1.0, 2.0, 5.0).size == (3.0, 1.0)
    assert Extremes(-1.0, 1.0, 2.0, 5.0).size == (2.0, 5.0)


def test_a_channel_that_is_largest_at_its_end_is_found_there():
    """Leaking slab: the rate settles above zero; downward: the volume is least when all is out."""
    plan = one_move("10 d", easing=0.5, medium=LEAKING)
    found = extremes(plan, "injected_volume")
    assert found.largest_at == plan.end and found.largest == pytest.approx(plan.evaluate("injected_volume", plan.end)[0], rel=1e-14)
    down = one_move("10 d", order=1.5, easing=1.0, to="20 MPa")
    assert extremes(down, "injected_volume").least == pytest.approx(MEDIUM.stored_volume(-1e6), rel=1e-9)
    assert extremes(held(), "injection_rate").largest >= held().rate(held().end)[0] > 0.0
    assert HELD.leaks


def test_bracketed_zeros():
    """Each bracket by itself; the middle where the ends have the same sign."""
    zeros = bracketed_zeros(lambda t: np.cos(t), np.array([1.0, 4.0, 7.0, 0.1]), np.array([2.0, 5.0, 8.5, 0.3]))
    assert np.allclose(zeros, [0.5 * np.pi, 1.5 * np.pi, 2.5 * np.pi, 0.2], rtol=1e-13)

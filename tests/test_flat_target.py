"""Targets: their derivatives against ball arithmetic, their algebra, and what they refuse.

Reference: `ball_reference` (python-flint). Hypothesis runs derandomised (conftest.py).
"""

from __future__ import annotations

import math

import ball_reference as balls
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import flatplan as fp
from flatplan.flat.tail import rise_log_bounds

DAY = 86400.0


def reference(target: fp.Target) -> list[balls.Move]:
    return [balls.Move(m.start, m.duration, m.change, m.order, m.easing) for m in target.moves]


def busy() -> fp.Target:
    """Up, hold, down beyond the start, and two moves that overlap the second and each other."""
    return (
        fp.Target(start="21 MPa")
        .move(to="22.5 MPa", over="3 d", order=1.8, easing=0.3)
        .hold("1 d")
        .move(to="20.4 MPa", over="4 d", order=1.5, easing=1.0)
        .move(by="0.3 MPa", over="2 d", order=1.9, easing=0.7, at="5 d")
        .move(by="-0.2 MPa", over="9 h", order=1.3, easing=0.05, at="6.5 d")
    )


# --- derivatives -------------------------------------------------------------------------------


@pytest.mark.parametrize(("order", "easing"), [(1.25, 1.0), (1.95, 1.0), (1.5, 0.3), (1.8, 0.6), (1.95, 0.05), (1.2, 0.9)])
def test_derivatives_of_one_move_agree_with_balls(order, easing):
    """Orders 0 … 40, each to 1e-10 of the largest that this order reaches (order 40: 1e-9)."""
    target = fp.Target(start=0.0).move(by=2.5e6, over="2 d", order=order, easing=easing)
    rise = target.rises[0]
    low = (4.0**rise.gamma + 60.0) ** (-1.0 / rise.gamma)
    places = np.concatenate([np.linspace(low, 1.0 - low, 9), [0.5, 1e-3, 1.0]])
    times = np.unique(np.concatenate([places * rise.width, rise.ramp + places * rise.width, [-5.0, 0.0, 1.4 * target.end]]))
    got = target.derivatives(times, 40)
    exact = [balls.target_derivatives(reference(target), t, 0, 40) for t in times]
    for k in (0, 1, 2, 3, 5, 10, 20, 30, 40):
        size = max(abs(float(e[k])) for e in exact)
        error = max(balls.distance(value, e[k]) for value, e in zip(got[k], exact, strict=True))
        assert error <= (1e-9 if k == 40 else 1e-10) * size, k


def test_derivatives_of_overlapping_moves_agree_with_balls():
    target = busy()
    times = np.linspace(0.0, target.end, 23)
    got = target.derivatives(times, 12)
    exact = [balls.target_derivatives(reference(target), t, 0, 12) for t in times]
    for k in range(13):
        size = max(max(abs(float(e[k])) for e in exact), np.max(np.abs(got[k])))
        assert max(balls.distance(v, e[k]) for v, e in zip(got[k], exact, strict=True)) <= 1e-11 * size, k


def test_derivatives_agree_with_differences():
    """Central differences of each order give the next, to their own error."""
    target = busy()
    h = 0.05
    times = np.linspace(0.03, 0.97, 37) * target.end
    before, here, after = (target.derivatives(times + shift, 6) for shift in (-h, 0.0, h))
    for k in range(6):
        difference = (after[k] - before[k]) / (2.0 * h)
        assert np.max(np.abs(difference - here[k + 1])) <= 1e-4 * np.max(np.abs(here[k + 1])), k


def test_a_corner_years_after_the_start_keeps_its_digits():
    """Nine hours of easing after thirty years: places are taken from the start of the move, not from the clock's grain."""
    target = fp.Target(start=0.0).move(by=1e6, over="30 h", order=1.7, easing=0.3, at=1e9)
    times = 1e9 + np.linspace(0.02, 0.98, 25) * target.moves[0].duration
    got = target.derivatives(times, 20)
    exact = [balls.target_derivatives(reference(target), t, 0, 20) for t in times]
    for k in (0, 1, 2, 8, 20):
        size = max(abs(float(e[k])) for e in exact)
        assert max(balls.distance(v, e[k]) for v, e in zip(got[k], exact, strict=True)) <= 1e-11 * size, k


def test_levels_at_rest_before_between_and_after():
    target = fp.Target(start="21 MPa").move(to="22.5 MPa", over="3 d", easing=0.4).hold("5 d").move(to="21.8 MPa", over="4 d")
    assert target.end == 12 * DAY
    assert target.level == pytest.approx(21.8e6, rel=1e-15)
    pressure = target.pressure([0.0, 3 * DAY, 5 * DAY, 8 * DAY, 12 * DAY, 40 * DAY])
    assert pressure == pytest.approx([21e6, 22.5e6, 22.5e6, 22.5e6, 21.8e6, 21.8e6], rel=1e-15)
    still = target.derivatives([0.0, 3 * DAY, 5 * DAY, 8 * DAY, 12 * DAY, 40 * DAY], 8)[1:]
    assert np.all(still == 0.0)
    assert target.largest_change == pytest.approx(1.5e6, rel=1e-12)


def test_the_middle_of_an_eased_ramp_is_straight():
    target = fp.Target(start=0.0).move(by=6e5, over=1000.0, order=1.6, easing=0.2)
    y = target.derivatives(np.linspace(201.0, 799.0, 9), 5)
    assert y[1] == pytest.approx(np.full(9, 6e5 / 800.0), rel=1e-13)
    assert np.all(y[2:] == 0.0)


def test_knots_are_the_ends_of_corners_and_of_holds():
    target = fp.Target(start=0.0).move(by=1.0, over=10.0, easing=0.2).hold(5.0).move(by=-2.0, over=4.0)
    assert target.knots == pytest.approx([0.0, 2.0, 8.0, 10.0, 15.0, 19.0])


def test_nothing_is_built_in_place():
    first = fp.Target(start="21 MPa")
    second = first.move(by="1 MPa", over="1 d")
    assert first.moves == () and len(second.moves) == 1 and second.hold("1 h").end > second.end


# --- algebra -----------------------------------------------------------------------------------

ORDERS, EASINGS = st.floats(1.2, 1.97), st.one_of(st.just(1.0), st.floats(0.03, 0.99))
TIMES = np.linspace(-0.1, 1.3, 57)


@given(order=ORDERS, easing=EASINGS, factor=st.floats(-50.0, 50.0).filter(lambda f: abs(f) > 1e-3))
def test_derivatives_are_linear_in_the_change(order, easing, factor):
    one = fp.Target(start=0.0).move(by=1e5, over=1.0, order=order, easing=easing).derivatives(TIMES, 10)
    other = fp.Target(start=0.0).move(by=factor * 1e5, over=1.0, order=order, easing=easing).derivatives(TIMES, 10)
    assert np.all(np.abs(other - factor * one) <= 1e-13 * abs(factor) * np.max(np.abs(one), axis=1, keepdims=True))


@given(order=ORDERS, easing=EASINGS, stretch=st.floats(1e-3, 1e6))
@settings(max_examples=25)
def test_a_stretch_of_time_scales_the_kth_derivative(order, easing, stretch):
    one = fp.Target(start=0.0).move(by=1e5, over=1.0, order=order, easing=easing).derivatives(TIMES, 8)
    other = fp.Target(start=0.0).move(by=1e5, over=stretch, order=order, easing=easing).derivatives(TIMES * stretch, 8)
    scaled = other * stretch ** np.arange(9.0)[:, None]
    size = 1e5 * np.exp(rise_log_bounds(easing, 1.0 - easing, 1.0 / (order - 1.0), 8))  # proven, see test_flat_bounds.py
    assert np.all(np.abs(scaled - one) <= 1e-12 / easing * size[:, None])


@given(order=ORDERS, easing=EASINGS, shift=st.integers(0, 2**20))
def test_a_shift_of_time_shifts_the_derivatives(order, easing, shift):
    one = fp.Target(start=0.0).move(by=1e5, over=1024.0, order=order, easing=easing)
    other = fp.Target(start=0.0).move(by=1e5, over=1024.0, order=order, easing=easing, at=float(shift))
    times = np.arange(0.0, 1025.0, 32.0)
    assert np.array_equal(one.derivatives(times, 8), other.derivatives(times + shift, 8))


@given(
    first=st.tuples(ORDERS, EASINGS, st.floats(0.0, 3.0)),
    second=st.tuples(ORDERS, EASINGS, st.floats(0.0, 3.0)),
)
@settings(max_examples=40)
def test_moves_add_up_whatever_their_order(first, second):
    def add(target, move):
        order, easing, at = move
        return target.move(by=1e5, over=2.0, order=order, easing=easing, at=at)

    times = np.linspace(0.0, 5.0, 31)
    start = fp.Target(start=7e5)
    both = add(add(start, first), second).derivatives(times, 6)
    other = add(add(start, second), first).derivatives(times, 6)
    apart = add(start, first).derivatives(times, 6) + add(start, second).derivatives(times, 6)
    size = np.max(np.abs(apart), axis=1, keepdims=True)
    assert np.all(np.abs(both - apart) <= 1e-13 * size) and np.all(np.abs(other - apart) <= 1e-13 * size)


@given(order=ORDERS, easing=EASINGS)
def test_a_move_is_odd_about_its_middle(order, easing):
    target = fp.Target(start=0.0).move(by=1.0, over=2.0, order=order, easing=easing)
    times = np.linspace(0.0, 1.0, 33)
    early, late = target.derivatives(1.0 - times, 6), target.derivatives(1.0 + times, 6)
    assert np.all(np.abs(early[0] + late[0] - 1.0) <= 1e-12)
    for k in range(1, 7):
        assert np.max(np.abs(early[k] - (-1.0) ** (k + 1) * late[k])) <= 1e-10 * np.max(np.abs(early[k])), k


@given(order=ORDERS, easing=EASINGS)
def test_a_move_never_turns_back(order, easing):
    y = fp.Target(start=0.0).move(by=1.0, over=1.0, order=order, easing=easing).derivatives(np.linspace(0.0, 1.0, 401), 1)
    assert np.all(y[1] >= -1e-12 * np.max(y[1])) and np.all(np.diff(y[0]) >= -1e-13)
    assert np.all((y[0] >= -1e-13) & (y[0] <= 1.0 + 1e-13))


# --- bad input ---------------------------------------------------------------------------------

START = "21 MPa"


@pytest.mark.parametrize("order", (1.0, 0.5, 2.0001, 2.5, -1.8))
def test_orders_at_which_no_move_exists_are_refused(order):
    with pytest.raises(ValueError, match=rf"order: got {order}; it takes a Gevrey order above 1 and up to 2: "):
        fp.Target(start=START).move(to="22 MPa", over="1 d", order=order)


@pytest.mark.parametrize("order", (1.0001, 1.05, 1.169))
def test_orders_so_near_1_that_the_bump_is_a_spike_are_refused(order):
    with pytest.raises(ValueError, match=rf"order: got {order}; orders from 1.17 on are held"):
        fp.Target(start=START).move(to="22 MPa", over="1 d", order=order)


@pytest.mark.parametrize("order", (math.nan, math.inf, "fast", None))
def test_orders_that_are_no_numbers_are_refused(order):
    with pytest.raises(ValueError, match="^order: "):
        fp.Target(start=START).move(to="22 MPa", over="1 d", order=order)


@pytest.mark.parametrize("easing", (0.0, -0.2, 1.0001, 3.0))
def test_easings_outside_their_range_are_refused(easing):
    with pytest.raises(ValueError, match=rf"easing: got {easing}; it takes a share above 0 and up to 1"):
        fp.Target(start=START).move(to="22 MPa", over="1 d", easing=easing)


@pytest.mark.parametrize("easing", (0.9991, 0.9999999, math.nextafter(1.0, 0.0)))
def test_easings_that_are_all_but_one_bump_are_refused(easing):
    with pytest.raises(ValueError, match=rf"easing: got {easing}; it takes a share up to 0.999, or exactly 1"):
        fp.Target(start=START).move(to="22 MPa", over="1 d", easing=easing)


@pytest.mark.parametrize(
    ("over", "got"), [(0.0, "0"), (-5.0, "-5"), ("0 d", "0 d"), ("-3 d", "-3 d"), (math.nan, "nan"), (math.inf, "inf")]
)
def test_durations_not_above_zero_are_refused(over, got):
    with pytest.raises(ValueError, match=rf"over: got .*{got}.*; it "):
        fp.Target(start=START).move(to="22 MPa", over=over)


@pytest.mark.parametrize("duration", (0.0, -1.0, "0 h", math.nan))
def test_holds_not_above_zero_are_refused(duration):
    with pytest.raises(ValueError, match="hold: got "):
        fp.Target(start=START).hold(duration)


def test_a_move_without_a_duration_is_refused():
    with pytest.raises(ValueError, match='over: is missing; it takes a duration such as "3 d"'):
        fp.Target(start=START).move(to="22 MPa")


@pytest.mark.parametrize("levels", ({}, {"to": "22 MPa", "by": "1 MPa"}))
def test_a_move_takes_a_level_or_a_change(levels):
    with pytest.raises(ValueError, match=r"to: give either to= .* or by= .*, one of them"):
        fp.Target(start=START).move(over="1 d", **levels)


def test_a_move_to_the_level_reached_is_refused():
    with pytest.raises(ValueError, match=r"to: got '21 MPa', which changes nothing; use hold\(\) to stay at a level"):
        fp.Target(start=START).move(to="21 MPa", over="1 d")
    with pytest.raises(ValueError, match=r"by: got 0.0, which changes nothing"):
        fp.Target(start=START).move(by=0.0, over="1 d")


def test_a_level_that_is_a_rounded_sum_is_the_level_reached():
    """0.1 + 0.2 is not 0.3 in binary: the last move would be one of 6e-17 Pa."""
    target = fp.Target(start=0.1).move(by=0.2, over="1 d")
    assert target.level != 0.3
    with pytest.raises(ValueError, match="to: got 0.3, which changes nothing"):
        target.move(to=0.3, over="1 d")


@pytest.mark.parametrize(
    ("call", "name"),
    [
        (lambda t: t.move(to="22 m", over="1 d"), "to"),
        (lambda t: t.move(to="22 MPa", over="1 m"), "over"),
        (lambda t: t.move(by="3 mD", over="1 d"), "by"),
        (lambda t: t.move(to="22 MPa", over="1 d", at="3 MPa"), "at"),
        (lambda t: t.hold("2 bar"), "hold"),
        (lambda t: t.move(to="22 MPa", over="1 d", order="1.8 d"), "order"),
        (lambda t: t.move(to="22 MPa", over="1 d", easing="0.3 bar"), "easing"),
    ],
)
def test_a_value_of_another_dimension_is_refused(call, name):
    with pytest.raises(ValueError, match=rf"^{name}: got "):
        call(fp.Target(start=START))


@pytest.mark.parametrize("at", (-1.0, "-3 h", math.nan))
def test_a_move_before_the_start_is_refused(at):
    with pytest.raises(ValueError, match="^at: got "):
        fp.Target(start=START).move(by="1 MPa", over="1 d", at=at)


@pytest.mark.parametrize("start", (math.nan, math.inf, "21 m", "high", None))
def test_a_start_that_is_no_pressure_is_refused(start):
    with pytest.raises(ValueError, match="^start: "):
        fp.Target(start=start)


@pytest.mark.parametrize("orders", (-1, 651, 2.0, True, "3"))
def test_orders_of_derivatives_out_of_range_are_refused(orders):
    with pytest.raises(ValueError, match=rf"orders: got {orders!r}; it takes a whole number from 0 to 650"):
        busy().derivatives([1.0], orders)


def test_derivatives_outside_the_range_of_a_float_are_refused():
    short = fp.Target(start=0.0).move(by=1e6, over=1e-3)
    with pytest.raises(ValueError, match=r"orders: got 200; in SI units the derivatives leave the range of a float after order \d+"):
        short.derivatives(np.linspace(0.0, 1e-3, 50), 200)


@pytest.mark.parametrize("times", ([], [math.nan], ["3 bar"], [[1.0, 2.0]]))
def test_times_that_are_no_times_are_refused(times):
    with pytest.raises(ValueError, match="^times: "):
        busy().pressure(times)

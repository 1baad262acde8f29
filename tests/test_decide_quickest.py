"""The quickest moves: feasible between samples, not beaten by brute force, refused with a number where nothing would do.

Brute force uses neither the prepared shapes nor the plan: derivatives of the target and coefficients of the medium, summed here.
"""

from __future__ import annotations

import re
from functools import cache

import numpy as np
import pytest
from helpers_decide import DAY, HELD, LEAKING, MEDIUM, slab
from hypothesis import given, settings
from hypothesis import strategies as st

import flatplan as fp
from flatplan.decide.move_shape import coefficients, move_shape
from flatplan.decide.speed_limit import _Program, decay_rates, speed_limit

CHANGE = 1.5e6
T_D = MEDIUM.travel_time
VOLUME = MEDIUM.stored_volume(CHANGE)
UP = fp.Target(start="21 MPa").move(to="22.5 MPa", over="3 d")
PROGRAMME = fp.Target(start="21 MPa").hold("1 d").move(to="22.5 MPa", over="3 d").hold("5 d").move(to="21.8 MPa", over="4 d").hold("1 d")


def rate_limits(slowness, back=None):
    """A pump whose mean rate fills the slab in ``slowness`` travel times."""
    q = VOLUME / (slowness * T_D)
    return fp.Limits(max_rate=q, min_rate=None if back is None else -back * q)


@cache
def usual():
    return fp.quickest(MEDIUM, UP, rate_limits(4.0, 0.1))


def summed_rate(order, easing, duration, medium=MEDIUM, change=CHANGE, terms=40, count=1200):
    """The rate of one move, from the definition of the series."""
    target = fp.Target(start=0.0).move(by=change, over=duration, order=order, easing=easing)
    times = np.unique(np.concatenate([np.linspace(0.0, duration, count // 2), np.linspace(0.0, easing * duration, count // 2)]))
    times = np.unique(np.concatenate([times, duration - times]))
    return medium.coefficients("injection_rate", terms) @ target.derivatives(times, terms)


# --- the answer --------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("medium", "target", "limits"),
    [
        (MEDIUM, UP, rate_limits(4.0, 0.1)),
        (MEDIUM, UP, rate_limits(1.0, 0.4)),
        (MEDIUM, UP, fp.Limits(max_bottomhole_pressure="22.6 MPa")),
        (MEDIUM, UP, fp.Limits(max_rate_change="0.2 m^3/h/h", max_rate="3 m^3/h")),
        (MEDIUM, UP, fp.Limits(max_volume="145 m^3", max_rate="20 m^3/h")),
        (MEDIUM, PROGRAMME, fp.Limits(max_rate="2 m^3/h", min_rate="-0.5 m^3/h", max_bottomhole_pressure="22.6 MPa")),
        (LEAKING, UP, fp.Limits(max_rate="2.9 m^3/h", max_bottomhole_pressure="23 MPa")),
        (slab(well=fp.Well(resistance="0.4 bar/(m^3/h)", storage="0.03 m^3/bar")), UP, rate_limits(3.0, 0.3)),
    ],
)
def test_limits_hold_between_samples_and_one_of_them_binds(medium, target, limits):
    """Dense samples of the plan, and the independent simulation driven by its rate, against each limit."""
    best = fp.quickest(medium, target, limits)
    assert best.verdict.realizable
    assert all(best.binding)
    assert best.duration == best.plan.end == best.target.end
    times = np.linspace(0.0, best.duration, 20_000)
    planned = best.plan.at(times)
    simulated = fp.simulate(medium, best.plan, times, start="21 MPa")
    for found, slack in ((planned, 2e-9), (simulated, 1e-6)):
        for name, values, sense in (
            ("max_rate", found.injection_rate, 1.0),
            ("min_rate", found.injection_rate, -1.0),
            ("max_bottomhole_pressure", found.bottomhole_pressure, 1.0),
            ("max_volume", found.injected_volume, 1.0),
        ):
            if (limit := getattr(limits, name)) is not None:
                assert np.max(sense * (values - limit)) <= slack * np.max(np.abs(values)), name
    # any shorter, and one of them is broken
    shorter = fp.feedforward(medium, best.target.stretched(0.995))
    assert not fp.assess(shorter, limits).realizable


@pytest.mark.parametrize(("slowness", "back"), [(4.0, 0.1), (1.5, 0.3)])
def test_no_shape_of_a_dense_grid_is_quicker_by_a_thousandth(slowness, back):
    limits = rate_limits(slowness, back)
    best = fp.quickest(MEDIUM, UP, limits)
    shorter = 0.999 * best.duration
    tried = 0
    for order in np.linspace(1.3, 1.96, 23):
        for easing in np.concatenate([np.geomspace(0.03, 0.8, 26), [1.0]]):
            if T_D / (easing * shorter) > 2.5:
                continue  # its 40 terms would not do; its corners are far too sharp
            rate = summed_rate(order, easing, shorter)
            tried += 1
            assert rate.max() > limits.max_rate or rate.min() < limits.min_rate, (order, easing)
    assert tried > 250
    # and the answer's own shape passes where it should
    rate = summed_rate(best.order[0], best.easing[0], 1.001 * best.duration)
    assert rate.max() <= limits.max_rate and rate.min() >= limits.min_rate


@pytest.mark.parametrize("x", [0.05, 0.1])
def test_an_eased_ramp_beats_one_bump(x):
    """Where a rate limit binds and the move is slow, by 1.8 times and more [method: at X = 0.1 by 2.2]."""
    limits = rate_limits(1.2 / x)
    best = fp.quickest(MEDIUM, UP, limits)
    bump = fp.quickest(MEDIUM, UP, limits, order=1.95, easing=1.0)
    assert T_D / bump.duration <= 0.1
    assert bump.order == (1.95,) and bump.easing == (1.0,)
    assert bump.duration / best.duration >= 1.8
    assert best.binding == bump.binding == (("max_rate",),)


@pytest.mark.parametrize(
    ("x", "peak", "least"), [(0.05, 1.13, -0.02), (0.1, 1.21, -0.03), (0.25, 1.38, -0.13), (0.5, 1.71, -0.28), (1.0, 2.41, -0.74)]
)
def test_against_the_table_of_an_independent_script(x, peak, least):
    """Best eased ramps as multiples of the mean rate: with those limits the move takes no longer than the table's (rounded to 3 digits)."""
    mean = VOLUME * x / T_D
    limits = fp.Limits(max_rate=peak * mean, min_rate=(least - 0.005) * mean)
    assert fp.quickest(MEDIUM, UP, limits).duration <= 1.005 * T_D / x


def test_what_the_caller_fixes_stays():
    best = fp.quickest(MEDIUM, UP, rate_limits(4.0, 0.1), order=1.7)
    assert best.order == (1.7,)
    assert best.duration >= usual().duration
    best = fp.quickest(MEDIUM, UP, rate_limits(4.0, 0.1), easing=0.6123)
    assert best.easing == (0.6123,)
    assert best.duration > usual().duration


def test_a_programme_keeps_its_levels_and_holds():
    best = fp.quickest(MEDIUM, PROGRAMME, fp.Limits(max_rate="2 m^3/h", min_rate="-0.5 m^3/h"))
    first, second = best.target.moves
    assert first.start == DAY
    assert second.start - first.end == pytest.approx(5 * DAY)
    assert best.target.end - second.end == pytest.approx(DAY)
    assert best.duration == pytest.approx(sum(best.durations) + 7 * DAY)
    assert best.target.level == pytest.approx(21.8e6)
    assert best.binding == (("max_rate",), ("min_rate",))
    alone = fp.quickest(MEDIUM, UP, fp.Limits(max_rate="2 m^3/h", min_rate="-0.5 m^3/h"))
    assert best.durations[0] == pytest.approx(alone.durations[0], rel=1e-4)


def test_levels_couple_the_moves_through_pressure():
    """The second step up starts nearer the pressure limit, so it is the slower one."""
    steps = fp.Target(start="21 MPa").move(by="5 bar", over="1 d").move(by="5 bar", over="1 d")
    best = fp.quickest(MEDIUM, steps, fp.Limits(max_bottomhole_pressure="22.1 MPa"))
    assert best.durations[1] > 1.5 * best.durations[0]
    assert best.binding == (("max_bottomhole_pressure",),) * 2


@given(st.floats(0.2, 5.0), st.floats(-1.0, 1.0))
@settings(max_examples=5)
def test_changes_and_limits_scaled_alike_give_the_same_duration(factor, up):
    """Up with (max, min) is down with (-min, -max)."""
    limits = rate_limits(4.0, 0.1)
    sign = 1.0 if up >= 0.0 else -1.0
    high, low = (limits.max_rate, limits.min_rate) if sign > 0 else (-limits.min_rate, -limits.max_rate)
    target = fp.Target(start="50 MPa").move(by=sign * factor * CHANGE, over="3 d")
    best = fp.quickest(MEDIUM, target, fp.Limits(max_rate=factor * high, min_rate=factor * low))
    assert best.duration == pytest.approx(usual().duration, rel=2e-5)
    assert best.physical_limit == pytest.approx(usual().physical_limit, rel=1e-3)


def test_time_scales_with_the_travel_time():
    """Twice as viscous a fluid, half the rates: the same curves at half the pace."""
    water = fp.Fluid(viscosity="1 cP", compressibility="4.5e-10 1/Pa")
    rock = fp.Rock(permeability="40 mD", porosity=0.12, compressibility="5e-10 1/Pa")
    slow = fp.slab(length="140 m", area="6000 m^2", rock=rock, fluid=water)
    limits = rate_limits(4.0, 0.1)
    best = fp.quickest(slow, UP, fp.Limits(max_rate=limits.max_rate / 2.0, min_rate=limits.min_rate / 2.0))
    assert best.duration == pytest.approx(2.0 * usual().duration, rel=2e-5)


def test_a_held_face():
    target = fp.Target(start="0 L/s", pressure="18 MPa").move(to="0.5 L/s", over="2 d")
    best = fp.quickest(HELD, target, fp.Limits(max_rate="1 L/s", min_rate=0))
    assert best.verdict.realizable
    assert best.physical_limit < best.duration


def test_text_and_html():
    said = repr(usual())
    assert said.startswith("Quickest: ")
    assert re.search(r"move 1 +[0-9.]+ d, order 1\.[0-9]+, easing 0\.[0-9]+; limited by max_rate", said)
    assert "physical limit" in said and "duality" in said and "Realizable" in said
    assert "<table>" in usual()._repr_html_()


# --- free shapes ---------------------------------------------------------------------------------------


@pytest.mark.parametrize(("slowness", "back"), [(1.0, 0.05), (2.0, 0.2)])
def test_a_free_shape_comes_within_a_fifth_of_the_physical_limit(slowness, back):
    limits = rate_limits(slowness, back)
    best = fp.quickest(MEDIUM, UP, limits, shape="free")
    eased = fp.quickest(MEDIUM, UP, limits)
    assert best.physical_limit > T_D
    assert best.physical_limit < best.duration < min(1.2 * best.physical_limit, 0.95 * eased.duration)
    assert best.verdict.realizable and best.plan.certificate.met
    assert set(best.binding[0]) <= {"max_rate", "min_rate"} and best.binding[0]
    assert best.target.level == pytest.approx(22.5e6, abs=1e-3)
    times = np.linspace(0.0, best.duration, 8000)
    simulated = fp.simulate(MEDIUM, best.plan, times, start="21 MPa")
    assert simulated.injection_rate.max() <= limits.max_rate * (1.0 + 1e-6)
    assert simulated.injection_rate.min() >= limits.min_rate - 1e-6 * limits.max_rate
    assert np.abs(simulated.target_pressure - best.target.pressure(times)).max() <= 1e-5 * CHANGE


def test_a_free_programme_with_a_pressure_limit():
    limits = fp.Limits(max_rate="4 m^3/h", min_rate="-1.5 m^3/h", max_bottomhole_pressure="23 MPa")
    target = fp.Target(start="21 MPa").move(to="22 MPa", over="1 d").hold("2 d").move(to="21.5 MPa", over="1 d")
    best = fp.quickest(MEDIUM, target, limits, shape="free")
    eased = fp.quickest(MEDIUM, target, limits)
    assert best.verdict.realizable
    assert best.duration <= eased.duration
    assert best.target.pressure([best.durations[0] + DAY])[0] == pytest.approx(22e6)  # the hold is at its level


def test_order_and_easing_are_for_eased_ramps():
    with pytest.raises(ValueError, match=r"^easing: is for eased ramps; leave it out, or take shape='eased'\.$"):
        fp.quickest(MEDIUM, UP, rate_limits(4.0), shape="free", easing=0.3)


# --- the shape's own sums ------------------------------------------------------------------------------


@pytest.mark.parametrize(("order", "easing", "x"), [(1.8, 1.0, 0.5), (1.9, 0.2, 0.1), (1.85, 0.45, 1.0), (1.7, 0.63, 1.0), (1.5, 0.8, 0.7)])
def test_prepared_shapes_give_the_channels_of_the_plan(order, easing, x):
    duration = T_D / x
    plan = fp.feedforward(MEDIUM, fp.Target(start=0.0).move(by=1.0, over=duration, order=order, easing=easing), tolerance=1e-12)
    shape = move_shape(order, easing)
    times = shape.places * easing * duration
    for channel, derivative, source, shift in (
        ("injection_rate", 0, "injection_rate", 0),
        ("injection_rate", 1, "injection_rate", 1),
        ("injected_volume", 0, "injection_rate", -1),
        ("bottomhole_pressure", 0, "bottomhole_pressure", 0),
        ("target_pressure", 1, "target_pressure", 1),
    ):
        found = shape.channel(coefficients(MEDIUM, source), T_D, duration, shift)
        wanted = plan.evaluate(channel, times, derivative)
        np.testing.assert_allclose(found, wanted, rtol=0, atol=2e-8 * np.abs(wanted).max())


def test_a_shape_too_sharp_is_not_resolved():
    assert move_shape(1.96, 0.02).channel(coefficients(MEDIUM, "injection_rate"), T_D, T_D) is None
    assert move_shape(1.8, 1.0).channel(coefficients(MEDIUM, "injection_rate"), T_D, T_D / 100.0) is None


# --- the physical limit --------------------------------------------------------------------------------


@pytest.mark.parametrize(("back", "c"), [(1.0, 0.24), (0.2, 0.31), (0.05, 0.42)])
@pytest.mark.parametrize("slowness", [1.0, 3.0])
def test_a_sealed_slab_takes_its_volume_and_a_share_of_the_travel_time(back, c, slowness):
    q = VOLUME / (slowness * T_D)
    found = speed_limit(MEDIUM, 0.0, CHANGE, -back * q, q)
    assert (found.lower - VOLUME / q) / T_D == pytest.approx(c, abs=0.01)
    assert found.lower <= found.upper <= 1.005 * found.lower


def test_the_modes_are_those_of_a_sealed_slab():
    n = np.arange(len(decay_rates(MEDIUM)))
    assert len(n) > 25
    np.testing.assert_allclose(decay_rates(MEDIUM) * T_D, n**2 * np.pi**2, rtol=2e-7, atol=1e-12)


def test_two_modes_by_hand():
    """Bang-bang: +1 until a, -1 to the end, with ∫Q = V and ∫λ e^(-λ(T - t)) Q = 0 for one λ: two equations in a and T."""
    rate, size = np.pi**2, 0.8
    from scipy.optimize import brentq

    def settled(end):  # with the volume right, what is left of the mode
        back = 0.5 * (end - size)
        return (np.exp(-rate * back) - np.exp(-rate * end)) - (1.0 - np.exp(-rate * back))

    wanted = brentq(settled, size + 1e-3, size + 1.0)
    below, above = _Program(np.array([0.0, rate]), size, -1.0).bracket()
    assert below <= wanted <= above
    assert above - below < 2e-3 * wanted


def test_any_multipliers_bound_every_history():
    """Weak duality, with multipliers of no merit and random rate histories that settle nothing in particular."""
    program = _Program(decay_rates(MEDIUM, 8) * T_D, 1.0, -0.5)
    share, multipliers = program.share(1.5)
    bound = program.most(1.5, multipliers)
    assert share <= bound <= 1.005 * share
    rng = np.random.default_rng(3)
    for _ in range(20):
        other = multipliers * (1.0 + 0.3 * rng.standard_normal(multipliers.size))
        assert program.most(1.5, other) >= share


def test_no_plan_beats_it_and_another_solver_agrees():
    from scipy.optimize import linprog

    best = usual()
    assert best.physical_limit < best.duration
    program = _Program(decay_rates(MEDIUM, 12) * T_D, 0.7, -0.3)
    share, _ = program.share(1.2)
    back = np.concatenate([[0.0], np.geomspace(1e-4, 1.2, 240)])
    kept = 1.0 - np.exp(-np.outer(program.decay, back))
    kept[0] = back
    matrix = np.column_stack([np.diff(kept, axis=1), -program.right])
    cost = np.append(np.zeros(240), -1.0)
    found = linprog(cost, A_eq=matrix, b_eq=np.zeros(len(matrix)), bounds=[(-0.3, 1.0)] * 240 + [(0.0, None)], method="highs-ipm")
    assert -found.fun == pytest.approx(share, rel=1e-6)


def test_one_sided_and_absent_limits():
    one = fp.quickest(MEDIUM, UP, rate_limits(4.0))
    assert one.physical_limit == pytest.approx(4.0 * T_D, rel=1e-6)
    assert "slowest mode alone" in one.physical_limit_note
    none = fp.quickest(MEDIUM, UP, fp.Limits(max_bottomhole_pressure="22.7 MPa"))
    assert none.physical_limit is None
    assert none.physical_limit_note == "not computed: neither max_rate nor min_rate is stated"


def test_a_leaking_medium_must_beat_its_steady_rate():
    steady = LEAKING.equilibrium(CHANGE).rate
    found = speed_limit(LEAKING, 0.0, CHANGE, -steady, 1.5 * steady)
    quicker = speed_limit(LEAKING, 0.0, CHANGE, -steady, 3.0 * steady)
    assert quicker.upper < found.lower
    assert speed_limit(LEAKING, 0.0, CHANGE, -steady, 0.9 * steady) is None


# --- refusals ------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("limits", "said"),
    [
        (dict(max_bottomhole_pressure="22.4 MPa"), r"^max_bottomhole_pressure: got 224 bar, but at rest at 225 bar .* 225 bar would do\.$"),
        (dict(min_bottomhole_pressure="21.1 MPa"), r"^min_bottomhole_pressure: got 211 bar, but at rest at 210 bar .* 210 bar would do\.$"),
        (dict(max_volume="100 m^3"), r"^max_volume: got 100 m³, but at rest at 225 bar .* already 143\.6 m³, .* 143\.6 m³ would do\.$"),
        (dict(min_rate="1 m^3/h"), r"^min_rate: got 1 m³/h, but at rest at 210 bar .* 0 m³/h would do\.$"),
        (dict(max_rate=0), r"^max_rate: got 0 m³/h, but in a sealed medium .* it takes a rate above 0\.$"),
        (dict(), r"^limits: none is stated, so every duration would do; .*$"),
    ],
)
def test_what_no_duration_meets_is_one_sentence(limits, said):
    with pytest.raises(ValueError, match=said):
        fp.quickest(MEDIUM, UP, fp.Limits(**limits))


def test_injection_alone_is_refused_with_the_back_flow_that_would_do():
    with pytest.raises(ValueError, match=r"^min_rate: got 0 m³/h, but in a sealed medium .* takes .*, which would do\.$") as problem:
        fp.quickest(MEDIUM, UP, fp.Limits(max_rate="2 m^3/h", min_rate=0))
    would_do = re.search(r"-[0-9.]+ m³/h", str(problem.value))[0]
    best = fp.quickest(MEDIUM, UP, fp.Limits(max_rate="2 m^3/h", min_rate=would_do.replace("m³", "m^3")))
    assert best.verdict.realizable
    with pytest.raises(ValueError, match=r"^min_rate: got 0 m³/h, but in a sealed medium"):
        fp.quickest(MEDIUM, UP, fp.Limits(min_rate=0))


def test_a_limit_met_nowhere_together_with_the_others():
    with pytest.raises(ValueError, match=r"^max_volume: got 170 m³, which no duration from .* would do, at .*\.$"):
        fp.quickest(LEAKING, UP, fp.Limits(max_rate="2.9 m^3/h", max_volume="170 m^3"))


def test_bad_input_is_named():
    with pytest.raises(ValueError, match=r"^target: a move begins at 1 d, before the last one is over at 3 d; quickest takes"):
        fp.quickest(MEDIUM, UP.move(by="1 bar", over="1 d", at="1 d"), rate_limits(4.0))
    with pytest.raises(ValueError, match=r"^target: has no move"):
        fp.quickest(MEDIUM, fp.Target(start="21 MPa"), rate_limits(4.0))
    with pytest.raises(ValueError, match=r"^order: got 2\.5; it takes a Gevrey order"):
        fp.quickest(MEDIUM, UP, rate_limits(4.0), order=2.5)
    with pytest.raises(ValueError, match=r"^easing: got 0"):
        fp.quickest(MEDIUM, UP, rate_limits(4.0), easing=0)
    with pytest.raises(ValueError, match=r"^shape: got 'round'; it takes one of 'eased'"):
        fp.quickest(MEDIUM, UP, rate_limits(4.0), shape="round")
    with pytest.raises(ValueError, match=r"^max_pressure_change: is stated, but the pressure of a held face"):
        fp.quickest(HELD, fp.Target(start="0 L/s").move(to="0.5 L/s", over="2 d"), fp.Limits(max_pressure_change="1 kPa/h"))
    with pytest.raises(ValueError, match=r"^limits: a bottomhole pressure is limited, but the target does not say"):
        fp.quickest(HELD, fp.Target(start="0 L/s").move(to="0.5 L/s", over="2 d"), fp.Limits(max_bottomhole_pressure="30 MPa"))
    with pytest.raises(ValueError, match=r"^tolerance: got 0\.5"):
        fp.quickest(MEDIUM, UP, rate_limits(4.0), tolerance=0.5)
    with pytest.raises(TypeError, match=r"^limits: got dict; it takes flatplan Limits\.$"):
        fp.quickest(MEDIUM, UP, {"max_rate": 1.0})

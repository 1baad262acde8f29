"""The rate as pumped: the plan's volume in every step, whole and odd last steps, and what stepping costs at the target."""

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest
from helpers_decide import DAY, HOUR, LEAKING, MEDIUM, held, one_move, quadrature, slab, up, up_and_down
from hypothesis import given, settings
from hypothesis import strategies as st

import flatplan as fp
from flatplan.cli.case import read_case
from flatplan.field import PumpedSteps, steps

WELL = slab(well=fp.Well(resistance="0.1 bar/(m^3/h)", storage="0.02 m^3/bar"))


def assert_balanced(pumped, plan):
    """Every step holds the plan's volume to rounding; the total is the plan's."""
    volumes = np.diff(plan.evaluate("injected_volume", pumped.edges))
    top = np.abs(plan.evaluate("injected_volume", np.linspace(0.0, plan.end, 200))).max()
    assert np.all(np.abs(pumped.volumes - volumes) <= 4e-15 * top)
    assert np.all(np.abs(pumped.rates * np.diff(pumped.edges) - pumped.volumes) == 0.0)
    assert pumped.volumes.sum() == pytest.approx(plan.evaluate("injected_volume", plan.end)[0], abs=1e-13 * top * len(volumes))


@given(st.floats(0.02, 1.0))
@settings(max_examples=40)
def test_steps_of_any_length_cover_the_plan_and_balance(share):
    plan = up_and_down()
    every = share * plan.end
    pumped = steps(plan, every=every)
    assert pumped.edges[0] == 0.0 and pumped.edges[-1] == plan.end == pumped.end
    lengths = np.diff(pumped.edges)
    assert np.allclose(lengths[:-1], every, rtol=1e-12) and 0.0 < lengths[-1] <= every * (1.0 + 1e-8)
    assert len(lengths) == math.ceil(plan.end / every - 1e-9)
    assert_balanced(pumped, plan)


def test_volumes_by_quadrature_of_the_rate():
    """Gauss-Legendre on 40 parts of each step: the volume is not taken on trust from its own series."""
    plan = one_move("3 d", medium=WELL)
    pumped = steps(plan, every="10 h")
    for a, b, volume in zip(pumped.edges[:-1], pumped.edges[1:], pumped.volumes, strict=True):
        assert volume == pytest.approx(quadrature(plan.rate, np.linspace(a, b, 41)), abs=1e-9 * pumped.volumes.sum())


@pytest.mark.parametrize(
    ("every", "count", "last"), [("6 h", 12, 6.0), ("7 h", 11, 2.0), ("72 h", 1, 72.0), ("71 h", 2, 1.0), ("40 h", 2, 32.0)]
)
def test_whole_and_odd_last_steps(every, count, last):
    pumped = steps(up(), every=every)
    assert len(pumped.rates) == len(pumped.volumes) == count
    assert (pumped.edges[-1] - pumped.edges[-2]) / HOUR == pytest.approx(last, rel=1e-12)
    assert_balanced(pumped, up())


def test_one_step_of_the_whole_plan_pumps_the_mean_rate():
    pumped = steps(up(), every="3 d")
    assert pumped.edges.tolist() == [0.0, 3.0 * DAY]
    assert pumped.rates[0] == pytest.approx(MEDIUM.stored_volume(1.5e6) / (3.0 * DAY), rel=1e-9)


@pytest.mark.parametrize(
    ("over", "hold", "holds", "every", "count"),
    [
        ("100000.1 s", "0.1 s", 8, "100000.9 s", 1),
        ("90000.7 s", "0.7 s", 8, "90006.3 s", 1),
        ("90000.7 s", "0.7 s", 8, "30002.1 s", 3),
        ("1.1 d", "0.1 d", 16, "0.9 d", 3),
    ],
)
def test_sums_that_are_rounded_make_no_step_of_nothing(over, hold, holds, every, count):
    """0.1 + 0.2 is not 0.3: neither a sliver at the end, nor a refusal of a step as long as the plan."""
    target = fp.Target(start="21 MPa").move(to="22 MPa", over=over)
    for _ in range(holds):
        target = target.hold(hold)
    pumped = steps(fp.feedforward(MEDIUM, target), every=every)
    assert len(pumped.rates) == count
    assert np.allclose(np.diff(pumped.edges), pumped.every, rtol=1e-9, atol=0.0)
    assert pumped.edges[-1] == target.end


def test_the_total_is_what_is_stored():
    pumped = steps(up_and_down(), every="5 h")
    assert pumped.volumes.sum() == pytest.approx(MEDIUM.stored_volume(0.8e6), rel=1e-9)
    stored = WELL.equilibrium(1.5e6).stored_volume
    assert steps(one_move("3 d", medium=WELL), every="5 h").volumes.sum() == pytest.approx(stored, rel=1e-9)
    assert stored == pytest.approx(MEDIUM.stored_volume(1.5e6) + 0.02 * 15.0, rel=1e-12)


@pytest.mark.parametrize("plan", [held, lambda: one_move("5 d", medium=LEAKING)])
def test_media_that_leak(plan):
    plan = plan()
    pumped = steps(plan, every="5 h")
    assert_balanced(pumped, plan)
    assert pumped.rates[-1] > 0.0


def test_it_carries_its_plan():
    pumped = steps(up(), every="6 h")
    assert isinstance(pumped, PumpedSteps) and isinstance(pumped, fp.Steps)
    assert pumped.plan is up() and pumped.medium is up().medium and pumped.target is up().target and pumped.every == 6.0 * HOUR
    assert pumped.planned.times.tolist() == pumped.edges[1:].tolist()
    assert np.allclose(pumped.planned.injection_rate, up().rate(pumped.edges[1:]), rtol=0.0, atol=1e-15)
    shown = repr(pumped)
    assert shown.startswith("Pumped steps: 12 of 0.25 d") and "143.6 m³" in shown
    assert "largest change between steps" in shown and f"{np.abs(np.diff(pumped.rates)).max() * 3600.0:.4g} m³/h" in shown
    assert "0 m³/h" in repr(steps(up(), every="3 d"))
    with pytest.raises((ValueError, AttributeError)):
        pumped.rates[0] = 1.0


# --- what stepping costs -----------------------------------------------------------------------------


def test_the_error_falls_with_the_square_of_the_step():
    """Equal volumes: what is left is the curvature within a step. Halved steps leave a quarter; the order is 2 within 0.15."""
    plan = up()
    errors = [fp.confirm(steps(plan, every=hours * HOUR)).target_error for hours in (12.0, 6.0, 3.0, 1.5)]
    assert all(after < before for before, after in itertools.pairwise(errors))
    orders = np.log2(np.array(errors[:-1]) / errors[1:])
    assert orders[-1] == pytest.approx(2.0, abs=0.15) and orders[-2] == pytest.approx(2.0, abs=0.3)


def test_the_shipped_example_in_steps_of_six_hours():
    """Within 0.5 % of the change, as the report says to its reader."""
    case = read_case("example")
    plan = fp.feedforward(case.medium, case.target, tolerance=case.tolerance)
    check = fp.confirm(steps(plan, every="6 h"))
    assert case.every == 6.0 * HOUR
    assert check.subject == "steps" and check.confirmed
    assert 1e-4 * check.target_change < check.target_error <= 5e-3 * check.target_change
    assert check.mass_balance <= 1e-10


def test_a_rate_that_is_read_off_instead_of_balanced_would_be_far_worse():
    """The plan's rate a third into each step: it does not hold the plan's volume, and settles beside the level."""
    plan = up()
    balanced = steps(plan, every="6 h")
    read_off = PumpedSteps(edges=balanced.edges, rates=plan.rate(balanced.edges[:-1] + 2.0 * HOUR), plan=plan, every=6.0 * HOUR)
    assert fp.confirm(balanced).settling_error < 0.05 * fp.confirm(read_off).settling_error


# --- bad input -----------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("every", "said"),
    [
        (0.0, r"^every: got 0\.0; it must be above zero\.$"),
        ("-6 h", r"^every: got '-6 h'; it must be above zero\.$"),
        (math.nan, r"^every: got nan, which is not finite; it takes a .*\.$"),
        ("6 bar", r"^every: got '6 bar', which is not a .*; it takes a .*\.$"),
        (None, r"^every: got None; it takes a .*\.$"),
        ("4 d", r"^every: got '4 d', longer than the plan \(3 d\); it takes at most that\.$"),
        ("1 s", r"^every: got '1 s', which makes 2\.59e\+05 steps; it takes at least .*\.$"),
    ],
)
def test_a_step_that_is_refused(every, said):
    with pytest.raises(ValueError, match=said):
        steps(up(), every=every)


def test_a_plan_of_another_type():
    with pytest.raises(TypeError, match=r"^plan: got Target; it takes a plan made by feedforward\(\)\.$"):
        steps(up().target, every="6 h")


def test_the_least_step_that_is_named_is_taken():
    with pytest.raises(ValueError, match="it takes at least ") as error:
        steps(up(), every="1 s")
    least = str(error.value).split("it takes at least ")[1].rstrip(".")
    assert len(steps(up(), every=least).rates) <= 100_000

"""Remedies are true: what they suggest satisfies the limit, and one per cent less does not."""

from __future__ import annotations

import re

import numpy as np
import pytest
from helpers_decide import DAY, LEAKING, MEDIUM, one_move, slab, up, up_and_down
from hypothesis import given, settings
from hypothesis import strategies as st

import flatplan as fp
from flatplan import units
from flatplan.decide import Limits, assess
from flatplan.decide.physical import at_least

WELL = slab(well=fp.Well(resistance="0.4 bar/(m^3/h)", storage="0.03 m^3/bar"))
ONE = re.compile(r"^(?P<longer>[^ ]+ [^ ]+) instead of [^ ]+ [^ ]+ would do\.$")
ALL = re.compile(r"^The whole programme in (?P<factor>[0-9.]+) times the time would do \((?P<longer>.+) instead of .+\)\.$")


@pytest.mark.parametrize(
    ("name", "limit", "system"),
    [
        ("max_rate", "2 m^3/h", "SI"),
        ("max_rate", "1.234 m^3/h", "field"),
        ("max_rate_change", "0.2 m^3/h/h", "metric"),
        ("max_bottomhole_pressure", "22.7 MPa", "field"),
        ("max_pressure_change", "20 kPa/h", "metric"),
        ("min_rate", "-0.004 m^3/h", "metric"),
        ("max_volume", "143.65 m^3", "SI"),
    ],
)
def test_the_suggested_duration_will_do_and_a_shorter_one_will_not(name, limit, system):
    plan = one_move("1.5 d", medium=WELL if name != "max_volume" else MEDIUM)
    limits = Limits(**{name: limit})
    finding = assess(plan, limits, units=system)[name]
    assert finding.holds is False
    longer = ONE.match(finding.remedy)["longer"]
    assert assess(one_move(longer, medium=plan.medium), limits)[name].holds is True
    shorter = 0.99 * units.si(longer, "time", "longer")
    assert assess(one_move(shorter, medium=plan.medium), limits)[name].holds is False


@given(st.floats(0.5, 2.5))
@settings(max_examples=2)
def test_of_any_rate_limit(share):
    """Written in four digits, rounded up."""
    limits = Limits(max_rate=share / 3600.0)
    finding = assess(up(), limits)["max_rate"]
    longer = ONE.match(finding.remedy)["longer"]
    assert assess(one_move(longer), limits)["max_rate"].holds is True
    assert assess(one_move(0.99 * units.si(longer, "time", "longer")), limits)["max_rate"].holds is False


@pytest.mark.parametrize("limit", ["1.9 m^3/h", "1.77 m^3/h"])
def test_a_programme_of_several_moves(limit):
    plan, limits = up_and_down(), Limits(max_rate=limit)
    said = ALL.match(assess(plan, limits)["max_rate"].remedy)
    factor = float(said["factor"])
    assert assess(fp.feedforward(MEDIUM, plan.target.stretched(factor)), limits)["max_rate"].holds is True
    assert assess(fp.feedforward(MEDIUM, plan.target.stretched(0.99 * factor)), limits)["max_rate"].holds is False
    assert units.si(said["longer"], "time", "longer") == pytest.approx(factor * plan.end, rel=1e-3)


@pytest.mark.parametrize(
    ("name", "limit", "at_rest"),
    [
        ("max_bottomhole_pressure", "22 MPa", "225 bar"),
        ("min_bottomhole_pressure", "21.5 MPa", "210 bar"),
        ("max_volume", "100 m^3", "143.6 m³"),
        ("max_rate", "-1 m^3/h", "0 m³/h"),
        ("min_rate", "1 m^3/h", "0 m³/h"),
    ],
)
def test_where_no_duration_helps_the_level_says_why(name, limit, at_rest):
    remedy = assess(up(), Limits(**{name: limit}))[name].remedy
    assert remedy == f"No duration helps: at rest it is already {at_rest}. Lower the level, or seek another well or limit."


def test_a_leaking_medium_needs_a_rate_at_rest():
    plan = one_move("10 d", medium=LEAKING, easing=1.0)
    steady = LEAKING.equilibrium(1.5e6).rate
    assert steady > 0.0
    remedy = assess(plan, Limits(max_rate=0.9 * steady))["max_rate"].remedy
    assert remedy.startswith(f"No duration helps: at rest it is already {units.text(steady, 'rate')}.")


def test_a_sealed_medium_cannot_be_brought_there_by_injection_alone():
    assert assess(up(), Limits(min_rate=0.0))["min_rate"].remedy == (
        "No duration helps in a medium that is sealed: see the finding on injection alone."
    )


def test_what_even_64_times_the_duration_does_not_reach():
    remedy = assess(up(), Limits(max_rate="0.02 m^3/h"))["max_rate"].remedy
    assert remedy == "Not even 64 times the duration does; lower the level or allow more."
    # 64 times is still looked at: the peak falls as the duration, so a 60th of it can be had
    peak = assess(up())["max_rate"].value
    assert " instead of 3 d would do." in assess(up(), Limits(max_rate=peak / 60.0))["max_rate"].remedy


def test_a_level_that_overlapping_moves_never_rest_at_does_not_count():
    """Up 15 and down 10 bar at once: nothing ever rests at 225 bar, and a longer programme does help."""
    target = fp.Target(start="21 MPa").move(by="1.5 MPa", over="10 h", order=1.6).move(by="-1 MPa", over="12 h", order=1.6, at=0.0)
    plan, limits = fp.feedforward(MEDIUM, target), Limits(max_bottomhole_pressure="22.1 MPa")
    finding = assess(plan, limits)["max_bottomhole_pressure"]
    assert finding.holds is False
    factor = float(ALL.match(finding.remedy)["factor"])
    assert assess(fp.feedforward(MEDIUM, target.stretched(factor)), limits)["max_bottomhole_pressure"].holds is True


def test_a_level_between_two_moves_in_a_row_counts():
    """Where one move ends and the next begins every derivative is zero: all is at rest for a moment."""
    target = fp.Target(start="21 MPa").move(to="22.5 MPa", over="3 d").move(to="21.2 MPa", over="3 d")
    remedy = assess(fp.feedforward(MEDIUM, target), Limits(max_bottomhole_pressure="22 MPa"))["max_bottomhole_pressure"].remedy
    assert remedy.startswith("No duration helps: at rest it is already 225 bar.")


def test_moves_told_out_of_their_order_rest_at_the_levels_in_time():
    """Told second, done first: down to 200 bar, then up to 215; 225 bar is never met, 200 bar is."""
    target = fp.Target(start="21 MPa").move(by="1.5 MPa", over="3 d", at="5 d").move(by="-1 MPa", over="3 d", at=0.0)
    plan = fp.feedforward(MEDIUM, target)
    remedy = assess(plan, Limits(min_bottomhole_pressure="20.5 MPa"))["min_bottomhole_pressure"].remedy
    assert remedy.startswith("No duration helps: at rest it is already 200 bar.")
    assert assess(plan, Limits(max_bottomhole_pressure="21.9 MPa"))["max_bottomhole_pressure"].holds is True


@given(st.floats(1e-9, 1e9), st.sampled_from(["time", "rate", "fraction"]), st.sampled_from(units.SYSTEMS))
def test_numbers_that_promise_are_rounded_up(value, kind, system):
    said = at_least(value, kind, lambda v, k: units.text(v, k, system))
    read = units.si(said, kind, "said")
    assert value <= read <= 1.002 * value


def test_the_longer_plan_is_the_same_job():
    """Levels, order and easing are kept."""
    longer = up().target.stretched(1.5)
    (move,) = longer.moves
    assert (move.duration, move.change, move.order, move.easing) == (4.5 * DAY, 1.5e6, 1.8, 0.3)
    assert np.isclose(longer.end, 1.5 * up().end)

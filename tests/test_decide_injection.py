"""What injection alone cannot do: the fact itself, the size of the back-flow, and every branch of the finding.

The fact is checked on the first decaying mode of an insulated slab, cos(π x/L), rate λ_1 = α π²/L² [CarslawJaeger1959].
"""

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest
from helpers_decide import DAY, HELD, LEAKING, MEDIUM, held, one_move, quadrature, slab, up, up_and_down
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import quad

import flatplan as fp
from flatplan import units
from flatplan.decide import Limits, assess
from flatplan.decide.backflow import back_flow
from flatplan.decide.extremes import extremes

FACT = "In a sealed medium no rate that is never negative lands exactly at rest in finite time."
ALPHA = 40e-3 * 9.869232667160128e-13 / (0.5e-3 * 0.12 * (5e-10 + 4.5e-10))  # k / (φ μ c_t) of the worked layer, 1 D = 1e-12/1.01325 m²
LAMBDA = ALPHA * math.pi**2 / 140.0**2


def flow_of(plan):
    low = extremes(plan, "injection_rate")
    return back_flow(plan, low.least, low.least_at)


def moment(rate, edges):
    """∫ e^(λ_1 (t - end)) Q dt and the same of |Q|; the factor e^(-λ_1 end) keeps it in range."""
    end = edges[-1]
    fine = np.unique(np.concatenate([np.linspace(a, b, 40) for a, b in itertools.pairwise(edges)]))
    weighted = quadrature(lambda t: np.exp(LAMBDA * (t - end)) * rate(t), fine)
    return weighted, quadrature(lambda t: np.exp(LAMBDA * (t - end)) * np.abs(rate(t)), fine)


# --- the fact --------------------------------------------------------------------------------------


@pytest.mark.parametrize(("over", "order", "easing"), [("3 d", 1.8, 0.3), ("20 h", 1.6, 1.0), ("10 h", 1.7, 0.8)])
def test_the_planned_rate_leaves_the_first_mode_at_rest(over, order, easing):
    """∫ e^(λ_1 t) Q dt = 0 for the plan, and its negative part is what makes it so."""
    assert MEDIUM.travel_time == pytest.approx(140.0**2 / ALPHA, rel=1e-12)
    plan = one_move(over, order, easing)
    weighted, size = moment(plan.rate, plan.knots)
    assert abs(weighted) <= 1e-9 * size
    only_up, _ = moment(lambda t: np.maximum(plan.rate(t), 0.0), plan.knots)
    assert only_up > 1e-6 * size


def test_by_scipys_quadrature_too():
    plan = one_move("20 h", 1.6, 1.0)
    end = plan.end
    size, _ = quad(lambda t: math.exp(LAMBDA * (t - end)) * abs(plan.rate(t)[0]), 0.0, end, limit=200, epsabs=0.0, epsrel=1e-4)
    value, _ = quad(lambda t: math.exp(LAMBDA * (t - end)) * plan.rate(t)[0], 0.0, end, limit=200, epsabs=1e-8 * size, epsrel=0.0)
    assert abs(value) <= 2e-8 * size


@given(st.lists(st.floats(0.0, 1e-3), min_size=2, max_size=12).filter(any))
@settings(max_examples=20)
def test_no_rate_that_is_never_negative_does(rates):
    """The moment is positive, and the model driven by it is not at rest at the end: the first mode is e^(-λ_1 t) times it."""
    edges = np.linspace(0.0, 2.0 * DAY, len(rates) + 1)
    steps = fp.Steps(edges=edges, rates=rates)
    weighted = float(np.sum(rates * np.diff(np.exp(LAMBDA * (edges - 2.0 * DAY))))) / LAMBDA
    assert weighted > 0.0
    # amplitude of cos(π x/L): (2/(L S)) cos(π) times the moment; at the target face the pressure still rises by it
    at = np.array([2.0 * DAY, 2.0 * DAY + 4.0 / LAMBDA])
    (p_then, p_later) = fp.simulate(MEDIUM, steps, at).target_pressure
    storage = 6000.0 * 0.12 * (5e-10 + 4.5e-10)
    first = 2.0 / (140.0 * storage) * weighted * (1.0 - math.exp(-4.0))
    assert p_later - p_then >= 0.5 * first > 0.0


# --- how much, and when ----------------------------------------------------------------------------


@pytest.mark.parametrize("plan", [up, up_and_down, lambda: one_move("10 h", 1.6, 1.0), lambda: one_move("20 h", 1.7, 0.5, to="19 MPa")])
def test_back_flow_is_the_negative_part_of_the_rate(plan):
    """Volume by Gauss-Legendre of min(Q, 0), stretch by stretch and on 20,000 panels; peak from dense samples."""
    plan = plan()
    flow = flow_of(plan)
    panels = np.unique(np.append(np.linspace(0.0, plan.end, 20_001), plan.knots))
    volume = -quadrature(lambda t: np.minimum(plan.rate(t), 0.0), panels, nodes=4)
    assert flow.volume == pytest.approx(volume, rel=1e-6)
    by_stretch = -sum(quadrature(plan.rate, np.linspace(a, b, 30)) for a, b in flow.stretches)
    assert flow.volume == pytest.approx(by_stretch, rel=1e-8)
    assert flow.peak == pytest.approx(-plan.rate(panels).min(), rel=1e-5)
    assert -plan.rate(flow.peak_at)[0] == pytest.approx(flow.peak, rel=1e-12)
    inside = np.array([0.5 * (a + b) for a, b in flow.stretches])
    assert np.all(plan.rate(inside) < 0.0)
    ends = np.array(flow.stretches).ravel()
    assert np.all(np.diff(ends) > 0.0)
    assert np.all(np.abs(plan.rate(ends)) <= 1e-6 * flow.peak)
    # nothing negative outside them but noise
    outside = panels[np.searchsorted(ends, panels) % 2 == 0]
    assert plan.rate(outside).min() >= -1e-6 * flow.peak


def test_the_three_longest_stretches_are_named():
    flow = flow_of(one_move("10 h", 1.5, 0.5))
    lengths = sorted((b - a for a, b in flow.stretches), reverse=True)
    assert len(flow.main) == min(3, len(lengths))
    assert sorted((b - a for a, b in flow.main), reverse=True) == lengths[:3]
    assert list(flow.main) == sorted(flow.main)


# --- the branches ----------------------------------------------------------------------------------


def test_upward_fails_and_what_it_says_is_true():
    plan = up()
    finding = assess(plan, Limits(min_rate=0.0))["injection_only"]
    flow = flow_of(plan)
    assert finding.holds is False and finding.limit == 0.0
    assert finding.value == finding.margin == -flow.peak < 0.0 and finding.when == flow.peak_at
    assert finding.reason.startswith(FACT)
    for words in (units.text(flow.volume, "volume"), units.text(flow.peak, "rate"), units.text(flow.peak_at, "time")):
        assert words in finding.reason
    assert "or take 2 times as long, which leaves " in finding.remedy
    longer = flow_of(one_move("6 d"))
    assert f"leaves {units.text(longer.volume, 'volume')}, at most {units.text(longer.peak, 'rate')};" in finding.remedy
    cost = flow.volume / MEDIUM.stored_volume(1.0)
    assert f"settles {units.text(cost, 'pressure')} too high." in finding.remedy


def test_leaving_the_back_flow_out_settles_that_much_too_high():
    """The independent model, driven by the plan's rate without its negative part, long after."""
    plan = one_move("20 h", 1.7, 0.5)
    flow = flow_of(plan)
    edges = np.linspace(0.0, plan.end, 12_001)
    rate = plan.rate(0.5 * (edges[1:] + edges[:-1]))
    late = plan.end + 5.0 * MEDIUM.travel_time
    settled = fp.simulate(MEDIUM, fp.Steps(edges=edges, rates=np.maximum(rate, 0.0)), [late], start="21 MPa").target_pressure[0]
    assert settled - 22.5e6 == pytest.approx(flow.volume / MEDIUM.stored_volume(1.0), rel=1e-5)


def test_allowing_the_back_flow_it_names_is_enough():
    finding = assess(up(), Limits(min_rate=0.0))["injection_only"]
    allowed = finding.remedy.removeprefix("Allow back-flow of ").split(";")[0]
    verdict = assess(up(), Limits(min_rate=f"-{allowed}"))
    assert verdict.realizable and verdict["min_rate"].holds is True and verdict["injection_only"].holds is None
    assert not assess(up(), Limits(min_rate=-0.99 * units.si(allowed, "rate", "allowed"))).realizable


@pytest.mark.parametrize("limits", [Limits(), Limits(min_rate="-3 m^3/h")])
def test_for_information_where_back_flow_is_allowed_or_not_asked_about(limits):
    finding = assess(up(), limits)["injection_only"]
    assert finding.holds is None and finding.remedy == ""
    assert finding.reason.startswith(f"{FACT} This plan lets ") and " flow back, at most " in finding.reason
    assert (finding.margin is None) == (limits.min_rate is None)


def test_negligible_back_flow_holds():
    """One slow bump: the back-flow is there, but far below the plan's own error."""
    plan = one_move("40 d", order=1.5, easing=1.0)
    assert flow_of(plan).stretches == () and flow_of(plan).volume == 0.0
    finding = assess(plan, Limits(min_rate=0.0))["injection_only"]
    assert finding.holds is True and finding.when is None
    assert finding.reason == f"{FACT} The back-flow this plan needs for it is below its own error bound, so it can be left out."
    assert repr(finding).count("-0 ") == 0 and math.copysign(1.0, finding.value) == 1.0
    assert assess(plan, Limits(min_rate=0.0)).realizable
    assert assess(plan)["injection_only"].holds is None


def test_downward_fails_because_fluid_must_come_out():
    plan = one_move("3 d", to="20 MPa")
    finding = assess(plan, Limits(min_rate=0.0))["injection_only"]
    out = units.text(MEDIUM.stored_volume(1e6), "volume")
    assert finding.holds is False
    said = f"The target settles 10 bar below its start: {out} must come out of the ground, which injection alone cannot do."
    assert said in finding.reason
    assert finding.remedy == "Allow back-flow of that size, or let the pressure come down through a medium that leaks."
    assert assess(plan)["injection_only"].holds is None


def test_up_and_back_to_the_start_fails_as_well():
    target = fp.Target(start="21 MPa").move(to="22 MPa", over="3 d").move(to="21 MPa", over="3 d")
    finding = assess(fp.feedforward(MEDIUM, target), Limits(min_rate=0.0))["injection_only"]
    assert finding.holds is False and finding.reason.startswith(FACT)
    cost = flow_of(fp.feedforward(MEDIUM, target)).volume / MEDIUM.stored_volume(1.0)
    assert units.text(cost, "pressure") in finding.remedy and cost == pytest.approx(1e6, rel=1e-2)


@pytest.mark.parametrize("medium", [LEAKING, slab(face=fp.Face(leak="0.02 m^3/h/bar"))])
def test_a_medium_that_leaks_is_not_ruled_out(medium):
    """Up: no back-flow; down: some, and the rate limit itself judges it."""
    said = "The medium leaks or its face does, so injection alone is not ruled out. "
    rising = assess(one_move("10 d", medium=medium, easing=1.0, order=1.6), Limits(min_rate=0.0))
    assert rising["injection_only"].holds is None and rising.realizable
    assert rising["injection_only"].reason == f"{said}This plan needs no back-flow."
    falling = assess(one_move("10 h", to="20 MPa", medium=medium), Limits(min_rate=0.0))
    assert falling["injection_only"].holds is None and falling["min_rate"].holds is False
    assert falling["injection_only"].reason.startswith(f"{said}This plan lets ")


def test_a_held_face_counts_as_leaking():
    assert HELD.leaks
    finding = assess(held(), Limits(min_rate=0.0))["injection_only"]
    assert finding.holds is None and finding.reason.endswith("This plan needs no back-flow.")


def test_a_face_that_only_stores_does_not_leak():
    medium = slab(face=fp.Face(storage="0.3 m^3/bar"))
    finding = assess(one_move("20 h", medium=medium), Limits(min_rate=0.0))["injection_only"]
    assert finding.holds is False and finding.reason.startswith(FACT)

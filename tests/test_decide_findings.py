"""Every finding but injection alone: once as it holds, once as it fails, in sentences that say so."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from helpers_decide import HELD, LEAKING, MEDIUM, WATER, held, one_move, up, up_and_down

import flatplan as fp
from flatplan import units
from flatplan.decide import Limits, assess
from flatplan.decide.extremes import extremes
from flatplan.decide.physical import DEMANDS

NAMES = (
    "gevrey_order",
    "series_error",
    "max_rate",
    "min_rate",
    "max_rate_change",
    "max_bottomhole_pressure",
    "min_bottomhole_pressure",
    "max_pressure_change",
    "max_volume",
    "pressure_anywhere",
    "injection_only",
)
# name -> (sign of the side that is free, channel, derivative, side)
LOOK = {
    "max_rate": (1, "injection_rate", 0, "largest"),
    "min_rate": (-1, "injection_rate", 0, "least"),
    "max_rate_change": (1, "injection_rate", 1, "size"),
    "max_bottomhole_pressure": (1, "bottomhole_pressure", 0, "largest"),
    "min_bottomhole_pressure": (-1, "bottomhole_pressure", 0, "least"),
    "max_pressure_change": (1, "target_pressure", 1, "size"),
    "max_volume": (1, "injected_volume", 0, "largest"),
}


def value_of(plan, name):
    """(value, when) looked up from the extremes; absolute for pressures."""
    _, channel, derivative, side = LOOK[name]
    found = extremes(plan, channel, derivative)
    value, when = found.size if side == "size" else (getattr(found, side), getattr(found, f"{side}_at"))
    return value + (plan.target.rest_pressure if channel == "bottomhole_pressure" else 0.0), when


def test_every_thing_is_judged_once_and_without_limits_nothing_fails():
    verdict = assess(up())
    assert tuple(f.name for f in verdict.findings) == NAMES
    assert verdict.realizable and verdict.failing == ()
    assert {f.name for f in verdict.findings if f.holds is None} == set(NAMES[2:])
    assert all(f.group == ("mathematical" if f.name in NAMES[:2] else "physical") for f in verdict.findings)
    assert {d.name for d in DEMANDS} == set(LOOK)


@pytest.mark.parametrize("name", LOOK)
def test_a_limit_just_kept_and_one_just_broken(name):
    """A thousandth of the spread on either side of the value."""
    plan = up_and_down()
    value, when = value_of(plan, name)
    sign, channel, _, _ = LOOK[name]
    spread = 1e-3 * (plan.certificate.peak["bottomhole_pressure"] if channel == "bottomhole_pressure" else abs(value))
    kept = assess(plan, Limits(**{name: value + sign * spread}))[name]
    assert kept.holds is True and kept.remedy == "" and kept.mark == "ok"
    assert kept.value == pytest.approx(value, rel=1e-12) and kept.when == pytest.approx(when)
    assert kept.margin == pytest.approx(spread, rel=1e-6)
    broken = assess(plan, Limits(**{name: value - sign * spread}))
    finding = broken[name]
    assert finding.holds is False and finding.mark == "fails" and finding in broken.failing and not broken.realizable
    assert finding.margin == pytest.approx(-spread, rel=1e-6)
    assert finding.limit == pytest.approx(value - sign * spread, rel=1e-12)
    assert finding.remedy.endswith(".")
    kept_word, broken_word = ("below", "above") if sign > 0 else ("above", "below")
    assert f" {kept_word} the limit of " in kept.reason and f" {broken_word} the limit of " in finding.reason
    assert units.text(value, finding.kind) in finding.reason and units.text(when, "time") in finding.reason
    assert units.text(spread, finding.kind) in finding.reason


@pytest.mark.parametrize("name", LOOK)
def test_no_limit_is_for_information(name):
    finding = assess(up())[name]
    assert finding.holds is None and finding.limit is None and finding.margin is None and finding.mark == "info"
    assert finding.reason.endswith("; no limit is stated.")


def test_a_limit_equal_to_the_value_holds_within_the_plans_own_error():
    plan = up()
    value, _ = value_of(plan, "max_rate")
    error = plan.certificate.tail["injection_rate"] + plan.certificate.rounding["injection_rate"]
    assert assess(plan, Limits(max_rate=value - 0.9 * error))["max_rate"].holds is True
    assert assess(plan, Limits(max_rate=value - 1.5 * error))["max_rate"].holds is False


# --- mathematical ----------------------------------------------------------------------------------


def test_gevrey_order():
    """Past the threshold of order 2 a plan cannot be made, so the certificate is put there by hand."""
    finding = assess(one_move("3 d", order=1.75, easing=0.5))["gevrey_order"]
    assert finding.holds is True and finding.value == 1.75 and finding.margin == pytest.approx(0.25)
    assert finding.reason == (
        "The largest Gevrey order of the moves is 1.75, below 2: the series converges for every medium and every duration."
    )
    at_two = assess(one_move("3 d", order=2.0))["gevrey_order"]
    assert at_two.holds is True and at_two.margin == 0.0 and at_two.remedy == ""
    assert at_two.reason.startswith("The largest Gevrey order of the moves is 2: the series converges while the travel time is below 2 ")
    plan = replace(up(), certificate=replace(up().certificate, order=2.0, share_of_threshold=1.2))
    verdict = assess(plan)
    assert verdict["gevrey_order"].holds is False and not verdict.realizable
    assert verdict["gevrey_order"].reason == "The largest Gevrey order of the moves is 2, not below 2: the series need not converge."
    assert verdict["gevrey_order"].remedy == "Give every move an order below 2."


def test_series_error():
    """It fails where the terms cancel and the rock varies, so that more digits cannot be had."""
    finding = assess(up())["series_error"]
    certificate = up().certificate
    assert finding.holds is True and certificate.met and finding.limit == 1e-9 and finding.remedy == ""
    worst = max((certificate.tail[c] + certificate.rounding[c]) / certificate.peak[c] for c in certificate.tail)
    assert finding.value == pytest.approx(worst) and 0.0 < finding.margin < 1e-9
    assert f"With {certificate.terms} terms in 16 digits" in finding.reason
    varying = fp.RockProfile(
        permeability=["40 mD", "80 mD", "40 mD"], porosity=0.12, compressibility="5e-10 1/Pa", at=["0 m", "70 m", "140 m"]
    )
    medium = fp.slab(length="140 m", area="6000 m^2", rock=varying, fluid=WATER)
    plan = one_move(medium.travel_time / 8.0, order=1.5, easing=1.0, medium=medium, tolerance=1e-13)
    assert not plan.certificate.met
    verdict = assess(plan)
    assert verdict["series_error"].holds is False and verdict["series_error"].margin < 0.0 and not verdict.realizable
    assert "Take a longer duration or a larger easing" in verdict["series_error"].remedy


# --- pressure anywhere -----------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("to", "medium", "easing"), [("22.5 MPa", MEDIUM, 0.3), ("22.5 MPa", LEAKING, 1.0), ("19 MPa", MEDIUM, 0.3), ("20.5 MPa", MEDIUM, 1.0)]
)
def test_pressure_anywhere_is_the_largest_on_a_dense_map(to, medium, easing):
    """Upward moves: at the sandface. Downward: the start, which nothing exceeds."""
    plan = one_move("30 h", to=to, medium=medium, easing=easing, order=1.6)
    finding = assess(plan)["pressure_anywhere"]
    times = np.linspace(0.0, plan.end, 2001)
    largest = plan.pressure(np.linspace(0.0, 140.0, 29), times).max()
    assert finding.holds is None
    assert finding.value >= largest - 1e-6 and finding.value == pytest.approx(largest, abs=5e-6 * 1.5e6)
    assert finding.when == pytest.approx(times[plan.pressure([140.0], times)[0].argmax()], abs=plan.end / 500)
    assert f"nowhere in the medium exceeds {units.text(finding.value, 'pressure')}," in finding.reason


# --- held face -------------------------------------------------------------------------------------


def test_a_held_face_has_no_pressure_change_to_judge():
    verdict = assess(held())
    assert tuple(f.name for f in verdict.findings) == tuple(n for n in NAMES if n != "max_pressure_change")
    plan = held()
    assert verdict["max_bottomhole_pressure"].value == pytest.approx(
        18e6 + plan.evaluate("bottomhole_pressure", np.linspace(0.0, plan.end, 4001)).max(), rel=1e-7
    )
    assert verdict["min_bottomhole_pressure"].value == 18e6
    with pytest.raises(
        ValueError, match=r"^max_pressure_change: is stated, but the pressure of a held face does not change; leave it out\.$"
    ):
        assess(plan, Limits(max_pressure_change="20 kPa/h"))


@pytest.mark.parametrize("name", ("max_bottomhole_pressure", "min_bottomhole_pressure"))
def test_a_held_face_without_its_pressure_has_no_bottomhole_limit(name):
    plan = fp.feedforward(HELD, fp.Target(start="0 L/s").move(to="0.5 L/s", over="2 d"))
    with pytest.raises(ValueError, match=r'^limits: a bottomhole pressure is limited, .*; give Target\(\.\.\., pressure="21 MPa"\)\.$'):
        assess(plan, Limits(**{name: "20 MPa"}))
    assert assess(plan, Limits(max_rate="3 m^3/h")).realizable
    judged = assess(held(), Limits(**{name: "18.05 MPa"}))[name]
    assert judged.holds is False and judged.limit == pytest.approx(18.05e6)


# --- words and forms -------------------------------------------------------------------------------


def test_sentences_in_field_units():
    limits = Limits(max_rate="300 bbl/day", max_bottomhole_pressure="3250 psi", min_rate=0.0)
    verdict = assess(up(), limits, units="field")
    words = " ".join(f"{f.reason} {f.remedy}" for f in verdict.findings)
    assert "psi" in words and "bbl/d" in words
    assert "bar" not in words and "m³/h" not in words and "MPa" not in words
    assert "the limit of 300 bbl/d" in verdict["max_rate"].reason and "the limit of 3250 psi" in verdict["max_bottomhole_pressure"].reason
    # numbers stay SI whatever the words
    for f, g in zip(verdict.findings, assess(up(), limits).findings, strict=True):
        assert (f.value, f.limit, f.margin, f.holds) == (g.value, g.limit, g.margin, g.holds)
    assert "Pa" in assess(up(), units="SI")["max_bottomhole_pressure"].reason


def test_a_finding_is_asked_for_by_name():
    verdict = assess(up())
    assert verdict["max_rate"] is verdict.findings[2]
    with pytest.raises(KeyError, match=r"no finding 'max_rats'; there are gevrey_order, series_error, max_rate, "):
        verdict["max_rats"]


def test_shown_as_text_and_as_a_table():
    verdict = assess(up(), Limits(max_rate="2 m^3/h", min_rate="-1 m^3/h"))
    text, table = repr(verdict), verdict._repr_html_()
    assert text.startswith("Not realizable: 1 finding fails\n")
    assert assess(up(), Limits(max_rate="2 m^3/h", min_rate=0.0))._title() == "Not realizable: 3 findings fail"
    assert repr(assess(up())).startswith("Realizable\n")
    assert table.count("<tr>") == len(verdict.findings) + 1
    for f in verdict.findings:
        assert f.title in text and f.reason in text and f.title in table
    shown = repr(verdict["max_rate"])
    assert shown.startswith("largest injection rate: fails")
    for words in ("value", "2.858 m³/h", "limit", "2 m³/h", "when", "0.6517 d", "remedy"):
        assert words in shown


def test_html_is_escaped():
    finding = replace(assess(up())["max_rate"], reason="<script>a & b</script>", remedy='"<b>"', title="<i>")
    verdict = replace(assess(up()), findings=(finding,))
    for page in (finding._repr_html_(), verdict._repr_html_()):
        assert "<script>" not in page and "<b>" not in page and "<i>" not in page
        assert "&lt;script&gt;a &amp; b&lt;/script&gt;" in page


@pytest.mark.parametrize(
    ("arguments", "kind", "said"),
    [
        ((1.0,), TypeError, r"^plan: got float; it takes a plan made by feedforward\(\)\.$"),
        ((None, {"max_rate": 1.0}), TypeError, r"^limits: got dict; it takes flatplan Limits\.$"),
    ],
)
def test_wrong_types(arguments, kind, said):
    plan, *rest = arguments
    with pytest.raises(kind, match=said):
        assess(up() if plan is None else plan, *rest)


def test_an_unknown_unit_system():
    with pytest.raises(ValueError, match=r"^units: got 'imperial'; it takes one of 'SI', 'metric', 'field'\.$"):
        assess(up(), units="imperial")


def test_a_verdict_cannot_be_changed():
    verdict = assess(up())
    with pytest.raises(AttributeError):
        verdict.findings = ()
    assert math.isfinite(verdict["max_rate"].value)

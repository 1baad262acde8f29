"""Limits: units, signs, contradictions, and how they are shown."""

from __future__ import annotations

import math

import numpy as np
import pytest

import flatplan as fp
from flatplan.decide import LIMITS, Limits

# exact by definition: barrel 0.158987294928 m³ [NIST811], pound-force per square inch 6894.757293168 Pa [NIST811]
BARREL_PER_DAY = 0.158987294928 / 86400.0
PSI = 6894.757293168361
GOOD = {
    "max_rate": ("300 bbl/day", 300.0 * BARREL_PER_DAY),
    "min_rate": ("-2 m^3/h", -2.0 / 3600.0),
    "max_rate_change": ("0.5 L/s/h", 0.5e-3 / 3600.0),
    "max_bottomhole_pressure": ("3500 psi", 3500.0 * PSI),
    "min_bottomhole_pressure": ("180 bar", 18e6),
    "max_pressure_change": ("20 kPa/h", 20e3 / 3600.0),
    "max_volume": ("140 m^3", 140.0),
}
WRONG = {
    "max_rate": "3 bar",
    "min_rate": "2 d",
    "max_rate_change": "3 m^3/h",
    "max_bottomhole_pressure": "20 kPa/h",
    "min_bottomhole_pressure": "3 m",
    "max_pressure_change": "20 kPa",
    "max_volume": "3 m^3/h",
}


def test_the_examples_cover_every_limit():
    assert set(GOOD) == set(WRONG) == set(LIMITS)


@pytest.mark.parametrize("name", LIMITS)
def test_text_is_converted(name):
    given, si = GOOD[name]
    assert getattr(Limits(**{name: given}), name) == pytest.approx(si, rel=1e-12)
    assert Limits(**{name: given}).stated == {name: getattr(Limits(**{name: given}), name)}


@pytest.mark.parametrize("name", LIMITS)
@pytest.mark.parametrize(("value", "said"), [(math.nan, "which is not finite"), (math.inf, "which is not finite"), (True, "it takes a")])
def test_no_number_is_refused(name, value, said):
    with pytest.raises(ValueError, match=rf"^{name}: got .*{said}.*\.$"):
        Limits(**{name: value})


@pytest.mark.parametrize("name", LIMITS)
def test_another_dimension_is_refused(name):
    with pytest.raises(ValueError, match=rf"^{name}: got '{WRONG[name].replace('^', '.')}', which is not a .*; it takes a .*\.$"):
        Limits(**{name: WRONG[name]})


@pytest.mark.parametrize("name", [n for n, (_, sign, _) in LIMITS.items() if sign == "positive"])
@pytest.mark.parametrize("value", [0.0, -1.0])
def test_what_must_be_above_zero(name, value):
    with pytest.raises(ValueError, match=rf"^{name}: got {value}; it must be above zero\.$"):
        Limits(**{name: value})


def test_limits_that_contradict_each_other():
    with pytest.raises(ValueError, match=r"^min_rate: got 3 m³/h, which is not below max_rate \(2 m³/h\); nothing could satisfy both\.$"):
        Limits(min_rate="3 m^3/h", max_rate="2 m^3/h")
    said = r"^min_bottomhole_pressure: got 240 bar, which is not below max_bottomhole_pressure \(240 bar\); nothing could satisfy both\.$"
    with pytest.raises(ValueError, match=said):
        Limits(min_bottomhole_pressure="240 bar", max_bottomhole_pressure="24 MPa")


def test_an_unknown_limit_is_refused():
    with pytest.raises(TypeError, match="max_rates"):
        Limits(max_rates="3 m^3/h")


def test_shown_with_words_and_units():
    shown = repr(Limits(max_rate="3 m^3/h", max_bottomhole_pressure="24 MPa"))
    assert "largest injection rate" in shown and "3 m³/h" in shown and "240 bar" in shown
    assert "back-flow" not in shown
    assert "nothing is limited" in repr(Limits())


def test_limits_cannot_be_changed():
    limits = Limits(max_rate="3 m^3/h")
    with pytest.raises(AttributeError):
        limits.max_rate = 1.0
    assert limits == Limits(max_rate=3.0 / 3600.0) != Limits()
    assert fp.Limits is Limits
    assert np.isfinite(limits.max_rate)

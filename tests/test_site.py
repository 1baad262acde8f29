"""Floor 1: what ground and well are refused, and what follows from them before any series."""

from __future__ import annotations

import dataclasses
import math
import pickle
import re

import numpy as np
import pint
import pytest
from hypothesis import given
from hypothesis import strategies as st

from flatplan.site import ConfiningBed, Equilibrium, Face, Fluid, Medium, Rock, Segment, Well, slab
from flatplan.site.properties import total_compressibility

ROCK = {"permeability": 4e-14, "porosity": 0.12, "compressibility": 5e-10}
FLUID = {"viscosity": 5e-4, "compressibility": 4.5e-10}
WELL = {"skin": 0.0, "storage": 0.0, "resistance": 0.0}
FACE = {"leak": 0.0, "storage": 0.0}
BED = {"permeability": 1e-18, "thickness": 5.0, "height": 10.0}
SLAB = {"length": 140.0, "area": 6000.0}


def make_slab(**changes):
    return slab(**{**SLAB, "rock": Rock(**ROCK), "fluid": Fluid(**FLUID), **changes})


# (maker, its valid inputs, an input, the name in the sentence, values out of range, words for the range)
PROPERTIES = [
    (Rock, ROCK, "permeability", "permeability", [0, -1e-14, "-3 mD", "0 D"], "above zero"),
    (Rock, ROCK, "compressibility", "rock compressibility", [-1e-12, "-1 1/Pa"], "zero or more"),
    (Fluid, FLUID, "viscosity", "viscosity", [0, -5e-4, "0 cP"], "above zero"),
    (Fluid, FLUID, "compressibility", "fluid compressibility", [-1e-12], "zero or more"),
    (Well, WELL, "storage", "wellbore storage", [-1e-9, "-1 m^3/bar"], "zero or more"),
    (Well, WELL, "resistance", "well resistance", [-1.0], "zero or more"),
    (Face, FACE, "leak", "leak", [-1e-12], "zero or more"),
    (Face, FACE, "storage", "face storage", [-1e-9], "zero or more"),
    (ConfiningBed, BED, "permeability", "confining permeability", [0, -1e-18], "above zero"),
    (ConfiningBed, BED, "thickness", "confining thickness", [0.0, "-5 m"], "above zero"),
    (ConfiningBed, BED, "height", "layer height", [0.0, "-5 ft"], "above zero"),
    (make_slab, {}, "length", "length", [0, -1, "0 m", "-140 m"], "above zero"),
    (make_slab, {}, "area", "area", [0, "-6000 m^2"], "above zero"),
    (make_slab, {}, "leakage", "leakage", [-1e-17], "zero or more"),
]
CASES = [f"{row[0].__name__}-{row[2]}" for row in PROPERTIES]


@pytest.mark.parametrize(("maker", "valid", "given_as", "name", "outside", "words"), PROPERTIES, ids=CASES)
def test_a_value_of_the_wrong_sign_is_refused(maker, valid, given_as, name, outside, words):
    for value in outside:
        with pytest.raises(ValueError, match=f"^{name}: got {re.escape(repr(value))}; it must be {words}\\.$"):
            maker(**{**valid, given_as: value})


@pytest.mark.parametrize(("maker", "valid", "given_as", "name", "outside", "words"), PROPERTIES, ids=CASES)
def test_what_is_no_number_of_that_kind_is_refused(maker, valid, given_as, name, outside, words):
    for value in (float("nan"), np.inf, "3 kg", "4 apples", "17", "", None, True, [1.0], pint.UnitRegistry().Quantity(1.0, "K")):
        with pytest.raises(ValueError, match=f"^{name}: got .*it takes a") as caught:
            maker(**{**valid, given_as: value})
        assert "\n" not in str(caught.value)


@pytest.mark.parametrize("value", [0.0, 1.0, -0.1, 1.5, 12, "0 %", "100 %", "12", "120 %", np.nextafter(1.0, 2.0)])
def test_porosity_lies_strictly_between_0_and_1(value):
    with pytest.raises(ValueError, match=r"^porosity: got .+; it takes a fraction strictly between 0 and 1\.$"):
        Rock(**{**ROCK, "porosity": value})


@pytest.mark.parametrize("value", [float("nan"), -np.inf, "12 m", "12 deg", "a tenth", None, True, [0.1]])
def test_porosity_is_a_fraction(value):
    with pytest.raises(ValueError, match=r"^porosity: got .+; it takes a fraction such as \"0\.12\", or a number\.$"):
        Rock(**{**ROCK, "porosity": value})


@pytest.mark.parametrize("value", [0.12, "0.12", "12 %", "12%", np.float64(0.12), np.nextafter(1.0, 0.0), 5e-324])
def test_porosity_is_taken_as_a_fraction_or_percent(value):
    assert 0.0 < Rock(**{**ROCK, "porosity": value}).porosity < 1.0


def test_rock_and_fluid_cannot_both_be_incompressible():
    stiff_rock, stiff_fluid = Rock(**{**ROCK, "compressibility": 0}), Fluid(**{**FLUID, "compressibility": 0})
    assert total_compressibility(stiff_rock, Fluid(**FLUID)) == 4.5e-10
    assert total_compressibility(Rock(**ROCK), stiff_fluid) == 5e-10
    with pytest.raises(ValueError, match="^compressibility: rock and fluid are both 0; at least one must be above zero.$"):
        make_slab(rock=stiff_rock, fluid=stiff_fluid)


def test_a_skin_may_be_negative_but_not_without_a_number():
    assert Well(skin=-2).skin == -2.0
    with pytest.raises(ValueError, match="^skin: got .*, which is not a fraction"):
        Well(skin="2 m")


# --- faces and wells -------------------------------------------------------------------------------


def test_faces():
    assert Face().sealed
    assert not Face(leak=1e-12).sealed
    assert not Face(storage=1e-9).sealed
    assert not Face(held=True).sealed
    for extra in ({"leak": 1e-12}, {"storage": 1e-9}):
        with pytest.raises(ValueError, match="^held: a face held at its pressure cannot also have leak or storage.$"):
            Face(held=True, **extra)
    for value in (1, 0, "yes", None, np.True_):
        with pytest.raises(ValueError, match="^held: got .+; it takes true or false.$"):
            Face(held=value)
    assert "no flow, no storage" in repr(Face())
    assert "at its starting pressure" in repr(Face(held=True))
    assert "leak" in repr(Face(leak=1e-12))


def test_a_confining_bed_leaks_by_darcys_law():
    """Λ/A = k' / (μ b' h), with k' 0.01 mD through 5 m above a layer of 10 m, water of 0.5 cP [HantushJacob1955]."""
    bed = ConfiningBed(permeability="0.01 mD", thickness="5 m", height="10 m")
    assert bed.leakage(5e-4) == pytest.approx(9.86923266716e-18 / (5e-4 * 5.0 * 10.0), rel=1e-12, abs=0.0)
    assert make_slab(leakage=bed).segments[0].leakage == bed.leakage(5e-4)
    assert make_slab(leakage="1e-17 1/(Pa s)").segments[0].leakage == 1e-17


def test_skin_becomes_a_resistance_through_the_height():
    """R = skin μ / (2π k h) [vanEverdingen1953], and what is stated comes on top."""
    medium = make_slab(well=Well(skin=3, resistance=1e8), height="20 m")
    assert medium.well_resistance == pytest.approx(1e8 + 3 * 5e-4 / (2 * math.pi * 4e-14 * 20), rel=1e-14, abs=0.0)
    assert make_slab(well=Well(resistance=1e8)).well_resistance == 1e8
    assert make_slab().well_resistance == 0.0
    with pytest.raises(ValueError, match="^height: got none; a skin factor in linear flow needs the height of the layer"):
        make_slab(well=Well(skin=3))
    with pytest.raises(ValueError, match="^height: got 0; it must be above zero.$"):
        make_slab(well=Well(skin=3), height=0)


# --- the slab --------------------------------------------------------------------------------------


@pytest.mark.parametrize(("name", "takes"), [("rock", "Rock or RockProfile"), ("fluid", "Fluid"), ("face", "Face"), ("well", "Well")])
def test_a_slab_takes_records(name, takes):
    for value in ("40 mD", 3.0, {"a": 1}, Segment):
        with pytest.raises(TypeError, match=f"^{name}: got {type(value).__name__}; it takes a flatplan {takes}.$"):
            make_slab(**{name: value})


def test_a_slab_takes_keywords_only_and_none_it_does_not_know():
    with pytest.raises(TypeError, match="positional"):
        slab(140.0, 6000.0, Rock(**ROCK), Fluid(**FLUID))
    with pytest.raises(TypeError, match="lenght"):
        make_slab(lenght=140.0)


positive = st.floats(min_value=1e-3, max_value=1e3)


@given(length=positive, area=positive, mobility=positive, porosity=st.floats(min_value=0.01, max_value=0.99), stiff=positive)
def test_travel_time_and_coefficients_of_a_slab(length, area, mobility, porosity, stiff):
    """t_D = L²/α with α = k/(φ μ c_t); S = A φ c_t and T = A k/μ anywhere along the path."""
    rock = Rock(permeability=mobility * 1e-14, porosity=porosity, compressibility=stiff * 1e-10)
    fluid = Fluid(viscosity=1e-3, compressibility=4e-10)
    medium = slab(length=length, area=area, rock=rock, fluid=fluid)
    stored = porosity * (stiff * 1e-10 + 4e-10)
    assert medium.travel_time == pytest.approx(length**2 * stored / (mobility * 1e-11), rel=1e-14, abs=0.0)
    assert type(medium.travel_time) is float
    assert medium.length == length
    segment = medium.segment_at(length / 2)
    x = np.array([0.0, length / 3, length])
    assert segment.area(x) == pytest.approx([area] * 3, rel=1e-15)
    assert segment.storage(x) == pytest.approx([area * stored] * 3, rel=1e-14, abs=0.0)
    assert segment.conductance(x) == pytest.approx([area * mobility * 1e-11] * 3, rel=1e-14, abs=0.0)
    assert segment.leak(x).tolist() == [0.0, 0.0, 0.0]
    assert segment.volume == pytest.approx(length * area, rel=1e-15)
    assert not medium.leaks


def test_the_units_it_is_stated_in_do_not_matter(medium):
    """The worked layer in field units: 459.3 ft, 64583 ft², 0.5 cP, compressibilities per psi."""
    other = slab(
        length=f"{140 / 0.3048!r} ft",
        area=f"{6000 / 0.3048**2!r} ft^2",
        rock=Rock(permeability="0.04 darcy", porosity="12 %", compressibility=f"{5e-10 * 6894.757293168!r} 1/psi"),
        fluid=Fluid(viscosity="5e-4 Pa s", compressibility=f"{4.5e-10 * 1e5!r} 1/bar"),
    )
    assert other.travel_time == pytest.approx(medium.travel_time, rel=1e-12, abs=0.0)
    assert medium.travel_time == pytest.approx(140.0**2 * 0.12 * 5e-4 * 9.5e-10 / (40 * 9.86923266716e-16), rel=1e-11, abs=0.0)


def test_which_media_leak():
    assert make_slab(leakage=1e-17).leaks
    assert make_slab(face=Face(leak=1e-12)).leaks
    assert make_slab(face=Face(held=True)).leaks
    assert not make_slab(face=Face(storage=1e-9), well=Well(storage=1e-8)).leaks


def test_positions_lie_on_the_path(medium):
    assert medium.positions(["0 m", "140 m", 70.0]).tolist() == [0.0, 140.0, 70.0]
    assert medium.positions("70 m").tolist() == [70.0]
    for outside in (-1e-9, "140.001 m", [1.0, -3.0]):
        with pytest.raises(ValueError, match=r"^x: got .+ m; the path runs from 0 \(target face\) to 140 m \(sandface\)\.$"):
            medium.positions(outside)
    with pytest.raises(ValueError, match="^where: got '3 s', which is not a length"):
        medium.positions("3 s", "where")


def test_zones_join(medium):
    first, apart = medium.segments[0], dataclasses.replace(medium.segments[0], start=141.0, end=200.0)
    joined = dataclasses.replace(first, start=140.0, end=200.0)
    longer = Medium("linear", (first, joined))
    assert longer.length == 200.0
    assert longer.segment_at(140.0) is first
    assert longer.segment_at(140.1) is joined
    assert "2 zones" in repr(longer)
    with pytest.raises(ValueError, match="^zones: one ends at 140 m and the next starts at 141 m; they must join.$"):
        Medium("linear", (first, apart))
    with pytest.raises(ValueError, match="^flow: got 'curved'; it takes one of 'linear', 'radial', 'spherical'.$"):
        Medium("curved", (first,))


def test_segments_of_radial_and_spherical_paths():
    """Areas 2πrh and 4πr² and the volumes between two radii, whichever way the path runs."""
    for direction, origin in ((1.0, 2.0), (-1.0, 7.0)):
        ring = Segment(0.0, 5.0, 1.0, 1.0, 2 * math.pi * 3.0, power=1, origin=origin, direction=direction)
        ball = Segment(0.0, 5.0, 1.0, 1.0, 4 * math.pi, power=2, origin=origin, direction=direction)
        x = np.array([0.0, 2.5, 5.0])
        radius = origin + direction * x
        assert ring.area(x) == pytest.approx(2 * math.pi * 3.0 * radius, rel=1e-15)
        assert ball.area(x) == pytest.approx(4 * math.pi * radius**2, rel=1e-15)
        assert ring.volume == pytest.approx(math.pi * 3.0 * (49.0 - 4.0), rel=1e-15)
        assert ball.volume == pytest.approx(4 / 3 * math.pi * (343.0 - 8.0), rel=1e-15)


# --- records ---------------------------------------------------------------------------------------


def test_records_are_frozen_values(rock, fluid, medium):
    for record in (rock, fluid, medium, Face(), Well(), ConfiningBed(**BED)):
        with pytest.raises(dataclasses.FrozenInstanceError, match="cannot"):
            setattr(record, dataclasses.fields(record)[0].name, 1.0)
        assert pickle.loads(pickle.dumps(record)) == record
        assert hash(record) == hash(pickle.loads(pickle.dumps(record)))
    assert dataclasses.replace(rock, porosity="20 %") == Rock("40 mD", 0.2, "5e-10 1/Pa")
    with pytest.raises(ValueError, match="^porosity: got 2;"):
        dataclasses.replace(rock, porosity=2)


def test_an_equilibrium_shows_its_numbers():
    words = repr(Equilibrium(change=1.5e6, rate=0.0, bottomhole_change=1.5e6, stored_volume=2.0))
    assert "15 bar" in words
    assert "2 m³" in words

"""Constructors of every medium: what they refuse, when two of them are the same, and what steady states and volumes they give."""

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest
from media import BED, LOOSE, ROCK, TIGHT, WATER, medium
from scipy.special import i0, i1, k0, k1

import flatplan as fp

RADIAL = {"target_radius": 150.0, "well_radius": 0.1, "height": 20.0, "rock": ROCK, "fluid": WATER}
SPHERE = {"target_radius": 90.0, "well_radius": 1.5, "rock": ROCK, "fluid": WATER}
PROFILE = {"permeability": [1e-14, 2e-14, 3e-14], "porosity": 0.1, "compressibility": 1e-10, "at": [0.0, 60.0, 120.0]}


def radial(**changes):
    return fp.radial(**{**RADIAL, **changes})


def sphere(**changes):
    return fp.spherical(**{**SPHERE, **changes})


def zone(**given):
    return fp.Zone(**{"rock": ROCK, "fluid": WATER, **given})


def rings(*ends, **changes):
    return fp.zoned([zone(to_radius=r) for r in ends], **{"flow": "radial", "target_radius": 150.0, "height": 20.0, **changes})


def profile(**changes):
    return fp.RockProfile(**{**PROFILE, **changes})


def slab(rock=ROCK, **rest):
    return fp.slab(**{"length": 120.0, "area": 5000.0, "rock": rock, "fluid": WATER, **rest})


# --- what is refused -----------------------------------------------------------------------------

REFUSED = {
    "equal radii": (
        lambda: radial(well_radius="150 m"),
        "well_radius: got '150 m', the same as target_radius; the medium lies between two",
    ),
    "equal radii of a sphere": (lambda: sphere(well_radius=90.0), "well_radius: got 90.0, the same as target_radius"),
    "radius below zero": (lambda: radial(well_radius=-1), "well_radius: got -1; it must be above zero"),
    "radius of zero": (lambda: sphere(target_radius="0 m"), "target_radius: got '0 m'; it must be above zero"),
    "no height": (lambda: radial(height=0), "height: got 0; it must be above zero"),
    "height missing": (lambda: rings(60.0, height=None), "height: is missing; radial flow needs the height of the layer"),
    "leakage below zero": (lambda: radial(leakage=-1e-17), "leakage: got -1e-17; it must be zero or more"),
    "leakage of a zone below zero": (lambda: zone(to_radius=3.0, leakage=-1.0), "leakage: got -1.0; it must be zero or more"),
    "bed without thickness": (lambda: fp.ConfiningBed(1e-18, 0.0, 10.0), "confining thickness: got 0.0; it must be above zero"),
    "radii that turn": (lambda: rings(60.0, 80.0), "zones[1]: to_radius is 80 m after 60 m; radii go one way"),
    "radii that turn outwards": (lambda: rings(160.0, 140.0), "zones[1]: to_radius is 140 m after 160 m; radii go one way"),
    "radius repeated": (lambda: rings(60.0, 60.0), "zones[1]: to_radius is 60 m after 60 m; radii go one way"),
    "zone ends at the target": (lambda: rings(150.0), "zones[0]: to_radius is 150 m after 150 m"),
    "no zones": (lambda: rings(), "zones: got an empty list; it takes at least one Zone"),
    "target radius missing": (lambda: rings(60.0, target_radius=None), "target_radius: is missing; radial zones start there"),
    "target radius of a line": (
        lambda: fp.zoned([zone(length=1.0, area=1.0)], target_radius=3.0),
        "target_radius: is for radial and spherical flow",
    ),
    "both extents": (lambda: zone(to_radius=3.0, length=3.0), "to_radius: stands alone; length and area are for linear flow"),
    "zone without length": (lambda: zone(length=0, area=1.0), "length: got 0; it must be above zero"),
    "linear zone without area": (lambda: fp.zoned([zone(length=1.0)]), "zones[0]: linear flow needs length and area"),
    "linear extent in a ring": (
        lambda: fp.zoned([zone(length=1.0, area=1.0)], flow="radial", target_radius=3.0, height=1.0),
        "zones[0]: radial and spherical flow need to_radius",
    ),
    "unknown flow": (lambda: rings(60.0, flow="curved"), "flow: got 'curved'; it takes one of 'linear', 'radial', 'spherical'"),
    "height of a sphere": (lambda: rings(60.0, flow="spherical"), "height: is for radial flow; spherical flow takes share="),
    "no share": (lambda: sphere(share=0), "share: got 0; it takes a share of the full sphere above 0 and up to 1"),
    "share above one": (lambda: sphere(share=1.1), "share: got 1.1; it takes a share of the full sphere above 0 and up to 1"),
    "share of a ring": (lambda: rings(60.0, share=0.5), "share: is for spherical flow; radial flow takes height"),
    "held face with leak": (lambda: radial(face=fp.Face(held=True, leak=1e-12)), "held: a face held at its pressure cannot also have leak"),
    "negative skin with storage": (
        lambda: radial(well=fp.Well(skin=-2, storage=1e-7)),
        "skin: got -2 with wellbore storage; with a resistance below zero",
    ),
    "skin without height": (lambda: slab(well=fp.Well(skin=2)), "height: got none; a skin factor in linear flow needs the height"),
    "places repeated": (lambda: profile(at=[0, 60, 60]), "at: the places must strictly increase"),
    "places turned round": (lambda: profile(at=[0, 70, 60]), "at: the places must strictly increase"),
    "places missing": (lambda: profile(at=None), "at: is missing; samples of permeability need the places they were taken at"),
    "too few samples": (lambda: profile(porosity=[0.1, 0.2]), "porosity: got 2 samples for 3 places; it takes one for each"),
    "too many samples": (lambda: profile(at=[0, 120]), "permeability: got 3 samples for 2 places; it takes one for each"),
    "too many places": (lambda: profile(at=np.linspace(0.0, 120.0, 66)), "at: got 66 places; it takes 2 to 65"),
    "porosity of one": (lambda: profile(porosity=1.0), "porosity: got 1; it takes fractions strictly between 0 and 1"),
    "a porosity of zero": (lambda: profile(porosity=[0.1, 0, 0.2]), "porosity: got 0; it takes fractions strictly between 0 and 1"),
    "permeability of zero": (lambda: profile(permeability=[1e-14, 0, 1e-14]), "permeability: got 0; every sample must be above zero"),
    "a sample that is no number": (lambda: profile(permeability=[1e-14, math.nan, 1e-14]), "permeability: got nan at position 1"),
    "places that end early": (lambda: slab(profile(at=[0, 60, 110])), "at: runs from 0 m to 110 m; it takes places from 0 to the full"),
    "places that start late": (lambda: slab(profile(at=[1, 60, 120])), "at: runs from 1 m to 120 m; it takes places from 0 to the full"),
    "function of another shape": (
        lambda: slab(profile(permeability=lambda x: x[:2], at=None)),
        "permeability: the function must give one value for each of 33 places; it gave shape (2,)",
    ),
    "function that gives nan": (
        lambda: slab(profile(permeability=lambda x: x * math.nan, at=None)),
        "permeability: the function gave nan at 0 m; every permeability must be finite",
    ),
    "function that gives text": (
        lambda: slab(profile(permeability=lambda x: "40 mD", at=None)),
        "permeability: the function must give numbers; it gave '40 mD'",
    ),
    "function that gives complex numbers": (
        lambda: slab(profile(permeability=lambda x: (1e-14 + 1j) * x, at=None)),
        "permeability: the function must give numbers",
    ),
    "function below zero": (
        lambda: slab(profile(permeability=lambda x: 1e-14 - 1e-15 * x, at=None)),
        "permeability: got -1.25e-15 m² at 11.25 m; it must be above zero everywhere",
    ),
    "porosity function out of range": (
        lambda: slab(profile(permeability=lambda x: 1e-14, porosity=lambda x: 2.0, at=None)),
        "porosity: got 2; it takes fractions strictly between 0 and 1",
    ),
}


@pytest.mark.parametrize("name", REFUSED)
def test_what_is_refused_and_in_which_words(name):
    make, words = REFUSED[name]
    with pytest.raises(ValueError) as caught:
        make()
    sentence = str(caught.value)
    assert sentence.startswith(words)
    assert sentence.endswith(".") and "\n" not in sentence


@pytest.mark.parametrize(
    ("make", "name"), [(lambda v: rings(well=v), "zones"), (lambda v: fp.zoned(v), "zones"), (lambda v: fp.zoned([v]), r"zones\[0\]")]
)
def test_zones_are_a_list_of_zones(make, name):
    with pytest.raises((TypeError, ValueError), match=f"^{name}: got "):
        make(3)


# --- the same medium, told differently -----------------------------------------------------------


def same(one, two, orders=20, rel=1e-12):
    assert one.travel_time == pytest.approx(two.travel_time, rel=rel, abs=0.0)
    assert one.well_resistance == pytest.approx(two.well_resistance, rel=1e-14, abs=0.0)
    for channel in ("sandface_pressure", "injection_rate", "stored_volume"):
        np.testing.assert_allclose(
            one.coefficients(channel, orders), two.coefficients(channel, orders), rtol=rel, atol=0.0, err_msg=channel
        )


WELL = fp.Well(skin=3, storage=2e-7)
FACE = fp.Face(leak=2e-10, storage=1e-6)
KINDS = {
    "linear": (
        lambda **rest: slab(height=20.0, **rest),
        lambda cut, **rest: fp.zoned([zone(length=x, area=5000.0, leakage=BED) for x in cut(0.0, 120.0, 1)], height=20.0, **rest),
    ),
    "radial": (
        radial,
        lambda cut, **rest: fp.zoned(
            [zone(to_radius=r, leakage=BED) for r in cut(150.0, 0.1, 0)], flow="radial", target_radius=150.0, height=20.0, **rest
        ),
    ),
    "spherical": (
        lambda **rest: sphere(share=0.5, **rest),
        lambda cut, **rest: fp.zoned(
            [zone(to_radius=r, leakage=BED) for r in cut(90.0, 1.5, 0)], flow="spherical", target_radius=90.0, share=0.5, **rest
        ),
    ),
}


@pytest.mark.parametrize("flow", KINDS)
def test_one_zone_is_the_medium_of_its_own_constructor(flow):
    single, chain = KINDS[flow]
    one = chain(lambda start, end, lengths: [end], face=FACE, well=WELL)
    two = single(leakage=BED, face=FACE, well=WELL)
    assert one == two
    same(one, two)


@pytest.mark.parametrize("flow", KINDS)
def test_two_equal_zones_are_one(flow):
    single, chain = KINDS[flow]

    def cut(start, end, lengths):
        return [0.3 * (end - start), 0.7 * (end - start)] if lengths else [start + 0.6 * (end - start), end]

    same(chain(cut, face=FACE, well=WELL), single(leakage=BED, face=FACE, well=WELL))


def constant(length):
    return fp.RockProfile(
        permeability=[ROCK.permeability] * 4, porosity=0.12, compressibility=5e-10, at=np.array([0.0, 0.2, 0.7, 1.0]) * length
    )


def test_a_profile_that_does_not_vary_is_a_uniform_rock():
    same(slab(constant(120.0), leakage=BED, height=20.0, well=WELL), slab(leakage=BED, height=20.0, well=WELL))
    same(radial(rock=constant(149.9), face=FACE, well=WELL), radial(face=FACE, well=WELL))
    same(sphere(rock=constant(88.5), face=fp.Face(held=True)), sphere(face=fp.Face(held=True)))


def test_a_function_is_its_own_samples():
    """In linear flow at 33 even places; in radial flow at 33 places even in the logarithm of the radius."""

    def permeability(x):
        return 4e-14 * np.exp(np.sin(x / 30.0))

    def porosity(x):
        return 0.1 + 0.0004 * x

    told = fp.RockProfile(permeability=permeability, porosity=porosity, compressibility=5e-10)
    for places, make in (
        (np.linspace(0.0, 120.0, 33), slab),
        (150.0 - np.geomspace(150.0, 0.1, 33), lambda rock: radial(rock=rock)),
    ):
        places[0] = 0.0
        sampled = fp.RockProfile(permeability=permeability(places), porosity=porosity(places), compressibility=5e-10, at=places)
        same(make(told), make(sampled), rel=1e-11)


def test_profiles_are_values():
    assert profile() == profile() and hash(profile()) == hash(profile())
    assert profile() != profile(porosity=0.11)
    assert profile() != ROCK
    assert zone(rock=profile(), length=120.0, area=1.0) == zone(rock=profile(), length=120.0, area=1.0)


# --- skin and leakage ----------------------------------------------------------------------------


def test_a_skin_is_taken_in_the_rock_next_to_the_well():
    """R = s μ/(2π k h) with the permeability of the last zone [vanEverdingen1953]; spherical: s μ/(4π share k r_w)."""
    zones = [fp.Zone(to_radius=r, rock=k, fluid=WATER) for r, k in ((60.0, TIGHT), (0.1, LOOSE))]
    made = fp.zoned(zones, flow="radial", target_radius=150.0, height=20.0, well=fp.Well(skin=4, resistance=1e7))
    assert made.well_resistance == pytest.approx(1e7 + 4.0 * 5e-4 / (2.0 * math.pi * LOOSE.permeability * 20.0), rel=1e-14)
    ball = sphere(share=0.5, well=fp.Well(skin=4))
    assert ball.well_resistance == pytest.approx(4.0 * 5e-4 / (4.0 * math.pi * 0.5 * ROCK.permeability * 1.5), rel=1e-14)
    rising = profile(at=[0.0, 60.0, 149.9])
    assert radial(rock=rising, well=fp.Well(skin=4)).well_resistance == pytest.approx(
        4.0 * 5e-4 / (2.0 * math.pi * 3e-14 * 20.0), rel=1e-12
    )


def test_a_negative_skin_without_storage_is_taken():
    assert radial(well=fp.Well(skin=-2)).well_resistance < 0.0


@pytest.mark.parametrize("make", [lambda **k: slab(**k), lambda **k: radial(**k), lambda **k: fp.zoned([zone(length=9.0, area=2.0, **k)])])
def test_a_confining_bed_leaks_by_its_own_height(make):
    """Λ/A = k'/(μ b' h) [HantushJacob1955], k' = 0.002 mD, b' = 4 m, h = 20 m."""
    (segment,) = make(leakage=BED).segments
    assert segment.leakage == pytest.approx(0.002 * 9.869232667160128e-16 / (5e-4 * 4.0 * 20.0), rel=1e-12, abs=0.0)


# --- steady states -------------------------------------------------------------------------------

STEADY = 1.5e6  # Pa at the target face


def q_of(leakage):
    """sqrt(Λ/T) [1/m]."""
    return math.sqrt(leakage / (ROCK.permeability / 5e-4))


@pytest.mark.parametrize("leakage", [1e-17, 1e-15, 3e-14, 5e-13])
def test_a_leaky_slab_needs_t_q_tanh_over_its_height(leakage):
    """Sealed at x = 0: p = p_0 cosh qx, F(L) = T q p_0 sinh qL [CarslawJaeger1959]; per sandface pressure T q tanh qL."""
    made = slab(leakage=leakage)
    q, trans = q_of(leakage), 5000.0 * ROCK.permeability / 5e-4
    found = made.equilibrium(STEADY)
    assert found.rate == pytest.approx(STEADY * trans * q * math.sinh(120.0 * q), rel=1e-12)
    assert found.bottomhole_change == pytest.approx(STEADY * math.cosh(120.0 * q), rel=1e-12)
    assert found.rate / found.bottomhole_change == pytest.approx(trans * q * math.tanh(120.0 * q), rel=1e-12)
    assert found.stored_volume == pytest.approx(STEADY * 5000.0 * 0.12 * 9.5e-10 * math.sinh(120.0 * q) / q, rel=1e-12)


@pytest.mark.parametrize(("target", "well"), [(150.0, 0.1), (12.0, 150.0)])
@pytest.mark.parametrize("leakage", [1e-16, 3e-14])
def test_a_leaky_ring_settles_on_modified_bessel_functions(target, well, leakage):
    """p = p_0 q r_t (K_1(q r_t) I_0(q r) + I_1(q r_t) K_0(q r)), sealed at the target radius r_t [CarslawJaeger1959]."""
    made = radial(target_radius=target, well_radius=well, leakage=leakage)
    q, trans = q_of(leakage), 2.0 * math.pi * 20.0 * ROCK.permeability / 5e-4
    a, r = q * target, q * well
    found = made.equilibrium(STEADY)
    assert found.bottomhole_change == pytest.approx(STEADY * a * (k1(a) * i0(r) + i1(a) * k0(r)), rel=1e-11)
    sign = 1.0 if well > target else -1.0
    assert found.rate == pytest.approx(sign * STEADY * trans * r * a * (k1(a) * i1(r) - i1(a) * k1(r)), rel=1e-10)


def test_what_neither_leaks_nor_is_held_needs_no_rate():
    for geometry in ("slab", "zoned radial", "varying rock"):
        made = medium(geometry, "storing", "storage")
        found = made.equilibrium(STEADY)
        assert found.rate == 0.0 and found.bottomhole_change == pytest.approx(STEADY, rel=1e-14)


def test_a_leaking_face_passes_the_steady_rate():
    """F = κ p_0 everywhere; in radial flow the well is κ p_0 ln(r_t/r_w)/(2π h k/μ) above it."""
    made = radial(face=fp.Face(leak=2e-10))
    found = made.equilibrium(STEADY)
    assert found.rate == pytest.approx(2e-10 * STEADY, rel=1e-13)
    drop = 2e-10 * STEADY * math.log(1500.0) / (2.0 * math.pi * 20.0 * ROCK.permeability / 5e-4)
    assert found.bottomhole_change == pytest.approx(STEADY + drop, rel=1e-13)


# --- volumes -------------------------------------------------------------------------------------


def path_quadrature(made, degree=16, pieces=12):
    """Places and weights over the path, each zone in pieces even in the logarithm of the radius (or the length)."""
    nodes, weights = np.polynomial.legendre.leggauss(degree)
    x, w, owner = [], [], []
    for i, segment in enumerate(made.segments):
        a, b = segment.radius(segment.start), segment.radius(segment.end)
        edges = np.geomspace(a, b, pieces + 1) if segment.power else np.linspace(segment.start, segment.end, pieces + 1)
        edges = np.abs(edges - segment.origin) if segment.power else edges
        edges[0], edges[-1] = segment.start, segment.end
        for lo, hi in itertools.pairwise(edges):
            x.extend(0.5 * (lo + hi) + 0.5 * (hi - lo) * nodes)
            w.extend(0.5 * (hi - lo) * weights)
            owner.extend([i] * degree)
    return np.array(x), np.array(w), np.array(owner)


@pytest.mark.parametrize(
    ("geometry", "face"),
    [
        ("slab", "leaky"),
        ("radial inward", "storing"),
        ("radial outward", "leaky and storing"),
        ("zoned radial", "leaky"),
        ("varying rock", "leaky"),
    ],
)
def test_injected_is_stored_and_leaked(geometry, face):
    """Stored = ∫ S p dx + C_f p(0) + C_w p_w; leaked = ∫∫ Λ p dx dt + κ ∫ p(0) dt, both by quadrature."""
    made = medium(geometry, face, "skin and storage", "leaking")
    t_d = made.travel_time
    plan = fp.feedforward(made, fp.Target(start=0.0).move(to=STEADY, over=2.0 * t_d, order=1.7, easing=0.6).hold(0.5 * t_d))
    nodes, weights = np.polynomial.legendre.leggauss(24)
    knots = np.unique(np.concatenate([plan.knots, np.linspace(0.0, plan.end, 9)]))
    half = 0.5 * np.diff(knots)
    times = (knots[:-1, None] + half[:, None] * (nodes + 1.0)).ravel()
    over_time = (half[:, None] * weights).ravel()
    x, over_path, owner = path_quadrature(made)
    segments = [made.segments[i] for i in owner]
    leak = over_path * np.array([float(s.leak(v)) for s, v in zip(segments, x, strict=True)])
    store = over_path * np.array([float(s.storage(v)) for s, v in zip(segments, x, strict=True)])
    through_bed = (leak @ plan.pressure(x, times)) @ over_time
    through_face = made.face.leak * plan.evaluate("target_pressure", times) @ over_time
    found = plan.volumes()
    assert through_bed > 1e-3 * found.injected[0]
    assert found.leaked[0] == pytest.approx(through_bed + through_face, rel=1e-7)
    at_end = np.array([plan.end])
    in_rock = float((store @ plan.pressure(x, at_end))[0])
    elsewhere = made.face.storage * STEADY + made.well.storage * plan.evaluate("bottomhole_pressure", at_end)[0]
    assert found.stored[0] == pytest.approx(in_rock + elsewhere, rel=1e-9)
    assert found.injected[0] == pytest.approx(plan.rate(times) @ over_time, rel=1e-7)
    assert found.injected[0] == pytest.approx(found.stored[0] + found.leaked[0], rel=1e-14)
    assert found.stored[0] == pytest.approx(made.stored_volume(STEADY), rel=1e-9)

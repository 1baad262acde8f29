"""Coefficients and their bounds in every medium to k = 150, against the power series of the functions that solve it.

Reference: `series_reference` (hyperbolic and modified Bessel functions by their defining series, zones as 2×2 matrices of power
series, in ball arithmetic) [CarslawJaeger1959] [AbramowitzStegun1964]; itself held to mpmath's Bessel functions here.
"""

from __future__ import annotations

import media
import mpmath
import numpy as np
import pytest
import series_reference as series

import flatplan as fp
from flatplan.flat.coefficient_bounds import scaled_bounds
from flatplan.flat.generating import generating_table, pressure_at, scaled_coefficients

ORDERS = 150
UNIFORM = [name for name in media.GEOMETRIES if name != "varying rock"]


def floats(values):
    return np.array([float(v) for v in values])


def relative(got, exact):
    """Largest relative error; what is exactly 0 must be."""
    exact = floats(exact)
    assert np.all(got[exact == 0.0] == 0.0)
    return float(np.max(np.abs(got[exact != 0.0] / exact[exact != 0.0] - 1.0)))


def assert_right(medium, exact, orders=ORDERS, allowed=1e-12):
    """Coefficients within ``allowed``, and none above its bound."""
    k = np.arange(2, orders + 1)
    for channel, values in exact.items():
        assert relative(scaled_coefficients(medium, channel, orders), values[: orders + 1]) <= allowed, channel
        if channel != "stored_volume":
            assert np.all(floats(values)[2 : orders + 1] <= scaled_bounds(medium, channel, k)), channel


# --- the reference itself ------------------------------------------------------------------------


def laplace_field(medium, s):
    """(p, F) at the sandface of one radial zone, sealed face, by mpmath's Bessel functions [CarslawJaeger1959], section 13.3."""
    (segment,) = medium.segments
    a, b = mpmath.mpf(segment.radius(segment.start)), mpmath.mpf(segment.radius(segment.end))
    q = mpmath.sqrt((s * mpmath.mpf(segment.capacity) + mpmath.mpf(segment.leakage)) / mpmath.mpf(segment.mobility))
    i0, i1, k0, k1 = (lambda z: mpmath.besseli(0, z)), (lambda z: mpmath.besseli(1, z)), *_bessel_k()
    pressure = q * a * (k1(q * a) * i0(q * b) + i1(q * a) * k0(q * b))
    slope = q * q * a * (k1(q * a) * i1(q * b) - i1(q * a) * k1(q * b))
    return pressure, segment.direction * mpmath.mpf(segment.mobility) * segment.area_factor * b * slope


def _bessel_k():
    return (lambda z: mpmath.besselk(0, z)), (lambda z: mpmath.besselk(1, z))


@pytest.mark.parametrize("geometry", ["radial inward", "radial outward"])
@pytest.mark.parametrize("leakage", media.LEAKAGES)
def test_the_reference_is_the_field_that_mpmath_gives(geometry, leakage):
    """Σ c_k s^k at three s, complex ones among them."""
    made = media.medium(geometry, leakage=leakage)
    exact = series.coefficients(made, 60, scaled=False)
    with mpmath.workdps(50):
        for z in (mpmath.mpf(3), mpmath.mpc(-2, 5), mpmath.mpc(0.1, -8)):
            s = z / made.travel_time
            for value, name in zip(laplace_field(made, s), ("sandface_pressure", "sandface_rate"), strict=True):
                total = mpmath.fsum(mpmath.mpf(c.mid().str(45, radius=False)) * s**k for k, c in enumerate(exact[name]))
                assert abs(total / value - 1) < mpmath.mpf(10) ** -35, name


# --- every medium of the tests -------------------------------------------------------------------


@pytest.mark.parametrize("geometry", UNIFORM)
@pytest.mark.parametrize("leakage", media.LEAKAGES)
def test_every_coefficient_to_order_150_in_every_face(geometry, leakage):
    """1e-12 for all channels, and the bounds hold for all of them; a well with skin and storage."""
    basis = series.Series(media.medium(geometry, leakage=leakage), ORDERS)
    for face in media.FACES:
        made = media.medium(geometry, face, "skin and storage", leakage)
        assert_right(made, basis.channels(made.face, made.well_resistance, made.well.storage))


@pytest.mark.parametrize("well", ["open", "storage", "stated resistance"])
def test_every_well(well):
    made = media.medium("zoned radial", "leaky and storing", well, "leaking")
    assert_right(made, series.coefficients(made, 60), 60)


@pytest.mark.parametrize("geometry", UNIFORM)
def test_pressure_inside_the_path(geometry):
    """In the first, the middle and the last panel, and next to a join."""
    made = media.medium(geometry, "leaky", leakage="leaking")
    inside = [s.end for s in made.segments[:-1]]
    for x in (0.013 * made.length, 0.4 * made.length, *inside, 0.97 * made.length):
        exact = series.coefficients(made, 40, x=x)["sandface_pressure"]
        got = pressure_at(generating_table(made, 40), np.array([x]))[:41, 0]
        # where it is small beside the pressure at the sandface, the panels are long beside x
        whole = floats(scaled_coefficients(made, "sandface_pressure", 40))
        assert np.all(np.abs(got - floats(exact)) <= 1e-12 * floats(exact) + 1e-14 * whole), x


# --- extremes ------------------------------------------------------------------------------------


def rock(factor):
    return fp.Rock(permeability=4e-14 * factor, porosity=0.12, compressibility="5e-10 1/Pa")


def ring(inner, outer, outward, **rest):
    target, well = (inner, outer) if outward else (outer, inner)
    return fp.radial(target_radius=target, well_radius=well, height=20.0, rock=rock(1.0), fluid=media.WATER, **rest)


def chain(flow, ends, factors, leakages=(0.0, 0.0, 0.0), **rest):
    start, *ends = ends
    if flow == "linear":
        zones = [
            fp.Zone(length=e, area=5000.0, rock=rock(f), fluid=media.WATER, leakage=leak)
            for e, f, leak in zip(ends, factors, leakages, strict=True)
        ]
        return fp.zoned(zones, **rest)
    zones = [
        fp.Zone(to_radius=e, rock=rock(f), fluid=media.WATER, leakage=leak) for e, f, leak in zip(ends, factors, leakages, strict=True)
    ]
    height = {"height": 20.0} if flow == "radial" else {}
    return fp.zoned(zones, flow=flow, target_radius=start, **height, **rest)


EXTREMES = {
    "ratio 10,000 inward": ring(0.1, 1000.0, False),
    "ratio 10,000 outward": ring(0.1, 1000.0, True),
    "ratio 10,000 inward, leaking": ring(0.1, 1000.0, False, leakage=1e-16),
    "thin ring": ring(400.0, 410.0, True),
    "linear, contrast 1e4 down": chain("linear", (0.0, 40.0, 5.0, 60.0), (1.0, 1e-4, 1.0)),
    "linear, contrast 1e4 up": chain("linear", (0.0, 40.0, 5.0, 60.0), (1.0, 1e4, 1.0), (2e-15, 0.0, 1e-14)),
    "radial, contrast 1e4 down": chain("radial", (300.0, 30.0, 2.0, 0.1), (1.0, 1e-4, 1.0)),
    "radial, contrast 1e4 up": chain("radial", (0.3, 2.0, 30.0, 200.0), (1.0, 1e4, 1.0)),
    "spherical, contrast 1e4 down": chain("spherical", (90.0, 20.0, 5.0, 1.0), (1.0, 1e-4, 1.0)),
    "strong leakage": fp.slab(length=120.0, area=5000.0, rock=rock(1.0), fluid=media.WATER, leakage=8e-11 * (9.0 / 120.0) ** 2),
}


@pytest.mark.parametrize("name", EXTREMES)
def test_extremes_to_order_150(name):
    medium = EXTREMES[name]
    # in a thin ring or one of tiny share the two solutions nearly cancel
    basis = series.Series(medium, ORDERS, bits=6000 if name == "thin ring" else None)
    for face in (fp.Face(), fp.Face(held=True)):
        made = type(medium)(medium.flow, medium.segments, face=face)
        assert_right(made, basis.channels(face, 0.0, 0.0))


# --- rock that varies ----------------------------------------------------------------------------


def profile(places, swing=1.5):
    u = np.linspace(0.0, 1.0, len(places))
    return fp.RockProfile(
        permeability=4e-14 * np.exp(swing * np.sin(4.0 * u)), porosity=0.12 + 0.05 * np.cos(3.0 * u), compressibility=5e-10, at=places
    )


VARYING = {
    "linear, two places": lambda **rest: fp.slab(length=120.0, area=5000.0, rock=profile([0.0, 120.0]), fluid=media.WATER, **rest),
    "linear, four places": lambda **rest: fp.slab(
        length=120.0, area=5000.0, rock=profile([0.0, 30.0, 80.0, 120.0]), fluid=media.WATER, **rest
    ),
    "radial inward": lambda **rest: fp.radial(
        target_radius=100.0, well_radius=55.0, height=20.0, rock=profile([0.0, 20.0, 45.0]), fluid=media.WATER, **rest
    ),
    "spherical outward": lambda **rest: fp.spherical(
        target_radius=50.0, well_radius=80.0, rock=profile([0.0, 15.0, 30.0]), fluid=media.WATER, **rest
    ),
}


@pytest.mark.parametrize("name", VARYING)
@pytest.mark.parametrize("leakage", [0.0, 2e-15])
def test_rock_that_varies(name, leakage):
    """Against power series along the path; the face and the well are put in afterwards."""
    basis = series.Series(VARYING[name](leakage=leakage), 16, bits=200, more=1)
    for face in (fp.Face(leak=2e-10, storage=3e-6), fp.Face(held=True)):
        made = VARYING[name](leakage=leakage, face=face, well=fp.Well(storage=2e-7, resistance=3e8))
        assert_right(made, basis.channels(face, made.well_resistance, made.well.storage), 16)


@pytest.mark.parametrize("face", media.FACES)
@pytest.mark.parametrize("leakage", media.LEAKAGES)
def test_bounds_hold_to_order_150_where_rock_varies(face, leakage):
    k = np.arange(2, ORDERS + 1)
    for made in (
        media.medium("varying rock", face, "skin and storage", leakage),
        VARYING["radial inward"](leakage=media.LEAKAGES[leakage], face=media.FACES[face]),
    ):
        for channel in series.CHANNELS[:4]:
            values = scaled_coefficients(made, channel, ORDERS)[2:]
            assert np.all(values > 0.0) and np.all(values <= scaled_bounds(made, channel, k)), channel

"""Coefficients in any number of digits: the Taylor stepping of `flat.precise` against power series of the solutions.

Reference: `series_reference`, balls that contain the exact value.
"""

from __future__ import annotations

import math

import media
import mpmath
import numpy as np
import pytest
import series_reference as series
from ball_reference import precision
from flint import arb

import flatplan as fp
from flatplan.flat.generating import generating_table, pressure_at, scaled_coefficients
from flatplan.flat.precise import precise_pressure, precise_scaled

UNIFORM = [name for name in media.GEOMETRIES if name != "varying rock"]


def digits_right(value: mpmath.mpf, ball: arb) -> float:
    """-log2 of the relative error."""
    with precision(2000):
        man, exp = value.man_exp
        got = arb(int(man)) * arb(2) ** int(exp)
        if ball == 0:
            return math.inf if got == 0 else 0.0
        error = abs((got / ball - 1).mid())
        return math.inf if error == 0 else -float(error.log().mid()) / math.log(2.0)


def assert_digits(medium, orders, bits, more=60):
    exact = series.coefficients(medium, orders, more=more)
    for name, row in zip(series.CHANNELS, precise_scaled(medium, series.CHANNELS, orders, bits), strict=True):
        assert len(row) == orders + 1
        worst = min(digits_right(v, e) for v, e in zip(row, exact[name], strict=True))
        assert worst >= bits, (name, worst)


@pytest.mark.parametrize("geometry", UNIFORM)
@pytest.mark.parametrize("leakage", media.LEAKAGES)
def test_the_bits_asked_for_are_right(geometry, leakage):
    face = {"tight": "leaky and storing", "leaking": "held"}[leakage]
    assert_digits(media.medium(geometry, face, "skin and storage", leakage), 16, 80 if leakage == "tight" else 300)


@pytest.mark.parametrize("geometry", ["slab", "zoned linear", "radial outward"])
def test_they_stay_right_to_order_150(geometry):
    assert_digits(media.medium(geometry, "leaky and storing", "skin and storage"), 150, 120)


@pytest.mark.parametrize(("inner", "outer", "outward"), [(0.1, 1000.0, True), (0.1, 1000.0, False), (400.0, 403.0, True)])
def test_extreme_ratios_of_radii(inner, outer, outward):
    target, well = (inner, outer) if outward else (outer, inner)
    made = fp.radial(target_radius=target, well_radius=well, height=20.0, rock=media.ROCK, fluid=media.WATER)
    assert_digits(made, 20, 100)


@pytest.mark.parametrize("geometry", UNIFORM)
def test_pressure_at_a_place(geometry):
    made = media.medium(geometry, "leaky", leakage="leaking")
    for x in (0.1 * made.length, made.segments[0].end, 0.9 * made.length):
        exact = series.coefficients(made, 16, x=x)["sandface_pressure"]
        for value, ball in zip(precise_pressure(made, x, 16, 120), exact, strict=True):
            # near the target face they are far below the first one, with which they are summed
            assert digits_right(value, ball) >= 120 + min(0.0, math.log2(float(ball))), x


@pytest.mark.parametrize(("face", "first"), [("sealed", 1), ("leaky", 1), ("held", 0)])
def test_pressure_at_the_target_face_is_the_flat_output(face, first):
    assert precise_pressure(media.medium("radial inward", face), 0.0, 4, 100) == [first, 0, 0, 0, 0]


@pytest.mark.parametrize("face", media.FACES)
@pytest.mark.parametrize("leakage", media.LEAKAGES)
def test_double_precision_agrees_with_it_for_every_face(face, leakage):
    """Two algorithms of the package that share nothing but the medium, to order 150."""
    for geometry in ("slab", "zoned linear"):
        made = media.medium(geometry, face, "skin and storage", leakage)
        for name, row in zip(series.CHANNELS, precise_scaled(made, series.CHANNELS, 150, 90), strict=True):
            exact = np.array([float(v) for v in row])
            got = scaled_coefficients(made, name, 150)
            assert np.all(got[exact == 0.0] == 0.0)
            np.testing.assert_allclose(got, exact, rtol=1e-12, atol=0.0, err_msg=name)


@pytest.mark.parametrize(("face", "leakage"), [("sealed", "tight"), ("leaky and storing", "leaking")])
def test_a_rock_that_varies_is_crossed_to_as_many_digits(face, leakage):
    assert_digits(media.medium("varying rock", face, "skin and storage", leakage), 5, 100, more=2)


def test_the_pressure_inside_a_varying_zone_is_that_of_a_path_that_ends_there():
    made = media.medium("varying rock", "sealed")
    x = 0.37 * made.length
    found = precise_pressure(made, x, 6, 100)
    table = generating_table(made, 8)
    np.testing.assert_allclose([float(v) for v in found], pressure_at(table, np.array([x]))[:7, 0], rtol=1e-11)


def test_the_target_channel_is_the_flat_output():
    (row,) = precise_scaled(media.medium("spherical"), ("target_pressure",), 5, 80)
    assert row == [1, 0, 0, 0, 0, 0]

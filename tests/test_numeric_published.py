"""Published solutions for a constant rate, and published eigenvalues as decay rates."""

from __future__ import annotations

import math

import numpy as np
import pytest
from helpers_numeric import AREA, CAPACITY, HEIGHT, LENGTH, MOBILITY, linear, round_medium

from flatplan.numeric import Mesh, Steps, discrete_model, run, simulate
from flatplan.site import Face

ALPHA = MOBILITY / CAPACITY
FLUX = 1e-4  # m³/s
EVER = 1e16  # s, beyond every output


def constant(rate=FLUX):
    return Steps(edges=[0.0, EVER], rates=[rate])


# --- slab, cylinder, sphere under a constant flux ---------------------------------------------------

# v K/(F l) at τ = κ t/l²; Carslaw and Jaeger 1959, sec. 3.8 eq. 3 [CarslawJaeger1959], summed at 25 digits
SLAB = {
    1.0: {0.02: 0.159576912, 0.05: 0.252313252, 0.1: 0.356826246, 0.2: 0.505165189, 0.5: 0.831875953, 1.0: 1.33332285},
    0.5: {0.1: 0.0593108937, 0.2: 0.158352197, 0.5: 0.458333333},
    0.0: {0.05: 0.000269342125, 0.1: 0.0078852929, 0.2: 0.0614637513, 0.5: 0.334790713, 1.0: 0.833343815},
}


@pytest.mark.parametrize("place", SLAB)
def test_insulated_slab(place):
    medium = linear()
    taus = np.array(list(SLAB[place]))
    result = run(medium, constant(), taus * LENGTH**2 / ALPHA)
    computed = result.pressure([place * LENGTH])[0] * MOBILITY * AREA / (FLUX * LENGTH)
    # the values carry nine digits
    np.testing.assert_allclose(computed, list(SLAB[place].values()), rtol=4e-9)
    channel = {0.0: result.channels.target_pressure, 1.0: result.channels.sandface_pressure}.get(place)
    if channel is not None:
        np.testing.assert_allclose(channel, result.pressure([place * LENGTH])[0], rtol=1e-12)


def test_insulated_slab_early():
    """2 sqrt(τ/π) at the heated face, to within exp(-1/τ)."""
    taus = np.array([1e-6, 1e-5, 1e-4, 1e-3, 0.01])
    out = simulate(linear(), constant(), taus * LENGTH**2 / ALPHA, tolerance=1e-12)
    np.testing.assert_allclose(out.sandface_pressure * MOBILITY * AREA / (FLUX * LENGTH), 2.0 * np.sqrt(taus / math.pi), rtol=1e-11)
    assert np.all(np.abs(out.target_pressure[:4]) <= 1e-12 * out.sandface_pressure.max())


def test_insulated_slab_late():
    """τ + 1/3 and τ - 1/6, to within exp(-π² τ); one of the times is 1e9 travel times."""
    taus = np.array([5.0, 1e3, 1e9])
    out = simulate(linear(), constant(), taus * LENGTH**2 / ALPHA)
    scale = MOBILITY * AREA / (FLUX * LENGTH)
    np.testing.assert_allclose(out.sandface_pressure * scale, taus + 1.0 / 3.0, rtol=1e-14)
    np.testing.assert_allclose(out.target_pressure * scale, taus - 1.0 / 6.0, rtol=1e-14)


# Surface value v K/(F a) at τ; Carslaw and Jaeger 1959, sec. 7.8 and 9.7 [CarslawJaeger1959], by series and inversion
ROUND = {
    "radial": {0.05: 0.281042793, 0.1: 0.418326013, 0.5: 1.24991167},
    "spherical": {0.05: 0.312165429, 0.1: 0.486761686, 0.5: 1.69999591},
}


@pytest.mark.parametrize("flow", ROUND)
def test_cylinder_and_sphere(flow):
    """The well around the outside; a core of 1e-5 (radial) or 1e-4 (spherical) of the radius is missing, which shows in the tenth digit."""
    core, outside = {"radial": 1e-5, "spherical": 1e-4}[flow] * 50.0, 50.0
    medium = round_medium(flow, (core, outside))
    taus = np.array(list(ROUND[flow]))
    out = simulate(medium, constant(), taus * outside**2 / ALPHA)
    area = float(medium.segments[0].area(medium.length))
    np.testing.assert_allclose(out.sandface_pressure * MOBILITY * area / (FLUX * outside), list(ROUND[flow].values()), rtol=4e-9)


# --- closed circular reservoir ----------------------------------------------------------------------

# (r_eD, t_D): (printed, recomputed by eigenfunctions and by inversion); van Everdingen and Hurst 1949, table III [vanEverdingenHurst1949]
CLOSED = {
    (1.5, 0.06): (0.251, 0.2507424), (1.5, 0.5): (0.964, 0.963707),
    (2.0, 0.22): (0.443, 0.4425653), (2.0, 5.0): (3.649, 3.648928),
    (2.5, 0.4): (0.565, 0.5649534), (2.5, 0.48): (0.608, 0.6081269),
    (3.0, 0.6): (0.662, 0.6623253), (3.0, 4.0): (1.578, 1.577924),
    (4.0, 1.5): (0.927, 0.9271369), (4.0, 10.0): (2.127, 2.127293),
    (5.0, 3.0): (1.167, 1.167409), (5.0, 14.0): (2.142, 2.142164),
    (6.0, 4.0): (1.275, 1.275321), (6.0, 30.0): (2.846, 2.845608),
    (7.0, 6.5): (1.470, 1.469986), (8.0, 8.0): (1.556, 1.556157), (9.0, 10.0): (1.651, 1.651372),
    (10.0, 20.0): (1.968, 1.967846), (10.0, 28.0): (2.151, 2.151146),
}  # fmt: skip


@pytest.mark.parametrize(("ratio", "time"), CLOSED)
def test_closed_circular_reservoir(ratio, time):
    """p_D = 2π k h Δp/(q μ) at the well of radius r_w, target face at the closed outer boundary."""
    printed, recomputed = CLOSED[ratio, time]
    well_radius = 0.1
    out = simulate(round_medium("radial", (ratio * well_radius, well_radius)), constant(), [time * well_radius**2 / ALPHA])
    computed = out.sandface_pressure[0] * 2.0 * math.pi * HEIGHT * MOBILITY / FLUX
    assert computed == pytest.approx(recomputed, rel=5e-7)
    assert computed == pytest.approx(printed, abs=6e-4)


# --- decay rates ------------------------------------------------------------------------------------

FINE = Mesh(24, 2)


def decays(medium, scale):
    """sqrt(λ) in units of sqrt(α)/scale."""
    return np.sqrt(discrete_model(medium, FINE).decay) * scale / math.sqrt(ALPHA)


def test_sealed_slab_decays_at_whole_multiples_of_pi():
    found = decays(linear(), LENGTH)
    assert found[0] == 0.0
    np.testing.assert_allclose(found[1:9], math.pi * np.arange(1, 9), rtol=1e-12)


def test_held_slab_decays_at_half_multiples_of_pi():
    np.testing.assert_allclose(decays(linear(face=Face(held=True)), LENGTH)[:8], math.pi * (np.arange(8) + 0.5), rtol=1e-12)


# x tan x = C, six roots; Carslaw and Jaeger 1959, app. IV table I [CarslawJaeger1959], recomputed to the digits given
ROOTS = {
    0.01: (0.0998336, 3.1447725, 6.2847765, 9.4258389, 12.5671663, 15.7085999),
    1.0: (0.8603336, 3.4256185, 6.4372982, 9.5293344, 12.6452872, 15.7712849),
    10.0: (1.4288700, 4.3058014, 7.2281098, 10.2002626, 13.2141857, 16.2593612),
}


@pytest.mark.parametrize("leak", ROOTS)
def test_slab_with_a_leaking_face(leak):
    """κ = C T/L decays at the roots of x tan x = C."""
    found = decays(linear(face=Face(leak=leak * MOBILITY * AREA / LENGTH)), LENGTH)[:6]
    np.testing.assert_allclose(found, ROOTS[leak], atol=6e-8)
    np.testing.assert_allclose(found * np.tan(found), leak, rtol=1e-9)


# Zeros of Bessel cross products at argument ratio λ: both faces closed (J1 Y1), and one held (J1 Y0); Abramowitz and Stegun 1964,
# table 9.7 [AbramowitzStegun1964], recomputed
ANNULUS = {
    (False, 1.0 / 0.6): (4.75805425, 9.44836921, 14.1529975),
    (False, 5.0): (0.847149609, 1.61107165, 2.38531636),
    (False, 10.0): (0.394094161, 0.733056866, 1.07483788),
    (True, 1.0 / 0.6): (2.60328138, 7.16212967, 11.8378343),
    (True, 10.0): (0.244810036, 0.572576433, 0.909555012),
}


@pytest.mark.parametrize(("held", "ratio"), ANNULUS)
def test_annulus(held, ratio):
    """x = r sqrt(decay/α), r the inner radius; the outer face is closed, or held: then J1(x) Y0(λx) = Y1(x) J0(λx)."""
    medium = round_medium("radial", (7.0 * ratio, 7.0), face=Face(held=held))
    found = decays(medium, 7.0)
    np.testing.assert_allclose(found[0 if held else 1 :][:3], ANNULUS[held, ratio], rtol=6e-9)

"""Exact solutions in closed form: heat polynomials from their own initial field, and steady states."""

from __future__ import annotations

import math

import numpy as np
import pytest
from helpers_numeric import AREA, CAPACITY, FACTORS, LENGTH, MOBILITY, linear, round_medium

from flatplan.numeric import Mesh, State, Steps, discrete_model, run
from flatplan.site import Face, Well

ALPHA = MOBILITY / CAPACITY


def started(medium, field, degree=14):
    """A state at time 0 with the pressure change ``field(x)``."""
    model = discrete_model(medium, Mesh(degree, 2))
    return State(model, 0.0, model.amplitudes(field(model.sample_positions())))


# --- heat polynomials -------------------------------------------------------------------------------
# A polynomial history at the sealed target face ends the series after a few terms, so field and rate are polynomials too
# (Rosenbloom and Widder 1959 [RosenbloomWidder1959]; checked by substitution). In units ξ = x/L, τ = α t/L², pressure P0.

P0 = 1e5


@pytest.mark.parametrize("n", [1, 2, 3])
def test_heat_polynomials_in_a_slab(n):
    """v_2n(ξ, τ) = (2n)! Σ τ^k ξ^(2n-2k) / (k! (2n-2k)!) satisfies the heat equation and has no flux at ξ = 0."""

    weights = [math.factorial(2 * n) / (math.factorial(k) * math.factorial(2 * n - 2 * k)) for k in range(n + 1)]

    def value(xi, tau):
        return P0 * sum(w * tau**k * xi ** (2 * n - 2 * k) for k, w in enumerate(weights))

    def rate(times):
        tau = times * ALPHA / LENGTH**2
        slope = sum(w * tau**k * (2 * n - 2 * k) for k, w in enumerate(weights))
        return MOBILITY * AREA * P0 / LENGTH * slope

    medium = linear()
    times = np.linspace(0.0, 2.0, 41) * LENGTH**2 / ALPHA
    result = run(medium, rate, times, initial=started(medium, lambda x: value(x / LENGTH, 0.0)))
    tau = times * ALPHA / LENGTH**2
    scale = value(1.0, 2.0)
    assert result.mass_balance < 1e-13
    np.testing.assert_allclose(result.channels.target_pressure, value(0.0, tau), atol=1e-12 * scale)
    np.testing.assert_allclose(result.channels.sandface_pressure, value(1.0, tau), atol=1e-12 * scale)
    np.testing.assert_allclose(result.pressure([0.37 * LENGTH])[0], value(0.37, tau), atol=1e-12 * scale)


@pytest.mark.parametrize("flow", ["radial", "spherical"])
@pytest.mark.parametrize(("target", "well"), [(2.0, 50.0), (50.0, 2.0)])
def test_heat_polynomials_between_two_radii(flow, target, well):
    """r² + 2 d α t plus the harmonic that closes the target face, d = 2 or 3: with a = target radius, -2 a² ln(r/a) or 2 a³/r."""
    d = 2 if flow == "radial" else 3
    harmonic, slope = {
        "radial": (lambda r: -2.0 * target**2 * np.log(r / target), lambda r: -2.0 * target**2 / r),
        "spherical": (lambda r: 2.0 * target**3 / r, lambda r: -2.0 * target**3 / r**2),
    }[flow]
    direction = 1.0 if well > target else -1.0
    medium = round_medium(flow, (target, well))
    rate = direction * MOBILITY * FACTORS[flow] * well ** (d - 1) * (2.0 * well + slope(well))
    times = np.linspace(0.0, 3000.0, 16)

    def value(r, t):
        return r**2 + harmonic(r) + 2.0 * d * ALPHA * t

    state = started(medium, lambda x: value(target + direction * x, 0.0), 24)
    result = run(medium, lambda t: np.full(t.shape, rate), times, initial=state)
    scale = value(max(target, well), times[-1])
    np.testing.assert_allclose(result.channels.target_pressure, value(target, times), atol=1e-11 * scale)
    np.testing.assert_allclose(result.channels.sandface_pressure, value(well, times), atol=1e-11 * scale)


# --- steady states ----------------------------------------------------------------------------------

LONG = Steps(edges=[0.0, 1e15], rates=[1e-3])


@pytest.mark.parametrize("strength", [0.01, 1.0, 30.0])
def test_leaky_slab_settles_on_hyperbolic_functions(strength):
    """T p_xx = Λ p, sealed at x = 0: p = Q cosh(m x)/(T m sinh(m L)), m² = Λ/T; ``strength`` is m L."""
    medium = linear(((LENGTH, 1.0, 1.0, MOBILITY * (strength / LENGTH) ** 2),))
    result = run(medium, LONG, [1e12])
    m = strength / LENGTH
    places = np.array([0.0, 0.3, 0.9, 1.0]) * LENGTH
    exact = 1e-3 * np.cosh(m * places) / (MOBILITY * AREA * m * np.sinh(m * LENGTH))
    np.testing.assert_allclose(result.pressure(places)[:, 0], exact, rtol=0.0, atol=2e-11 * exact.max())
    # what is injected and not stored has leaked
    assert result.leaked_volume[0] == pytest.approx(1e-3 * 1e12 - CAPACITY * 1e-3 / (MOBILITY * m * m), rel=1e-13)


def test_leaking_face_settles_on_a_straight_line():
    """p = Q (1/κ + x/T), and the well adds R Q."""
    leak, resistance = 2e-9, 3e7
    medium = linear(face=Face(leak=leak, storage=1e-4), well=Well(storage=1e-5), resistance=resistance)
    out = run(medium, LONG, [1e12]).channels
    assert out.target_pressure[0] == pytest.approx(1e-3 / leak, rel=1e-13)
    assert out.sandface_pressure[0] == pytest.approx(1e-3 / leak + 1e-3 * LENGTH / (MOBILITY * AREA), rel=1e-13)
    assert out.bottomhole_pressure[0] == pytest.approx(1e-3 / leak + 1e-3 * LENGTH / (MOBILITY * AREA) + resistance * 1e-3, rel=1e-13)
    assert out.sandface_rate[0] == pytest.approx(1e-3, rel=1e-13)


def test_held_face_passes_what_is_injected():
    """Radial flow to a held face: Q everywhere, p = Q ln(r_face/r_w)/(2π h k/μ)."""
    medium = round_medium("radial", (100.0, 0.1), face=Face(held=True))
    result = run(medium, LONG, [1e11])
    assert result.channels.target_pressure[0] == pytest.approx(1e-3, rel=1e-12)
    assert result.channels.sandface_pressure[0] == pytest.approx(1e-3 * math.log(1000.0) / (FACTORS["radial"] * MOBILITY), rel=1e-12)
    assert result.leaked_volume[0] == pytest.approx(1e8, rel=1e-3)
    assert result.mass_balance < 1e-13

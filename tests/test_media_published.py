"""Wells in layers of large extent, confined and leaky, against the published well functions.

The layer ends at a sealed target face so far away that it is not felt before the last of the times; the well has a finite radius,
which is felt as (r_w/r)² only.
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.special import k0

import flatplan as fp
from flatplan.numeric import Steps, run

ROCK = fp.Rock(permeability="40 mD", porosity=0.12, compressibility="5e-10 1/Pa")
WATER = fp.Fluid(viscosity="0.5 cP", compressibility="4.5e-10 1/Pa")
HEIGHT, RATE, PLACE, WELL = 20.0, 1e-3, 10.0, 0.0005  # m, m³/s, m, m
MOBILITY = ROCK.permeability / WATER.viscosity
ALPHA = MOBILITY / (ROCK.porosity * 9.5e-10)
UNIT = RATE / (4.0 * math.pi * HEIGHT * MOBILITY)  # Q/(4π T), here in Pa


def layer(far, **rest):
    return fp.radial(target_radius=far, well_radius=WELL, height=HEIGHT, rock=ROCK, fluid=WATER, **rest)


def pressures(medium, times):
    """Pressure change [Pa] at the place, for a constant rate from time 0 on."""
    pumped = Steps(edges=[0.0, 2.0 * times[-1]], rates=[RATE])
    out = run(medium, pumped, times, tolerance=1e-9)
    assert out.converged
    assert np.max(np.abs(out.channels.target_pressure)) < 1e-9 * UNIT  # the far end has felt nothing
    return out.pressure([medium.length - (PLACE - WELL)])[0]


# u: (printed, recomputed); four places of the table in use since Wenzel 1942, and E1 [AbramowitzStegun1964], table 5.1
THEIS = {
    2.0: (0.04890, 0.0489005107), 1.0: (0.2194, 0.219383934), 0.5: (0.5598, 0.559773595), 0.2: (1.2227, 1.22265054),
    0.1: (1.8229, 1.82292396), 0.05: (2.4679, 2.46789849), 0.02: (3.3547, 3.35470778), 0.01: (4.0379, 4.03792958),
    5e-3: (4.7261, 4.72609546), 1e-3: (6.3315, 6.33153936), 1e-4: (8.6332, 8.6332247),
}  # fmt: skip


def test_a_well_in_a_large_layer():
    """Δp = Q/(4π T) W(u), u = r²/(4αt) [Theis1935]."""
    u = np.array(list(THEIS))
    times = PLACE**2 / (4.0 * ALPHA * u)
    got = pressures(layer(12.0 * math.sqrt(4.0 * ALPHA * times[-1])), times) / UNIT
    printed, recomputed = np.array(list(THEIS.values())).T
    np.testing.assert_allclose(got, recomputed, rtol=1e-7, atol=5e-8)
    np.testing.assert_allclose(got, printed, atol=6e-5)


@pytest.mark.parametrize(("u", "w"), [(1e-6, 13.2382959), (1e-8, 17.8434651)])
def test_the_pressure_in_the_well_itself(u, w):
    """At r = r_w, long after the start, when its radius is no longer felt: the straight line in ln t [Theis1935]."""
    time = WELL**2 / (4.0 * ALPHA * u)
    medium = layer(12.0 * math.sqrt(4.0 * ALPHA * time))
    out = fp.simulate(medium, Steps(edges=[0.0, 2.0 * time], rates=[RATE]), [time], tolerance=1e-9)
    # the cylinder of radius r_w is ahead by 2u (ln(1/u) - γ)/2 and less
    assert out.sandface_pressure[0] / UNIT == pytest.approx(w, rel=10.0 * u)
    assert out.target_pressure[0] == pytest.approx(0.0, abs=1e-9 * UNIT)


# r/B: {u: (printed, recomputed)}; tables of Hantush 1956 [Hantush1956] [KrusemandeRidder1994], recomputed by quadrature
LEAKY = {
    0.01: {0.01: (4.0356, 4.0355569), 0.001: (6.3069, 6.3068777)},
    0.05: {0.01: (3.9795, 3.9795195), 0.001: (5.7965, 5.7964813)},
    0.1: {0.5: (0.5581, 0.55814314), 0.1: (1.8050, 1.8049897), 0.05: (2.4271, 2.427069), 0.01: (3.8150, 3.8150165)},
    0.2: {1.0: (0.2179, 0.21790445), 0.1: (1.7527, 1.7527039), 0.01: (3.2875, 3.2875033)},
    0.4: {0.1: (1.5644, 1.5643594)},
    0.5: {1.0: (0.2103, 0.21031375), 0.5: (0.5206, 0.52062191), 0.1: (1.4422, 1.4421957), 0.05: (1.7075, 1.7075023),
          0.01: (1.8486, 1.8485701)},
    1.0: {2.0: (0.0444, 0.044436212), 1.0: (0.1855, 0.18547481), 0.5: (0.4210, 0.42102444), 0.1: (0.8190, 0.8190345)},
    2.0: {1.0: (0.1139, 0.11389387)},
}  # fmt: skip


def bed(ratio):
    """The confining bed that gives r/B = ratio: B² = k b' h/k' [HantushJacob1955]."""
    thickness = 4.0
    return fp.ConfiningBed(permeability=ROCK.permeability * thickness * HEIGHT * (ratio / PLACE) ** 2, thickness=thickness, height=HEIGHT)


@pytest.mark.parametrize("ratio", LEAKY)
def test_a_well_in_a_large_leaky_layer(ratio):
    """Δp = Q/(4π T) W(u, r/B), transient rows."""
    rows = LEAKY[ratio]
    times = PLACE**2 / (4.0 * ALPHA * np.array(list(rows)))
    got = pressures(layer(12.0 * math.sqrt(4.0 * ALPHA * times[-1]), leakage=bed(ratio)), times) / UNIT
    printed, recomputed = np.array(list(rows.values())).T
    np.testing.assert_allclose(got, recomputed, rtol=1e-7, atol=5e-8)
    np.testing.assert_allclose(got, printed, atol=6e-5)


@pytest.mark.parametrize(("ratio", "printed"), [(0.1, 4.8541), (0.2, 3.5054), (0.5, 1.8488), (1.0, 0.8420), (2.0, 0.2278)])
def test_a_leaky_layer_settles(ratio, printed):
    """W(0, r/B) = 2 K_0(r/B), by the simulation after a long time and by the equilibrium."""
    medium = layer(PLACE + 30.0 * PLACE / ratio, leakage=bed(ratio))
    time = 60.0 * PLACE**2 / (ALPHA * ratio**2)  # 60 times S/Λ
    got = pressures(medium, np.array([time]))[0] / UNIT
    assert got == pytest.approx(2.0 * k0(ratio), rel=1e-6)
    assert got == pytest.approx(printed, abs=6e-5)
    # the series at k = 0: pressure at the place for a rate of one
    place = medium.length - (PLACE - WELL)
    steady = medium.coefficients("pressure", 0, x=place)[0] / medium.coefficients("injection_rate", 0)[0]
    assert steady * RATE / UNIT == pytest.approx(2.0 * k0(ratio), rel=1e-6)

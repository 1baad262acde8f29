"""Plans driven through a general-purpose finite-element package (scikit-fem): a composite radial layer and a leaky one.

Quadratic elements on a mesh graded towards the well, the second backward difference formula in time with even steps; the
weak form is ``S p_t v + T p_x v_x + Λ p v = Q v(L)`` [Johnson1987]. Nothing of `flatplan.numeric` takes part.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pytest
import skfem
from scipy.sparse.linalg import splu
from skfem.helpers import dot, grad

import flatplan as fp

WATER = fp.Fluid(viscosity="0.5 cP", compressibility="4.5e-10 1/Pa")
ROCK = fp.Rock(permeability="40 mD", porosity=0.12, compressibility="5e-10 1/Pa")
TIGHT = fp.Rock(permeability="6 mD", porosity=0.08, compressibility="4e-10 1/Pa")
LOOSE = fp.Rock(permeability="350 mD", porosity=0.21, compressibility="7e-10 1/Pa")


def composite():
    """Three zones around a well of 0.1 m: tight far away, loose next to the well."""
    zones = [fp.Zone(to_radius=r, rock=k, fluid=WATER) for r, k in ((60.0, TIGHT), (8.0, ROCK), (0.1, LOOSE))]
    return fp.zoned(zones, flow="radial", target_radius=150.0, height=20.0)


def leaky():
    """One rock around the well, under a bed that leaks."""
    bed = fp.ConfiningBed(permeability="0.01 mD", thickness="4 m", height="20 m")
    return fp.radial(target_radius=120.0, well_radius=0.1, height=20.0, rock=ROCK, fluid=WATER, leakage=bed)


@dataclass
class Layer:
    """What the elements need, stated here a second time: zones as (r from, r to, k/μ, φ c_t, Λ/A)."""

    zones: list
    height: float = 20.0


def stated(rock, leakage=0.0):
    return rock.permeability / 5e-4, rock.porosity * (rock.compressibility + 4.5e-10), leakage


LAYERS = {
    "composite": (composite, Layer([(0.1, 8.0, *stated(LOOSE)), (8.0, 60.0, *stated(ROCK)), (60.0, 150.0, *stated(TIGHT))])),
    "leaky": (leaky, Layer([(0.1, 120.0, *stated(ROCK, 0.01 * 9.869232667160128e-16 / (5e-4 * 4.0 * 20.0)))])),
}


def outer_pressure(layer, rate, end, steps, per_zone=48):
    """Pressure change at the outer radius after each step."""
    places = np.concatenate([np.geomspace(a, b, per_zone + 1)[i > 0 :] for i, (a, b, *_) in enumerate(layer.zones)])
    basis = skfem.Basis(skfem.MeshLine(places), skfem.ElementLineP2(), intorder=6)
    edges = [zone[1] for zone in layer.zones[:-1]]

    def of_zone(r, column):
        return np.array([zone[column] for zone in layer.zones])[np.searchsorted(edges, r)] * 2.0 * np.pi * layer.height * r

    mass = skfem.BilinearForm(lambda u, v, w: of_zone(w.x[0], 3) * u * v).assemble(basis)
    stiff = skfem.BilinearForm(lambda u, v, w: of_zone(w.x[0], 2) * dot(grad(u), grad(v)) + of_zone(w.x[0], 4) * u * v).assemble(basis)
    well, outer = (basis.nodal_dofs[0, np.argmin(abs(basis.mesh.p[0] - r))] for r in (places[0], places[-1]))
    step = end / steps
    solve = splu((1.5 * mass + step * stiff).tocsc()).solve
    now = before = np.zeros(mass.shape[0])  # the rate begins with all its derivatives 0, so does the pressure
    out = np.zeros(steps + 1)
    rates = rate(np.linspace(0.0, end, steps + 1))
    for i in range(1, steps + 1):
        load = mass @ (2.0 * now - 0.5 * before)
        load[well] += step * rates[i]
        now, before = solve(load), now
        out[i] = now[outer]
    return out


@pytest.mark.parametrize("name", LAYERS)
def test_the_planned_rate_makes_the_target_follow(name):
    """Within 1e-5 of the change, and the distance falls as the square of the step until it is there."""
    make, layer = LAYERS[name]
    medium = make()
    change = 1.5e6
    target = fp.Target(start=0.0).move(to=change, over=3.0 * medium.travel_time, order=1.8, easing=0.6).hold(1.0 * medium.travel_time)
    plan = fp.feedforward(medium, target)
    errors = []
    for steps in (400, 800, 1600):
        times = np.linspace(0.0, plan.end, steps + 1)
        errors.append(np.max(np.abs(outer_pressure(layer, plan.rate, plan.end, steps) - target.pressure(times))) / change)
    assert errors[-1] <= 1e-5
    orders = np.log2(np.array(errors[:-1]) / errors[1:])
    assert np.all(np.abs(orders - 2.0) < 0.15), (errors, orders)

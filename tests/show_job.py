"""One worked plan with everything that is shown of it, made once for all tests of the show room."""

from __future__ import annotations

from functools import cache
from types import SimpleNamespace

from flatplan.decide import Limits, assess
from flatplan.field import steps
from flatplan.flat import Plan, Target, feedforward
from flatplan.numeric import confirm
from flatplan.site import ConfiningBed, Face, Fluid, Medium, Rock, Well, Zone, slab, zoned


def layer(**more: object) -> Medium:
    """A sealed layer, 140 m long; travel time about 7.9 hours."""
    rock = Rock(permeability="40 mD", porosity=0.12, compressibility="5e-10 1/Pa")
    fluid = Fluid(viscosity="0.5 cP", compressibility="4.5e-10 1/Pa")
    return slab(length="140 m", area="6000 m^2", rock=rock, fluid=fluid, **more)


@cache
def plain() -> Plan:
    """One move up, no skin and no wellbore storage."""
    return feedforward(layer(), Target(start="21 MPa").move(to="22.5 MPa", over="3 d", order=1.8, easing=0.3))


@cache
def held() -> Plan:
    """A rate through a held face."""
    return feedforward(layer(face=Face(held=True)), Target(start="0 L/s").move(to="0.5 L/s", over="2 d"))


@cache
def held_stated() -> Plan:
    """As `held`, at a stated pressure, with skin and wellbore storage; its last level is not zero."""
    medium = layer(height="20 m", face=Face(held=True), well=Well(skin=2, storage="0.02 m^3/bar"))
    return feedforward(medium, Target(start="0 L/s", pressure="21 MPa").move(to="0.5 L/s", over="2 d").hold("1 d"))


@cache
def composite() -> Plan:
    """Three zones around a well, two of which leak; skin and wellbore storage; up, hold, down."""
    bed = ConfiningBed(permeability="0.002 mD", thickness="4 m", height="20 m")
    fluid = Fluid(viscosity="0.5 cP", compressibility="4.5e-10 1/Pa")

    def zone(to_radius: str, permeability: str, porosity: float, leakage: object = 0.0) -> Zone:
        rock = Rock(permeability=permeability, porosity=porosity, compressibility="5e-10 1/Pa")
        return Zone(to_radius=to_radius, rock=rock, fluid=fluid, leakage=leakage)

    zones = [zone("60 m", "40 mD", 0.12, bed), zone("4 m", "350 mD", 0.21, bed), zone("0.1 m", "6 mD", 0.08)]
    well = Well(skin=3, storage="0.02 m^3/bar")
    medium = zoned(zones, flow="radial", target_radius="250 m", height="20 m", well=well)
    target = (
        Target(start="21 MPa").move(to="22 MPa", over="6 d", order=1.8, easing=0.4).hold("4 d").move(to="21.5 MPa", over="5 d", easing=0.5)
    )
    return feedforward(medium, target.hold("1 d"))


@cache
def job() -> SimpleNamespace:
    """Up, hold and down, with skin and wellbore storage; limits of which two are broken; steps of 6 hours."""
    medium = layer(well=Well(resistance="0.1 bar/(m^3/h)", storage="0.02 m^3/bar"))
    target = Target(start="21 MPa").move(to="22.5 MPa", over="3 d", order=1.8, easing=0.3).hold("5 d").move(to="21.8 MPa", over="4 d")
    plan = feedforward(medium, target)
    limits = Limits(max_rate="3 m^3/h", min_rate="-1 m^3/h", max_bottomhole_pressure="23 MPa", max_pressure_change="20 kPa/h")
    pumped = steps(plan, every="6 h")
    return SimpleNamespace(
        medium=medium,
        target=target,
        plan=plan,
        limits=limits,
        verdict=assess(plan, limits),
        steps=pumped,
        check=confirm(plan),
        steps_check=confirm(pumped),
    )

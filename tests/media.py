"""Every kind of medium, face, well and leakage, for the tests that must hold for all of them.

A new medium enters every generic test by one line in `GEOMETRIES`.
"""

from __future__ import annotations

import itertools

import numpy as np

import flatplan as fp

ROCK = fp.Rock(permeability="40 mD", porosity=0.12, compressibility="5e-10 1/Pa")
TIGHT = fp.Rock(permeability="6 mD", porosity=0.08, compressibility="4e-10 1/Pa")
LOOSE = fp.Rock(permeability="350 mD", porosity=0.21, compressibility="7e-10 1/Pa")
WATER = fp.Fluid(viscosity="0.5 cP", compressibility="4.5e-10 1/Pa")
BED = fp.ConfiningBed(permeability="0.002 mD", thickness="4 m", height="20 m")

FACES = {
    "sealed": fp.Face(),
    "leaky": fp.Face(leak="0.02 m^3/h/bar"),
    "storing": fp.Face(storage="0.3 m^3/bar"),
    "leaky and storing": fp.Face(leak="0.02 m^3/h/bar", storage="0.3 m^3/bar"),
    "held": fp.Face(held=True),
}
WELLS = {
    "open": fp.Well(),
    "skin": fp.Well(skin=4),
    "negative skin": fp.Well(skin=-2),
    "storage": fp.Well(storage="0.03 m^3/bar"),
    "skin and storage": fp.Well(skin=4, storage="0.03 m^3/bar"),
    "stated resistance": fp.Well(resistance="0.4 bar/(m^3/h)"),
}
LEAKAGES = {"tight": 0.0, "leaking": BED}
PROFILE = fp.RockProfile(
    permeability=[f"{v:.6g} mD" for v in 40.0 * np.exp(0.8 * np.sin(np.arange(9) * 0.9))],
    porosity=0.12 + 0.04 * np.cos(np.arange(9) * 0.7),
    compressibility="5e-10 1/Pa",
    at=np.linspace(0.0, 120.0, 9),
)


def _linear(leakage, **rest):
    return fp.slab(length=120.0, area=5000.0, height=20.0, rock=ROCK, fluid=WATER, leakage=leakage, **rest)


def _radial_inward(leakage, **rest):
    return fp.radial(target_radius=150.0, well_radius=0.1, height=20.0, rock=ROCK, fluid=WATER, leakage=leakage, **rest)


def _radial_outward(leakage, **rest):
    return fp.radial(target_radius=12.0, well_radius=150.0, height=20.0, rock=ROCK, fluid=WATER, leakage=leakage, **rest)


def _spherical(leakage, **rest):
    return fp.spherical(target_radius=90.0, well_radius=1.5, share=0.5, rock=ROCK, fluid=WATER, leakage=leakage, **rest)


def _zoned_linear(leakage, **rest):
    zones = [
        fp.Zone(length=40.0, area=5000.0, rock=ROCK, fluid=WATER, leakage=leakage),
        fp.Zone(length=30.0, area=3500.0, rock=TIGHT, fluid=WATER),
        fp.Zone(length=50.0, area=5000.0, rock=LOOSE, fluid=WATER, leakage=leakage),
    ]
    return fp.zoned(zones, height=20.0, **rest)


def _zoned_radial(leakage, **rest):
    zones = [
        fp.Zone(to_radius=60.0, rock=TIGHT, fluid=WATER, leakage=leakage),
        fp.Zone(to_radius=8.0, rock=ROCK, fluid=WATER),
        fp.Zone(to_radius=0.1, rock=LOOSE, fluid=WATER),
    ]
    return fp.zoned(zones, flow="radial", target_radius=150.0, height=20.0, **rest)


def _zoned_spherical(leakage, **rest):
    zones = [fp.Zone(to_radius=30.0, rock=ROCK, fluid=WATER, leakage=leakage), fp.Zone(to_radius=1.0, rock=LOOSE, fluid=WATER)]
    return fp.zoned(zones, flow="spherical", target_radius=90.0, **rest)


def _varying(leakage, **rest):
    return fp.slab(length=120.0, area=5000.0, height=20.0, rock=PROFILE, fluid=WATER, leakage=leakage, **rest)


GEOMETRIES = {
    "slab": _linear,
    "radial inward": _radial_inward,
    "radial outward": _radial_outward,
    "spherical": _spherical,
    "zoned linear": _zoned_linear,
    "zoned radial": _zoned_radial,
    "zoned spherical": _zoned_spherical,
    "varying rock": _varying,
}

COMBINATIONS = list(itertools.product(GEOMETRIES, FACES, WELLS, LEAKAGES))


def medium(geometry: str, face: str = "sealed", well: str = "open", leakage: str = "tight"):
    """The medium of a combination."""
    return GEOMETRIES[geometry](LEAKAGES[leakage], face=FACES[face], well=WELLS[well])


def job(made, slowness: float = 2.0, easing: float = 0.5, order: float = 1.8):
    """A target for it: up over ``slowness`` travel times, held, and part of the way back."""
    held = made.face.held
    start, change = ("0 L/s", 1e-3) if held else ("21 MPa", 1.5e6)
    over = slowness * made.travel_time
    return (
        fp.Target(start=start)
        .move(by=change, over=over, order=order, easing=easing)
        .hold(0.5 * over)
        .move(by=-0.4 * change, over=1.3 * over, order=order, easing=min(1.0, easing + 0.1))
        .hold(0.2 * over)
    )

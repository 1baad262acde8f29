"""What a medium is, quantity by quantity, for tables and for the report."""

from __future__ import annotations

from typing import Any

import numpy as np

from flatplan.site import Fluid, Medium, Rock, RockProfile, Zone

# (words, value in SI, kind of number)
Quantity = tuple[str, float, str]

_EXTENTS = (
    ("target_radius", "radius of the target face", "length"),
    ("well_radius", "radius at the well", "length"),
    ("area", "flow area", "area"),
    ("height", "height of the layer", "length"),
    ("share", "share of the full sphere", "fraction"),
)


def medium_quantities(medium: Medium) -> list[Quantity]:
    """All that was stated of a medium and what follows: path, zones with rock and fluid, face, well."""
    rows: list[Quantity] = [("length of path", medium.length, "length")]
    rows += [(words, float(medium.inputs[key]), kind) for key, words, kind in _EXTENTS if medium.inputs.get(key) is not None]
    zones = medium.inputs.get("zones")
    if zones:
        for i, zone in enumerate(zones, start=1):
            rows += _zone(zone, f"zone {i}: ")
    else:
        rows += _matter(medium.inputs.get("rock"), medium.inputs.get("fluid"), "")
        leakage = max(s.leakage for s in medium.segments)
        if leakage:
            rows.append(("leakage", leakage, "leakage"))
    rows += _diffusivity(medium, len(zones) if zones else 1)
    rows.append(("diffusive travel time", medium.travel_time, "time"))
    if not medium.leaks:
        rows.append(("volume stored per pressure change", medium.stored_volume(1.0), "storage"))
    rows += [
        ("leak through the target face", medium.face.leak, "face leak"),
        ("storage behind the target face", medium.face.storage, "storage"),
        ("skin factor", medium.well.skin, "fraction"),
        ("well resistance, skin included", medium.well_resistance, "resistance"),
        ("wellbore storage", medium.well.storage, "storage"),
    ]
    return rows


def _zone(zone: Zone, name: str) -> list[Quantity]:
    rows: list[Quantity] = []
    for value, words, kind in (
        (zone.length, "length", "length"),
        (zone.area, "flow area", "area"),
        (zone.to_radius, "to radius", "length"),
    ):
        if value is not None:
            rows.append((f"{name}{words}", value, kind))
    rows += _matter(zone.rock, zone.fluid, name)
    if zone.leakage:
        rows.append((f"{name}leakage", zone.leakage, "leakage"))
    return rows


def _matter(rock: Any, fluid: Any, name: str) -> list[Quantity]:
    rows: list[Quantity] = []
    if isinstance(rock, (Rock, RockProfile)):
        rows += _ranged(f"{name}permeability", rock.permeability, "permeability")
        rows += _ranged(f"{name}porosity", rock.porosity, "fraction")
        rows.append((f"{name}pore compressibility", rock.compressibility, "compressibility"))
    if isinstance(fluid, Fluid):
        rows += [
            (f"{name}fluid viscosity", fluid.viscosity, "viscosity"),
            (f"{name}fluid compressibility", fluid.compressibility, "compressibility"),
        ]
    return rows


def _ranged(words: str, value: Any, kind: str) -> list[Quantity]:
    """One row for a number, two for samples that vary, none for a function: its values are not known here."""
    if callable(value):
        return []
    if np.ndim(value) == 0:
        return [(words, float(value), kind)]
    return [(f"{words}, smallest", float(np.min(value)), kind), (f"{words}, largest", float(np.max(value)), kind)]


def _diffusivity(medium: Medium, zones: int) -> list[Quantity]:
    values = [s.diffusivity for s in medium.segments]
    if len(values) == 1:
        return [("hydraulic diffusivity", values[0], "diffusivity")]
    if len(values) == zones:
        return [(f"zone {i}: hydraulic diffusivity", value, "diffusivity") for i, value in enumerate(values, start=1)]
    return [("hydraulic diffusivity, smallest", min(values), "diffusivity"), ("hydraulic diffusivity, largest", max(values), "diffusivity")]

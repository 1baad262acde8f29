"""What a medium is, part by part and quantity by quantity, for tables, figures and the report."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from flatplan.show.numbers import amount
from flatplan.site import Fluid, Medium, Rock, RockProfile, Segment


@dataclass(frozen=True)
class Quantity:
    """One number of a medium.

    Attributes
    ----------
    part : str
        "path", "zone 1" …, "profile", "face" or "well".
    words : str
        What it is; alike in no other row.
    value : float
        SI.
    kind : str
        Kind of number.
    """

    part: str
    words: str
    value: float
    kind: str


@dataclass(frozen=True)
class ZoneOf:
    """One zone of a medium as it was stated, with the segments it became.

    Attributes
    ----------
    start, end : float
        Path coordinates [m].
    segments : tuple of Segment
        One where the rock is uniform, several where it varies.
    rock, fluid : Rock or RockProfile, Fluid or None
    leakage : float
        Λ/A [1/(Pa s)].
    """

    start: float
    end: float
    segments: tuple[Segment, ...]
    rock: Any
    fluid: Any
    leakage: float

    @property
    def varies(self) -> bool:
        """Whether its rock varies along the path."""
        return not all(s.uniform for s in self.segments)

    def extent(self, radial: bool) -> tuple[float, float]:
        """Where it begins and ends: radii, or distances from the target face [m]."""
        if not radial:
            return self.start, self.end
        return float(self.segments[0].radius(self.start)), float(self.segments[-1].radius(self.end))

    def samples(self) -> list[tuple[float, float, float]]:
        """(path coordinate, permeability, porosity) at every place where a varying rock was sampled, SI."""
        total = self.rock.compressibility + self.fluid.compressibility
        at = [(s, s.start) for s in self.segments] + [(self.segments[-1], self.end)]
        return [(x, float(s.mobility_at(x)) * self.fluid.viscosity, float(s.capacity_at(x)) / total) for s, x in at]


_EXTENTS = (
    ("target_radius", "radius of the target face", "length"),
    ("well_radius", "radius at the well", "length"),
    ("area", "flow area", "area"),
    ("height", "height of the layer", "length"),
    ("share", "share of the full sphere", "fraction"),
)


def is_radial(medium: Medium) -> bool:
    """Whether the path is told by its radius: radial and spherical flow."""
    return medium.segments[0].power > 0


def zones_of(medium: Medium) -> list[ZoneOf]:
    """The zones of a medium in order from the target face; one where it was stated without zones."""
    given = medium.inputs.get("zones")
    if not given:
        return [_zone(medium.segments, medium.inputs.get("rock"), medium.inputs.get("fluid"))]
    found, rest, end = [], list(medium.segments), 0.0
    for zone in given:
        end = end + zone.length if zone.to_radius is None else abs(zone.to_radius - medium.segments[0].origin)
        # rounding may put the end of a piece a little beyond the end of its zone
        mine = [s for s in rest if 0.5 * (s.start + s.end) < end]
        rest = rest[len(mine) :]
        found.append(_zone(tuple(mine), zone.rock, zone.fluid))
    return found


def _zone(segments: tuple[Segment, ...], rock: Any, fluid: Any) -> ZoneOf:
    return ZoneOf(segments[0].start, segments[-1].end, segments, rock, fluid, segments[0].leakage)


def joins(medium: Medium) -> list[float]:
    """Path coordinates at which one zone ends and the next begins [m]."""
    return [zone.end for zone in zones_of(medium)[:-1]]


def medium_quantities(medium: Medium, system: str) -> list[Quantity]:
    """All that was stated of a medium and what follows: path, zones with rock, fluid and leakage, profile, face, well."""
    rows = [Quantity("path", "length of path", medium.length, "length")]
    rows += [
        Quantity("path", words, float(medium.inputs[key]), kind) for key, words, kind in _EXTENTS if medium.inputs.get(key) is not None
    ]
    rows.append(Quantity("path", "diffusive travel time", medium.travel_time, "time"))
    if not medium.leaks:
        rows.append(Quantity("path", "volume stored per pressure change", medium.stored_volume(1.0), "storage"))
    zones = zones_of(medium)
    for i, zone in enumerate(zones, start=1):
        rows += zone_quantities(zone, f"zone {i}", f"zone {i}: " if len(zones) > 1 else "", is_radial(medium))
    for i, zone in enumerate(zones, start=1):
        if zone.varies:
            rows += _profile(zone, f"zone {i}: " if len(zones) > 1 else "", is_radial(medium), system)
    return rows + end_quantities(medium)


def zone_quantities(zone: ZoneOf, part: str, name: str, radial: bool) -> list[Quantity]:
    """Extent, rock, fluid and leakage of a zone, and its diffusivity; ``name`` goes before the words of each."""
    begin, end = zone.extent(radial)
    word = "radius" if radial else "distance from the target face"
    rows = [(f"begins at {word}", begin, "length"), (f"ends at {word}", end, "length")]
    if not radial and name:
        rows.append(("flow area", float(zone.segments[0].area_factor), "area"))
    if isinstance(zone.rock, (Rock, RockProfile)) and isinstance(zone.fluid, Fluid):
        samples = np.array(zone.samples())
        for column, words, kind in ((1, "permeability", "permeability"), (2, "porosity", "fraction")):
            values = samples[:, column]
            if isinstance(zone.rock, Rock):
                rows.append((words, float(getattr(zone.rock, words)), kind))
            elif np.ptp(values) <= 1e-12 * values.max():
                rows.append((words, float(values[0]), kind))
            else:
                rows += [(f"{words}, smallest", float(values.min()), kind), (f"{words}, largest", float(values.max()), kind)]
        rows += [
            ("pore compressibility", zone.rock.compressibility, "compressibility"),
            ("fluid viscosity", zone.fluid.viscosity, "viscosity"),
            ("fluid compressibility", zone.fluid.compressibility, "compressibility"),
        ]
    values = np.array([s.diffusivity for s in zone.segments])
    if zone.varies:
        rows += [
            ("hydraulic diffusivity, smallest", float(values.min()), "diffusivity"),
            ("hydraulic diffusivity, largest", float(values.max()), "diffusivity"),
        ]
    else:
        rows.append(("hydraulic diffusivity", float(values[0]), "diffusivity"))
    rows.append(("leakage", zone.leakage, "leakage"))
    return [Quantity(part, f"{name}{words}", value, kind) for words, value, kind in rows]


def _profile(zone: ZoneOf, name: str, radial: bool, system: str) -> list[Quantity]:
    """Permeability and porosity at every place of a varying rock."""
    rows = []
    for x, permeability, porosity in zone.samples():
        place = float(zone.segments[0].radius(x)) if radial else x
        where = f"at {'radius ' if radial else ''}{amount(place, 'length', system, 9)}"
        rows.append(Quantity("profile", f"{name}permeability {where}", permeability, "permeability"))
        rows.append(Quantity("profile", f"{name}porosity {where}", porosity, "fraction"))
    return rows


def end_quantities(medium: Medium) -> list[Quantity]:
    """The two ends of the path: target face and well."""
    return [
        Quantity("face", "target face held (1 yes, 0 no)", float(medium.face.held), "fraction"),
        Quantity("face", "leak through the target face", medium.face.leak, "face leak"),
        Quantity("face", "storage behind the target face", medium.face.storage, "storage"),
        Quantity("well", "skin factor", medium.well.skin, "fraction"),
        Quantity("well", "well resistance, skin included", medium.well_resistance, "resistance"),
        Quantity("well", "wellbore storage", medium.well.storage, "storage"),
    ]

"""Composite media: a chain of zones, each with its own rock, fluid and leakage."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Any

from flatplan import units
from flatplan.records import Record, of_type, one_of
from flatplan.site.face import Face, leakage_value
from flatplan.site.medium import Medium
from flatplan.site.path import Path, checked, medium_on, skin_length_radial, skin_length_spherical
from flatplan.site.profile import RockProfile
from flatplan.site.properties import Fluid, Rock
from flatplan.site.segment import Segment
from flatplan.site.spherical import share_of_sphere
from flatplan.site.well import Well


@dataclass(frozen=True, repr=False)
class Zone(Record):
    """One zone of a composite medium.

    Parameters
    ----------
    rock : Rock or RockProfile
    fluid : Fluid
    length, area : float, str or quantity
        Linear flow: extent along the path [m] and flow area [m²]; above zero.
    to_radius : float, str or quantity
        Radial and spherical flow: radius at which the zone ends, on the way from the target face to the well [m].
    leakage : float, str, quantity or ConfiningBed
        Λ/A [1/(Pa s)]; 0 where nothing leaks.

    Raises
    ------
    ValueError
        A value not above zero, of another dimension, or both kinds of extent at once.
    TypeError
        A rock or fluid of another type.
    """

    rock: Rock | RockProfile
    fluid: Fluid
    length: float | None
    area: float | None
    to_radius: float | None
    leakage: float

    def __init__(
        self, *, rock: Rock | RockProfile, fluid: Fluid, length: Any = None, area: Any = None, to_radius: Any = None, leakage: Any = 0.0
    ) -> None:
        checked(rock, fluid)
        if to_radius is not None and (length is not None or area is not None):
            raise ValueError("to_radius: stands alone; length and area are for linear flow.")
        put = object.__setattr__
        put(self, "rock", rock)
        put(self, "fluid", fluid)
        put(self, "length", None if length is None else units.si(length, "length", "length", "positive"))
        put(self, "area", None if area is None else units.si(area, "area", "area", "positive"))
        put(self, "to_radius", None if to_radius is None else units.si(to_radius, "length", "to_radius", "positive"))
        put(self, "leakage", leakage_value(leakage, fluid.viscosity))

    def _rows(self) -> Iterable[tuple[str, str]]:
        if self.to_radius is not None:
            yield "to radius", units.text(self.to_radius, "length")
        if self.length is not None:
            yield "length", units.text(self.length, "length")
        if self.area is not None:
            yield "area", units.text(self.area, "area")
        yield from self.rock._rows()
        yield from self.fluid._rows()
        if self.leakage:
            yield "leakage", units.text(self.leakage, "leakage")


def zoned(
    zones: Sequence[Zone],
    *,
    flow: str = "linear",
    target_radius: Any = None,
    height: Any = None,
    share: Any = 1.0,
    face: Face | None = None,
    well: Well | None = None,
) -> Medium:
    """A chain of zones in order from the target face; the last one ends at the well.

    Pressure and rate are continuous where zones join.

    Parameters
    ----------
    zones : sequence of Zone
        At least one. Linear flow: each with length and area; otherwise each with to_radius.
    flow : {"linear", "radial", "spherical"}
    target_radius : float, str or quantity
        Radius of the target face [m]; radial and spherical flow only.
    height : float, str or quantity
        Height of the layer [m]; radial flow, and linear flow with a skin factor.
    share : float
        Share of the full sphere, above 0 and up to 1; spherical flow only.
    face : Face, optional
        The target face; sealed by default.
    well : Well, optional
        No skin, no wellbore storage by default. A skin is taken in the rock of the last zone.

    Returns
    -------
    Medium

    Raises
    ------
    ValueError
        No zone, an extent or share that is missing or does not fit the flow, radii that turn back or repeat.
    TypeError
        A zone, face or well of another type.
    """
    one_of(flow, ("linear", "radial", "spherical"), "flow")
    of_type(zones, (list, tuple), "zones", "a list of flatplan Zones")
    if not zones:
        raise ValueError("zones: got an empty list; it takes at least one Zone.")
    for i, zone in enumerate(zones):
        of_type(zone, Zone, f"zones[{i}]", "a flatplan Zone")
    if flow != "spherical" and share_of_sphere(share) != 1.0:
        raise ValueError(f"share: is for spherical flow; {flow} flow takes {'height' if flow == 'radial' else 'an area in each zone'}.")
    inputs: dict[str, Any] = {"zones": tuple(zones), "flow": flow}
    if flow == "linear":
        if target_radius is not None:
            raise ValueError("target_radius: is for radial and spherical flow; linear zones have length and area.")
        height_m = None if height is None else units.si(height, "length", "height", "positive")
        path = Path("linear", 1.0)
        skin_length = None if height_m is None else skin_length_radial(height_m)
        return medium_on(path, _linear(path, zones), face, well, skin_length, inputs | {"height": height_m})
    if target_radius is None:
        raise ValueError(f'target_radius: is missing; {flow} zones start there, such as target_radius="120 m".')
    start = units.si(target_radius, "length", "target_radius", "positive")
    ends = _radii(start, zones)
    direction = math.copysign(1.0, ends[-1] - start)
    inputs["target_radius"], inputs["well_radius"] = start, ends[-1]
    if flow == "radial":
        if height is None:
            raise ValueError('height: is missing; radial flow needs the height of the layer, such as height="20 m".')
        height_m = units.si(height, "length", "height", "positive")
        path = Path("radial", 2.0 * math.pi * height_m, start, direction)
        inputs["height"] = height_m
        skin_length = skin_length_radial(height_m)
    else:
        if height is not None:
            raise ValueError("height: is for radial flow; spherical flow takes share=.")
        inputs["share"] = share_of_sphere(share)
        path = Path("spherical", 4.0 * math.pi * inputs["share"], start, direction)
        skin_length = skin_length_spherical(inputs["share"], ends[-1])
    places = [0.0, *(abs(end - start) for end in ends)]
    pieces = (path.segments(a, b, z.rock, z.fluid, z.leakage) for a, b, z in zip(places, places[1:], zones, strict=False))
    segments = tuple(segment for piece in pieces for segment in piece)
    return medium_on(path, segments, face, well, skin_length, inputs)


def _linear(path: Path, zones: Sequence[Zone]) -> tuple[Segment, ...]:
    """Segments of linear zones, end to end."""
    segments: list[Segment] = []
    start = 0.0
    for i, zone in enumerate(zones):
        if zone.length is None or zone.area is None:
            raise ValueError(f"zones[{i}]: linear flow needs length and area in every zone.")
        segments.extend(path.segments(start, start + zone.length, zone.rock, zone.fluid, zone.leakage, zone.area))
        start += zone.length
    return tuple(segments)


def _radii(start: float, zones: Sequence[Zone]) -> list[float]:
    """End radii, checked to go one way from the target face to the well."""
    ends: list[float] = []
    before = start
    for i, zone in enumerate(zones):
        if zone.to_radius is None:
            raise ValueError(f"zones[{i}]: radial and spherical flow need to_radius in every zone.")
        if zone.to_radius == before or (ends and (zone.to_radius - before) * (ends[0] - start) < 0.0):
            raise ValueError(
                f"zones[{i}]: to_radius is {zone.to_radius:g} m after {before:g} m; "
                "radii go one way from the target face to the well and none repeats."
            )
        ends.append(zone.to_radius)
        before = zone.to_radius
    return ends

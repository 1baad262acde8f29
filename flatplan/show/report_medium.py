"""Report, inputs: the medium as stated, its zones, and the places of a rock that varies."""

from __future__ import annotations

import numpy as np

from flatplan.flat import Plan
from flatplan.show.numbers import amount, duration, reading_unit, significant
from flatplan.show.page import Markup, facts, joined, table
from flatplan.show.quantities import ZoneOf, is_radial, medium_quantities, zone_quantities, zones_of
from flatplan.show.table_histories import relative

_ZONES_A_TABLE = 4
_MOST_PLACES = 13
# what is zero in most wells and faces is said in one word instead
_WHEN_ZERO = {
    "leak through the target face": "none",
    "storage behind the target face": "none",
    "well resistance, skin included": "none",
    "wellbore storage": "none",
    "leakage": "none",
}


def medium_part(plan: Plan, system: str) -> Markup:
    """Path, rock, fluid, ends; zones side by side where there are several; places of a varying rock."""
    medium = plan.medium
    zones = zones_of(medium)
    radial = is_radial(medium)
    face = "sealed" if medium.face.sealed else "leaking or storing, as below"
    if medium.face.held:
        held_at = "its starting pressure" if relative(plan) else amount(plan.target.rest_pressure, "pressure", system, 6)
        face = f"held at {held_at}"
    varies = "" if not any(zone.varies for zone in zones) else ", rock varying along the path"
    rows = [("flow", f"{medium.flow}, {len(zones)} zone{'s' if len(zones) > 1 else ''}{varies}"), ("target face", face)]
    for row in medium_quantities(medium, system):
        if row.part == "profile" or (row.part.startswith("zone") and (len(zones) > 1 or "s at " in row.words)):
            continue
        if row.part == "face" and (medium.face.sealed or medium.face.held or row.words.startswith("target face held")):
            continue  # said in words above
        words, _, which = row.words.partition(", ")
        shown = _shown(row.words, row.value, row.kind, system)
        if which == "largest":  # the smallest stands just before it
            rows[-1] = (words, f"{rows[-1][1].split(' ')[0]} to {shown}")
            continue
        rows.append((_leakage_words(words if which == "smallest" else row.words), shown))
    parts = [facts(rows, "The medium between the target face and the well")]
    if len(zones) > 1:
        for first in range(0, len(zones), _ZONES_A_TABLE):
            parts.append(_zones(zones, first, radial, system))
    parts += [_places(zone, i if len(zones) > 1 else None, radial, system) for i, zone in enumerate(zones, start=1) if zone.varies]
    return joined(parts)


def _leakage_words(words: str) -> str:
    return "leakage out of the layer" if words == "leakage" else words


def _shown(words: str, value: float, kind: str, system: str) -> str:
    if value == 0.0 and words in _WHEN_ZERO:
        return _WHEN_ZERO[words]
    return duration(value) if kind == "time" else amount(value, kind, system)


def _zones(zones: list[ZoneOf], first: int, radial: bool, system: str) -> Markup:
    """Up to four zones side by side, a quantity a row."""
    part = zones[first : first + _ZONES_A_TABLE]
    cells: dict[str, list[str]] = {}
    kinds: dict[str, str] = {}
    for i, zone in enumerate(part):
        for row in zone_quantities(zone, "", "", radial):
            words, _, which = row.words.partition(", ")
            there = cells.setdefault(words, ["–"] * len(part))
            kinds[words] = row.kind
            number = "none" if words == "leakage" and row.value == 0.0 else significant(row.value / reading_unit(row.kind, system)[0])
            there[i] = f"{there[i]} to {number}" if which == "largest" else number
    rows = []
    if not radial:  # only linear flow states an area for each zone
        cells["flow area"] = [significant(z.segments[0].area_factor / reading_unit("area", system)[0]) for z in part]
        kinds["flow area"] = "area"
    for words, values in cells.items():
        unit = reading_unit(kinds[words], system)[1]
        rows.append((f"{words} [{unit}]" if unit else words, *values))
    head = ("", *(f"zone {first + i + 1}" for i in range(len(part))))
    return table(head, rows, "Zones in order from the target face to the well", numbers=(False, *([True] * len(part))))


def _places(zone: ZoneOf, number: int | None, radial: bool, system: str) -> Markup:
    """Permeability and porosity of a varying rock, at no more than a dozen places."""
    samples = zone.samples()
    chosen = np.unique(np.linspace(0, len(samples) - 1, min(len(samples), _MOST_PLACES)).round().astype(int))
    where = "radius" if radial else "distance from the target face"
    rows = []
    for i in chosen:
        x, permeability, porosity = samples[i]
        place = float(zone.segments[0].radius(x)) if radial else x
        rows.append(
            (
                significant(place / reading_unit("length", system)[0]),
                significant(permeability / reading_unit("permeability", system)[0]),
                significant(porosity),
            )
        )
    name = "The rock" if number is None else f"The rock of zone {number}"
    caption = f"{name} at the places where it was stated; between them logarithms follow smooth monotone curves"
    if len(chosen) < len(samples):
        caption += f". Of {len(samples)} places {len(chosen)} are printed"
    head = (f"{where} [{reading_unit('length', system)[1]}]", f"permeability [{reading_unit('permeability', system)[1]}]", "porosity")
    return table(head, rows, caption, numbers=(True, True, True), class_="narrow")

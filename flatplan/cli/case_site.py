"""The ``[site]`` of a case: one rock or a chain of zones, in linear, radial or spherical flow."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from flatplan.cli.reading import Reader
from flatplan.site import ConfiningBed, Face, Fluid, Medium, Rock, RockProfile, Well, Zone, radial, slab, spherical, zoned

FLOWS = ("linear", "radial", "spherical")
# keys of [site] beside the tables, for each flow: with one rock, and with zones
_ONE = {
    "linear": ("length", "area", "height"),
    "radial": ("target_radius", "well_radius", "height"),
    "spherical": ("target_radius", "well_radius", "share"),
}
_ZONED = {"linear": ("height",), "radial": ("target_radius", "height"), "spherical": ("target_radius", "share")}
_NEEDED = {
    "linear": ("length", "area"),
    "radial": ("target_radius", "well_radius", "height"),
    "spherical": ("target_radius", "well_radius"),
}
_ZONE = {"linear": ("length", "area"), "radial": ("to_radius",), "spherical": ("to_radius",)}
_ROCK = ("permeability", "porosity", "compressibility")
_BED = ("permeability", "thickness", "height")


def read_medium(reader: Reader, site: Any) -> Medium:
    """The medium of a ``[site]`` table."""
    if not isinstance(site, dict):
        raise reader.fail("", "site", f"site: got {site!r}; it takes a table.")
    flow = site.get("flow", "linear")
    if flow not in FLOWS:
        raise reader.fail("site", "flow", f"flow: got {flow!r}; it takes one of {', '.join(map(repr, FLOWS))}.")
    if "zone" in site:
        return _of_zones(reader, site, flow)
    reader.known("site", site, ("flow", *_ONE[flow], "leakage", "rock", "fluid", "well", "face"))
    for key in _NEEDED[flow]:
        reader.need("site", site, key)
    parts = {
        "rock": _rock(reader, "site.rock", reader.need("site", site, "rock")),
        "fluid": _fluid(reader, "site.fluid", reader.need("site", site, "fluid")),
        **_ends(reader, site),
    }
    if "leakage" in site:
        parts["leakage"] = _leakage(reader, "site", site["leakage"])
    makers: dict[str, Callable[..., Medium]] = {"linear": slab, "radial": radial, "spherical": spherical}
    plain = {key: site[key] for key in _ONE[flow] if key in site}
    return reader.call("site", lambda **given: makers[flow](**given, **parts), plain)


def _of_zones(reader: Reader, site: dict, flow: str) -> Medium:
    """A chain of ``[[site.zone]]``; a zone without a fluid takes the site's."""
    reader.known("site", site, ("flow", *_ZONED[flow], "zone", "fluid", "well", "face"))
    if not isinstance(site["zone"], list):
        raise reader.fail("site", "zone", "zone: is one table; zones are a list, each headed [[site.zone]].")
    shared = _fluid(reader, "site.fluid", site["fluid"]) if "fluid" in site else None
    zones = []
    for index, table in enumerate(site["zone"]):
        section = "site.zone"
        reader.known(section, table, (*_ZONE[flow], "leakage", "rock", "fluid"), index)
        for key in _ZONE[flow]:
            reader.need(section, table, key, index)
        fluid = _fluid(reader, "site.zone.fluid", table["fluid"], index) if "fluid" in table else shared
        if fluid is None:
            raise reader.fail(section, "fluid", "fluid: is missing, here and in [site].", index)
        parts: dict[str, Any] = {"rock": _rock(reader, "site.zone.rock", reader.need(section, table, "rock", index), index), "fluid": fluid}
        if "leakage" in table:
            parts["leakage"] = _leakage(reader, section, table["leakage"], index)
        plain = {key: table[key] for key in _ZONE[flow]}
        zones.append(reader.call(section, lambda _parts=parts, **given: Zone(**given, **_parts), plain, index))
    plain = {key: site[key] for key in _ZONED[flow] if key in site}
    ends = _ends(reader, site)
    return reader.call("site", lambda **given: zoned(zones, flow=flow, **given, **ends), plain)


def _ends(reader: Reader, site: dict) -> dict[str, Any]:
    """The target face and the well."""
    face = reader.known("site.face", site.get("face", {}), ("leak", "storage", "held"))
    well = reader.known("site.well", site.get("well", {}), ("skin", "storage", "resistance"))
    return {"face": reader.call("site.face", Face, face), "well": reader.call("site.well", Well, well)}


def _rock(reader: Reader, section: str, table: Any, index: int = 0) -> Rock | RockProfile:
    """A rock, or one that varies along the path where ``at`` is given."""
    reader.known(section, table, (*_ROCK, "at"), index)
    for key in _ROCK:
        reader.need(section, table, key, index)
    return reader.call(section, RockProfile if "at" in table else Rock, table, index)


def _fluid(reader: Reader, section: str, table: Any, index: int = 0) -> Fluid:
    keys = ("viscosity", "compressibility")
    reader.known(section, table, keys, index)
    for key in keys:
        reader.need(section, table, key, index)
    return reader.call(section, Fluid, table, index)


def _leakage(reader: Reader, section: str, value: Any, index: int = 0) -> Any:
    """A value with its unit, or the table of a confining bed."""
    if not isinstance(value, dict):
        return value
    reader.known(f"{section}.leakage", value, _BED, index)
    for key in _BED:
        reader.need(f"{section}.leakage", value, key, index)
    return reader.call(f"{section}.leakage", ConfiningBed, value, index)

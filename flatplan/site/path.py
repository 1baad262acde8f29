"""What every constructor of a medium shares: the path's geometry, the well's resistance, one segment per rock."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np

from flatplan import units
from flatplan.records import of_type
from flatplan.site.face import Face, leakage_value
from flatplan.site.medium import Medium
from flatplan.site.profile import RockProfile, log_curves
from flatplan.site.properties import Fluid, Rock, total_compressibility
from flatplan.site.segment import Segment
from flatplan.site.well import Well


@dataclass(frozen=True)
class Path:
    """Geometry of the path from the target face to the sandface.

    Attributes
    ----------
    flow : str
        "linear", "radial" or "spherical".
    area_factor : float
        Area [m²] (linear), ``2π h`` [m] (radial), ``4π · share`` (spherical).
    origin, direction : float
        Radius of the target face [m] and +1 or -1 towards the well; 0 and 1 for linear flow.
    """

    flow: str
    area_factor: float
    origin: float = 0.0
    direction: float = 1.0

    @property
    def power(self) -> int:
        """Area grows like ``r**power``."""
        return {"linear": 0, "radial": 1, "spherical": 2}[self.flow]

    def segments(
        self, start: float, end: float, rock: Rock | RockProfile, fluid: Fluid, leakage: Any, area: float | None = None
    ) -> tuple[Segment, ...]:
        """The stretch from ``start`` to ``end`` on the path [m], filled with one rock and fluid; in pieces where the rock varies."""
        geometry: dict[str, Any] = {
            "area_factor": self.area_factor if area is None else area,
            "leakage": leakage_value(leakage, fluid.viscosity),
            "power": self.power,
            "origin": self.origin,
            "direction": self.direction,
        }
        total = total_compressibility(rock, fluid)
        if isinstance(rock, Rock):
            return (
                Segment(start=start, end=end, mobility=rock.permeability / fluid.viscosity, capacity=rock.porosity * total, **geometry),
            )
        places, permeability, porosity = rock.sampled(end - start, self._default_places(start, end))
        x = start + places
        x[-1] = end
        curves = log_curves(places, permeability), log_curves(places, porosity)
        return tuple(
            Segment(
                start=float(x[i]),
                end=float(x[i + 1]),
                mobility=float(permeability[i] / fluid.viscosity),
                capacity=float(porosity[i] * total),
                mobility_curve=tuple(curves[0][i].tolist()),
                capacity_curve=tuple(curves[1][i].tolist()),
                **geometry,
            )
            for i in range(len(places) - 1)
        )

    def _default_places(self, start: float, end: float) -> np.ndarray:
        """33 distances from ``start``: even along the path, or in the logarithm of the radius."""
        if self.power == 0:
            return np.linspace(0.0, end - start, 33)
        first, last = self.origin + self.direction * start, self.origin + self.direction * end
        places = np.abs(np.geomspace(first, last, 33) - first)
        places[0], places[-1] = 0.0, end - start
        return places


def checked(rock: Any, fluid: Any, where: str = "") -> None:
    """Refuse anything that is not a Rock and a Fluid."""
    of_type(rock, (Rock, RockProfile), f"{where}rock", "a flatplan Rock or RockProfile")
    of_type(fluid, Fluid, f"{where}fluid", "a flatplan Fluid")


def radii(target_radius: Any, well_radius: Any) -> tuple[float, float]:
    """Both radii in metres, unlike."""
    target_m = units.si(target_radius, "length", "target_radius", "positive")
    well_m = units.si(well_radius, "length", "well_radius", "positive")
    if target_m == well_m:
        raise ValueError(f"well_radius: got {well_radius!r}, the same as target_radius; the medium lies between two unlike radii.")
    return target_m, well_m


def medium_on(
    path: Path, segments: tuple[Segment, ...], face: Face | None, well: Well | None, skin_length: float | None, inputs: dict[str, Any]
) -> Medium:
    """The medium of these segments, its face and well checked, its skin turned into a resistance.

    Parameters
    ----------
    skin_length : float or None
        ``R = skin / (skin_length · mobility)``: ``2π h`` in linear and radial flow, ``4π share r_w`` in
        spherical flow; None where it is not known.
    """
    face = of_type(face if face is not None else Face(), Face, "face", "a flatplan Face")
    well = of_type(well if well is not None else Well(), Well, "well", "a flatplan Well")
    resistance = well.resistance
    if well.skin:
        if skin_length is None:
            raise ValueError(
                "height: got none; a skin factor in linear flow needs the height of the layer; "
                "give height=, or state a resistance in the Well."
            )
        resistance += well.skin / (skin_length * float(segments[-1].mobility_at(segments[-1].end)))
    if resistance < 0.0 and well.storage:
        raise ValueError(
            f"skin: got {well.skin:g} with wellbore storage; with a resistance below zero the stored fluid would drive the bottomhole "
            "pressure away without end. Take an effective well radius r_w exp(-skin) and no skin instead."
        )
    return Medium(path.flow, segments, face=face, well=well, well_resistance=resistance, inputs=inputs)


def skin_length_radial(height: float) -> float:
    """``2π h``: a skin s adds ``s μ / (2π k h)`` [vanEverdingen1953]_."""
    return 2.0 * math.pi * height


def skin_length_spherical(share: float, well_radius: float) -> float:
    """``4π share r_w``: a skin s adds ``s μ / (4π share k r_w)`` (common practice in spherical flow, no source)."""
    return 4.0 * math.pi * share * well_radius

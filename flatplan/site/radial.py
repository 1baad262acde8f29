"""A layer around a well in which flow is radial."""

from __future__ import annotations

import math
from typing import Any

from flatplan import units
from flatplan.site.face import Face
from flatplan.site.medium import Medium
from flatplan.site.path import Path, checked, medium_on, radii, skin_length_radial
from flatplan.site.profile import RockProfile
from flatplan.site.properties import Fluid, Rock
from flatplan.site.well import Well


def radial(
    *,
    target_radius: Any,
    well_radius: Any,
    height: Any,
    rock: Rock | RockProfile,
    fluid: Fluid,
    leakage: Any = 0.0,
    face: Face | None = None,
    well: Well | None = None,
) -> Medium:
    """A horizontal layer between two radii, with one rock and one fluid.

    The well is at one radius and the target face at the other: a well inside a circular boundary
    (``well_radius < target_radius``), or a ring of injection around a target inside it.

    Parameters
    ----------
    target_radius, well_radius : float, str or quantity
        [m]; above zero and unlike.
    height : float, str or quantity
        Height of the layer [m]; above zero.
    rock : Rock or RockProfile
    fluid : Fluid
    leakage : float, str, quantity or ConfiningBed
        Λ/A [1/(Pa s)]; 0 where nothing leaks.
    face : Face, optional
        The target face; sealed by default.
    well : Well, optional
        No skin, no wellbore storage by default.

    Returns
    -------
    Medium

    Raises
    ------
    ValueError
        Radii that are equal or not above zero, a height not above zero, a value of another dimension.
    TypeError
        A rock, fluid, face or well of another type.
    """
    checked(rock, fluid)
    target_m, well_m = radii(target_radius, well_radius)
    height_m = units.si(height, "length", "height", "positive")
    path = Path("radial", 2.0 * math.pi * height_m, target_m, math.copysign(1.0, well_m - target_m))
    segments = path.segments(0.0, abs(well_m - target_m), rock, fluid, leakage)
    inputs = {
        "target_radius": target_m,
        "well_radius": well_m,
        "height": height_m,
        "rock": rock,
        "fluid": fluid,
        "leakage": segments[0].leakage,
    }
    return medium_on(path, segments, face, well, skin_length_radial(height_m), inputs)

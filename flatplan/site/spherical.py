"""Rock around a short well section in which flow is spherical."""

from __future__ import annotations

import math
from typing import Any

from flatplan import units
from flatplan.site.face import Face
from flatplan.site.medium import Medium
from flatplan.site.path import Path, checked, medium_on, radii, skin_length_spherical
from flatplan.site.profile import RockProfile
from flatplan.site.properties import Fluid, Rock
from flatplan.site.well import Well


def spherical(
    *,
    target_radius: Any,
    well_radius: Any,
    rock: Rock | RockProfile,
    fluid: Fluid,
    share: Any = 1.0,
    leakage: Any = 0.0,
    face: Face | None = None,
    well: Well | None = None,
) -> Medium:
    """Rock between two radii around a short open section, with one rock and one fluid.

    Parameters
    ----------
    target_radius, well_radius : float, str or quantity
        [m]; above zero and unlike.
    rock : Rock or RockProfile
    fluid : Fluid
    share : float
        Share of the full sphere through which it flows, above 0 and up to 1 (a half space below a seal: 0.5).
    leakage : float, str or quantity
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
        Radii that are equal or not above zero, a share outside (0, 1], a value of another dimension.
    TypeError
        A rock, fluid, face or well of another type.
    """
    checked(rock, fluid)
    target_m, well_m = radii(target_radius, well_radius)
    share_value = share_of_sphere(share)
    path = Path("spherical", 4.0 * math.pi * share_value, target_m, math.copysign(1.0, well_m - target_m))
    segments = path.segments(0.0, abs(well_m - target_m), rock, fluid, leakage)
    inputs = {
        "target_radius": target_m,
        "well_radius": well_m,
        "share": share_value,
        "rock": rock,
        "fluid": fluid,
        "leakage": segments[0].leakage,
    }
    return medium_on(path, segments, face, well, skin_length_spherical(share_value, well_m), inputs)


def share_of_sphere(share: Any) -> float:
    """A share above 0 and up to 1."""
    value = units.si(share, "fraction", "share")
    if not 0.0 < value <= 1.0:
        raise ValueError(f"share: got {share!r}; it takes a share of the full sphere above 0 and up to 1.")
    return value

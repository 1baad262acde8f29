"""A linear layer: constant area between the target face and a line of injection."""

from __future__ import annotations

from typing import Any

from flatplan import units
from flatplan.site.face import Face
from flatplan.site.medium import Medium
from flatplan.site.path import Path, checked, medium_on, skin_length_radial
from flatplan.site.profile import RockProfile
from flatplan.site.properties import Fluid, Rock
from flatplan.site.well import Well


def slab(
    *,
    length: Any,
    area: Any,
    rock: Rock | RockProfile,
    fluid: Fluid,
    leakage: Any = 0.0,
    face: Face | None = None,
    well: Well | None = None,
    height: Any = None,
) -> Medium:
    """A layer in which flow is linear, with one rock and one fluid.

    Parameters
    ----------
    length : float, str or quantity
        From the target face to the sandface [m]; above zero.
    area : float, str or quantity
        Flow area, width times height of the layer [m²]; above zero.
    rock : Rock or RockProfile
    fluid : Fluid
    leakage : float, str, quantity or ConfiningBed
        Λ/A [1/(Pa s)]; 0 where nothing leaks.
    face : Face, optional
        The target face; sealed by default.
    well : Well, optional
        No skin, no wellbore storage by default.
    height : float, str or quantity, optional
        Height of the layer [m]; only a skin factor needs it (``R = skin μ / (2π k h)``).

    Returns
    -------
    Medium

    Raises
    ------
    ValueError
        A length or area that is not above zero, a value of another dimension, a skin without a height.
    TypeError
        A rock, fluid, face or well of another type.
    """
    checked(rock, fluid)
    length_m = units.si(length, "length", "length", "positive")
    path = Path("linear", units.si(area, "area", "area", "positive"))
    height_m = None if height is None else units.si(height, "length", "height", "positive")
    segments = path.segments(0.0, length_m, rock, fluid, leakage)
    inputs = {
        "length": length_m,
        "area": path.area_factor,
        "height": height_m,
        "rock": rock,
        "fluid": fluid,
        "leakage": segments[0].leakage,
    }
    return medium_on(path, segments, face, well, None if height_m is None else skin_length_radial(height_m), inputs)

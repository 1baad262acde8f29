"""The axis along the path: target face left, well right; by distance, or by radius on a logarithmic axis.

Loaded only when something is drawn, because it imports matplotlib.
"""

from __future__ import annotations

import math

import numpy as np
from matplotlib.axes import Axes
from matplotlib.ticker import FixedLocator, FuncFormatter, MaxNLocator, NullFormatter, NullLocator

from flatplan import units
from flatplan.show.axes import plain_ticks
from flatplan.show.numbers import significant
from flatplan.show.quantities import is_radial
from flatplan.site import Medium, Segment

_LARGE = 10.0  # ratio of radii above which most of the pressure changes near the smaller one
_MOST_TICKS = 9


def reads_by_radius(medium: Medium) -> bool:
    """Whether the rock near the well would be squashed into a strip by a straight axis."""
    radii = end_radii(medium)
    return is_radial(medium) and max(radii) >= _LARGE * min(radii)


def end_radii(medium: Medium) -> tuple[float, float]:
    """Radius at the target face and at the well [m]."""
    first, last = medium.segments[0], medium.segments[-1]
    return float(first.radius(first.start)), float(last.radius(last.end))


def places_along(segment: Segment, log: bool, count: int) -> np.ndarray:
    """Path coordinates [m] along a segment, evenly spaced as they are drawn."""
    if not log:
        return np.linspace(segment.start, segment.end, count)
    r = np.geomspace(segment.radius(segment.start), segment.radius(segment.end), count)
    x = np.clip(np.abs(r - segment.origin), segment.start, segment.end)
    x[0], x[-1] = segment.start, segment.end
    return x


def drawn_at(medium: Medium, x: np.ndarray, log: bool) -> np.ndarray:
    """Where a path coordinate lies on the axis [m]."""
    return np.asarray(medium.segments[0].radius(x), dtype=float) if log else x


def path_axis(axes: Axes, medium: Medium, system: str, log: bool) -> None:
    """Set up and label the axis."""
    length, label = units.unit_factor("length", system), units.label("length", system)
    if not log:
        axes.set_xlim(0.0, medium.length / length)
        axes.set_xlabel(f"distance from the target face towards the well [{label}]")
        axes.xaxis.set_major_locator(MaxNLocator(nbins=8, steps=[1, 2, 2.5, 5, 10]))
        plain_ticks(axes.xaxis)
        return
    face, well = (r / length for r in end_radii(medium))
    axes.set_xscale("log")
    axes.set_xlim(face, well)
    axes.set_xlabel(f"radius, from the target face to the well [{label}]")
    axes.xaxis.set_major_locator(FixedLocator(log_ticks(min(face, well), max(face, well))))
    axes.xaxis.set_minor_locator(NullLocator())
    axes.xaxis.set_minor_formatter(NullFormatter())
    axes.xaxis.set_major_formatter(FuncFormatter(lambda value, _: significant(value)))


def log_ticks(low: float, high: float) -> list[float]:
    """Round numbers from ``low`` to ``high``, at most nine.

    >>> log_ticks(0.1, 150.0), log_ticks(12.0, 150.0)
    ([0.1, 0.3, 1.0, 3.0, 10.0, 30.0, 100.0], [20.0, 50.0, 100.0])
    """
    decades = range(math.floor(math.log10(low)), math.ceil(math.log10(high)) + 1)
    found: list[float] = []
    for mantissas in ((1, 2, 5), (1, 3), (1,)):
        found = [float(f"{m}e{n}") for n in decades for m in mantissas]
        found = [v for v in found if low * (1.0 - 1e-9) <= v <= high * (1.0 + 1e-9)]
        if len(found) <= _MOST_TICKS:
            return found
    return found[:: -(-len(found) // _MOST_TICKS)]

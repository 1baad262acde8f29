"""Which mesh a simulation begins with: from the shortest time over which something happens."""

from __future__ import annotations

import math

import numpy as np
from numpy.polynomial import legendre

from flatplan.numeric.elements import GRADING, Mesh
from flatplan.numeric.panels import Panels
from flatplan.site.medium import Medium

FIRST_DEGREE = 12
MOST_LAYERS = 20


def first_mesh(medium: Medium, panels: Panels, times: np.ndarray, tolerance: float) -> Mesh:
    """A mesh to begin with: the element at the sandface as thick as the shortest time that matters lets pressure spread.

    That time is the shortest from a jump of the rate to the next output, or the time over which a smooth rate varies.
    """
    left = panels.coefficients @ (-1.0) ** np.arange(panels.degree + 1)
    right = panels.coefficients.sum(axis=1)
    jumps = np.abs(left - np.concatenate([[0.0], right[:-1]]))
    at = panels.edges[:-1][jumps > tolerance * panels.peak]
    shortest = math.inf
    if at.size:
        before = np.searchsorted(at, times, side="left") - 1
        gaps = times[before >= 0] - at[before[before >= 0]]
        shortest = float(gaps.min()) if gaps.size else math.inf
    if panels.degree:
        slopes = np.abs(legendre.legder(panels.coefficients, axis=1)).sum(axis=1) * 2.0 / np.diff(panels.edges)
        steepest = float(slopes.max())
        shortest = min(shortest, panels.peak / steepest) if steepest else shortest
    floor = tolerance / 10.0  # thinner than this share of the path, the layer is below the tolerance
    thickness = math.sqrt(min(1.0, shortest / float(medium.travel_time)))
    layers = math.ceil(-math.log(max(thickness, floor)) / math.log(GRADING))
    return Mesh(FIRST_DEGREE, min(max(layers, 1), MOST_LAYERS))

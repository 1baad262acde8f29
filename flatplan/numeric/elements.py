"""Spectral elements: one polynomial of high degree per element, and where the elements end.

Elements end at segment joins and are graded towards the sandface in diffusive distance
``z = ∫ sqrt(S/T) dx`` from it: a time ``t`` after the rate moves, the field varies over
``z ~ sqrt(t)``, whatever the segments are, so elements whose size is in proportion to ``z`` follow a
front on all its way. In radial and spherical flow the coordinate inside an element is the logarithm of the
radius, in which steady flow is straight (radial) or gently curved (spherical).

Source: A. T. Patera, "A spectral element method for fluid dynamics", J. Comput. Phys. 54 (1984) 468
[Patera1984]; grading as in hp finite elements, C. Schwab, *p- and hp-Finite Element Methods* (1998) [Schwab1998].
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from functools import lru_cache
from itertools import pairwise

import numpy as np
from numpy.polynomial import legendre

from flatplan.site.medium import Medium, Segment

# Each element is this many times as far from the sandface as the one before it (in z). Measured on a slab under a step, far
# face, 49 modes: error 2e-10 with ratio 2, 2e-9 with 4, 9e-9 with 8; a larger ratio needs fewer refinements after a jump.
GRADING = 3.0
# Longest element in log r: over a longer one the weight r^(power+1) is no longer a mild function.
LONGEST_LOG = 1.5
# Largest change of ln(permeability) or ln(porosity) within an element, where a segment's properties vary.
LARGEST_CHANGE = 2.0
LEAST_DEGREE = 4
# A segment that leaks strongly has a layer of thickness sqrt(S/Λ) (in z) behind its near end; it gets
# elements of its own when the segment is this many layers thick.
LAYERS_THAT_MATTER = 4.0


@dataclass(frozen=True)
class Mesh:
    """How fine a model is: polynomial degree, and the share of the path that the element at the sandface takes.

    Attributes
    ----------
    degree : int
        Degree of the polynomials where an element is as long as the grading allows; shorter elements get by with less.
    layers : int
        The element at the sandface is ``GRADING**-layers`` of the whole diffusive distance.
    """

    degree: int
    layers: int

    def finer(self) -> Mesh:
        """The next mesh: higher degree and one more layer."""
        return Mesh(self.degree + 4, self.layers + 1)


@dataclass(frozen=True)
class Element:
    """A stretch of one segment, by distance from the sandface (so that thin ones keep their digits).

    Attributes
    ----------
    segment : Segment
    far, near : float
        Distance from the sandface of its end nearer the target face, and of the other [m]; ``far > near``.
    length : float
        Length of the path [m].
    degree : int
        Degree of its polynomials.
    """

    segment: Segment
    far: float
    near: float
    length: float
    degree: int = 0

    @property
    def _curved(self) -> bool:
        return self.segment.power > 0

    @property
    def _radius(self) -> float:
        """Radius at the end nearer the target face [m]."""
        return float(self.segment.radius(self.length - self.far))

    @property
    def _log_span(self) -> float:
        """ln(r at the sandface end / r at the other end), signed."""
        return math.log1p(self.segment.direction * (self.far - self.near) / self._radius)

    def _area(self, xi: np.ndarray) -> np.ndarray:
        """Flow area [m²]; the radius is counted from this element's end, so that a thin one keeps its digits."""
        s = self.segment
        if not self._curved:
            return np.full_like(xi, s.area_factor)
        return s.area_factor * (self._radius * np.exp(self._log_span * (1.0 + xi) / 2.0)) ** s.power

    def properties(self, xi: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """S, T and Λ at reference coordinates -1 (target side) … 1 (sandface side)."""
        area, x = self._area(xi), self.length - self.distance(xi)
        return self.segment.capacity_at(x) * area, self.segment.mobility_at(x) * area, self.segment.leakage * area

    def stretch(self, xi: np.ndarray) -> np.ndarray:
        """``dx/dξ`` [m]."""
        if not self._curved:
            return np.full_like(xi, (self.far - self.near) / 2.0)
        span = self._log_span
        return self._radius * np.exp(span * (1.0 + xi) / 2.0) * (abs(span) / 2.0)

    def reference(self, distance: np.ndarray) -> np.ndarray:
        """Reference coordinate of points at ``distance`` [m] from the sandface."""
        share = (self.far - distance) / (self.far - self.near)
        if self._curved:
            share = np.log1p(self.segment.direction * (self.far - distance) / self._radius) / self._log_span
        return np.clip(2.0 * share - 1.0, -1.0, 1.0)

    def distance(self, xi: np.ndarray) -> np.ndarray:
        """Distance from the sandface [m] at reference coordinates ``xi``."""
        if not self._curved:
            return self.far - (self.far - self.near) * (1.0 + xi) / 2.0
        return self.far - np.abs(self._radius * np.expm1(self._log_span * (1.0 + xi) / 2.0))


@dataclass(frozen=True)
class Reference:
    """The shape functions of one degree: the constant 1, the ramp ``(1 + ξ)/2``, and bubbles that vanish at both ends.

    The bubbles are integrals of Legendre polynomials, ``∫ sqrt((2j - 1)/2) P_(j-1) dξ`` for j = 2 … degree, so that
    in linear and in radial flow no two shape functions share flow energy.

    Attributes
    ----------
    points, weights : ndarray
        Gauss-Legendre rule on [-1, 1], shape (n,).
    values, slopes : ndarray
        Value and ``d/dξ`` of the shape functions at the points, shape (n, degree + 1).
    """

    points: np.ndarray
    weights: np.ndarray
    values: np.ndarray
    slopes: np.ndarray


@lru_cache(maxsize=64)
def reference_element(degree: int) -> Reference:
    """The reference element of a degree, integrated by 10 points more than a product of shape functions needs.

    The extra points carry the weight ``r^(power + 1)`` of an element in log r down to rounding.
    """
    points, weights = legendre.leggauss(degree + 10)
    slopes = np.empty((len(points), degree + 1))
    slopes[:, 0], slopes[:, 1] = 0.0, 0.5
    j = np.arange(2, degree + 1)
    slopes[:, 2:] = legendre.legvander(points, degree)[:, 1:degree] * np.sqrt((2 * j - 1) / 2.0)
    return Reference(points, weights, shapes(points, degree), slopes)


def shapes(xi: np.ndarray, degree: int) -> np.ndarray:
    """Values of the shape functions at ``xi``, shape (len(xi), degree + 1)."""
    values = np.empty((len(xi), degree + 1))
    values[:, 0], values[:, 1] = 1.0, (1.0 + xi) / 2.0
    table = legendre.legvander(xi, degree)
    j = np.arange(2, degree + 1)
    values[:, 2:] = (table[:, 2:] - table[:, :-2]) / np.sqrt(2.0 * (2 * j - 1))
    return values


def sample_points(degree: int) -> np.ndarray:
    """Points on [-1, 1], both ends included, at which values fix a polynomial of the degree well, shape (degree + 1,)."""
    return -np.cos(np.pi * np.arange(degree + 1) / degree)


def elements(medium: Medium, mesh: Mesh) -> tuple[Element, ...]:
    """The elements of a medium in path order, from the target face to the sandface."""
    smallest = math.sqrt(float(medium.travel_time)) * GRADING**-mesh.layers
    found: list[Element] = []
    z = 0.0  # at the near end of the stretch at hand
    whole = [Element(s, medium.length - s.start, medium.length - s.end, medium.length) for s in medium.segments]
    for stretch in reversed([part for element in whole for part in _mild(element)]):
        across = _slowness(stretch)
        ends = _edges(z, z + across, smallest, _layer(stretch))
        distances = [stretch.near + (end - z) / across * (stretch.far - stretch.near) for end in ends]
        distances[0], distances[-1] = stretch.near, stretch.far
        for (near, far), (low, high) in zip(pairwise(distances), pairwise(ends), strict=True):
            parts = _cut(replace(stretch, near=near, far=far))
            ratio = max(high / low if low > 0.0 else math.inf, math.exp(abs(parts[0]._log_span)) if stretch._curved else 1.0)
            found.extend(replace(part, degree=_degree(mesh.degree, ratio)) for part in parts)
        z += across
    return tuple(reversed(found))


def _mild(element: Element) -> list[Element]:
    """The element, or halves and quarters of it in which its properties change little, in path order."""
    ends = element.segment.capacity_at, element.segment.mobility_at
    x = element.length - np.array([element.far, element.near])
    if element.segment.uniform or all(abs(np.diff(np.log(curve(x)))[0]) <= LARGEST_CHANGE for curve in ends):
        return [element]
    middle = 0.5 * (element.far + element.near)
    return _mild(replace(element, near=middle)) + _mild(replace(element, far=middle))


def _slowness(element: Element) -> float:
    """``∫ sqrt(S/T) dx`` over an element [s^½]."""
    if element.segment.uniform:
        return (element.far - element.near) / math.sqrt(element.segment.diffusivity)
    xi, weights = legendre.leggauss(16)
    storage, conductance, _ = element.properties(xi)
    return float((weights * element.stretch(xi)) @ np.sqrt(storage / conductance))


def _layer(element: Element) -> float:
    """``sqrt(S/Λ)`` [s^½], the thickness in z of the layer into which a leaking stretch lets pressure, where it is thinnest."""
    storage, _, leak = element.properties(np.array([-1.0, 1.0]))
    return math.sqrt(float(np.min(storage / leak))) if element.segment.leakage else math.inf


def _degree(degree: int, ratio: float) -> int:
    """Degree that follows the field over an element whose ends are at z and ``ratio`` z as well as ``degree`` does for `GRADING`.

    The field is analytic but for the sandface at z = 0: the error falls like ``B^-2p`` with ``B`` the sum of half-axes of the ellipse
    around the element that touches z = 0, ``(sqrt(ratio) + 1)/(sqrt(ratio) - 1)`` (Trefethen 2013, ch. 8) [Trefethen2013].
    """

    def rate(value: float) -> float:
        return math.log((math.sqrt(value) + 1.0) / (math.sqrt(value) - 1.0))

    return degree if ratio >= GRADING else max(LEAST_DEGREE, math.ceil(degree * rate(GRADING) / rate(ratio)))


def _edges(start: float, end: float, smallest: float, layer: float) -> list[float]:
    """Ends of elements between ``start`` and ``end`` (in z): sizes in proportion to z, and finer behind the near end if it leaks."""
    first = max(start, min(smallest, end))
    count = max(math.ceil(math.log(end / first) / math.log(GRADING) - 1e-9), 0 if first > start else 1)
    edges = {start, end, *(first * (end / first) ** (k / count) for k in range(count))}
    if end - start > LAYERS_THAT_MATTER * layer:
        step = LAYERS_THAT_MATTER * layer
        while step < (end - start) / 2.0:
            edges.add(start + step)
            step *= GRADING
    kept = sorted(edges)
    # Two gradings laid over each other may leave slivers, which only cost time: drop what is much thinner than its neighbour.
    return [kept[0], *(b for a, b, c in zip(kept, kept[1:], kept[2:], strict=False) if b - a > 0.05 * (c - b)), kept[-1]]


def _cut(element: Element) -> list[Element]:
    """The element, or equal parts in log r if it spans too much, in order away from the sandface."""
    if not element._curved:
        return [element]
    parts = math.ceil(abs(element._log_span) / LONGEST_LOG)
    cuts = element.distance(np.linspace(1.0, -1.0, parts + 1))
    cuts[0], cuts[-1] = element.near, element.far
    return [replace(element, near=float(near), far=float(far)) for near, far in pairwise(cuts)]

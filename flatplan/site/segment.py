"""One stretch of the path: its area and its properties per volume."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np

_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(24)


@dataclass(frozen=True)
class Segment:
    """A stretch of the path with one rock and fluid: flow area and properties per volume.

    Attributes
    ----------
    start, end : float
        Where it lies on the path [m].
    mobility : float
        k / μ [m²/(Pa s)]; at its start where it varies.
    capacity : float
        φ c_t [1/Pa]; at its start where it varies.
    area_factor : float
        Area [m²] of a linear path; ``2π h`` or ``4π · share`` otherwise.
    leakage : float
        Λ / A [1/(Pa s)].
    power : int
        Area grows like ``r**power``: 0 linear, 1 radial, 2 spherical.
    origin, direction : float
        Radius at ``x = 0`` [m] and +1 or -1, so that ``r = origin + direction · x`` (unused in linear flow).
    mobility_curve, capacity_curve : tuple of float
        Coefficients a, b, c of ``ln(property / property at the start) = a u + b u² + c u³``, u from 0 to 1 along
        the stretch, monotone; empty where the property does not vary.
    """

    start: float
    end: float
    mobility: float
    capacity: float
    area_factor: float
    leakage: float = 0.0
    power: int = 0
    origin: float = 0.0
    direction: float = 1.0
    mobility_curve: tuple[float, ...] = ()
    capacity_curve: tuple[float, ...] = ()

    @property
    def length(self) -> float:
        """Length of the stretch [m]."""
        return self.end - self.start

    @property
    def uniform(self) -> bool:
        """Whether its properties are the same everywhere."""
        return not (self.mobility_curve or self.capacity_curve)

    def radius(self, x: Any) -> Any:
        """Radius [m] at path coordinate ``x``."""
        return self.origin + self.direction * x

    def area(self, x: Any) -> Any:
        """Flow area [m²] at path coordinate ``x``."""
        if self.power == 0:
            return self.area_factor * np.ones_like(np.asarray(x, dtype=float))
        return self.area_factor * self.radius(np.asarray(x, dtype=float)) ** self.power

    def _along(self, value: float, curve: tuple[float, ...], x: Any) -> Any:
        if not curve:
            return value
        u = (np.asarray(x, dtype=float) - self.start) / self.length
        a, b, c = curve
        return value * np.exp(u * (a + u * (b + u * c)))

    def mobility_at(self, x: Any) -> Any:
        """k / μ [m²/(Pa s)] at ``x``."""
        return self._along(self.mobility, self.mobility_curve, x)

    def capacity_at(self, x: Any) -> Any:
        """φ c_t [1/Pa] at ``x``."""
        return self._along(self.capacity, self.capacity_curve, x)

    def storage(self, x: Any) -> Any:
        """S [m³/(Pa m)] at ``x``."""
        return self.capacity_at(x) * self.area(x)

    def conductance(self, x: Any) -> Any:
        """T [m⁴/(Pa s)] at ``x``."""
        return self.mobility_at(x) * self.area(x)

    def leak(self, x: Any) -> Any:
        """Λ [m²/(Pa s)] at ``x``."""
        return self.leakage * self.area(x)

    @property
    def diffusivity(self) -> float:
        """Hydraulic diffusivity α = k / (φ μ c_t) [m²/s]; where it varies, the one of equal travel time."""
        if self.uniform:
            return self.mobility / self.capacity
        return (self.length / self.slowness) ** 2

    @cached_property
    def slowness(self) -> float:
        """``∫ sqrt(S/T) dx`` over the stretch [s^½]."""
        if self.uniform:
            return self.length / float(np.sqrt(self.mobility / self.capacity))
        x = self.start + 0.5 * self.length * (_NODES + 1.0)
        return 0.5 * self.length * float(_WEIGHTS @ np.sqrt(self.capacity_at(x) / self.mobility_at(x)))

    @property
    def least_capacity(self) -> float:
        """Smallest φ c_t on the stretch [1/Pa]."""
        return min(self.capacity, float(self.capacity_at(self.end)))

    @property
    def log_admittance_steps(self) -> tuple[float, ...]:
        """Changes over the stretch of ``ln sqrt(S T)``, one for each part of it that is monotone."""
        steps = [0.5 * sum(self.mobility_curve), 0.5 * sum(self.capacity_curve)]
        if self.power:
            steps.append(self.power * float(np.log(self.radius(self.end) / self.radius(self.start))))
        return tuple(steps)

    @property
    def volume(self) -> float:
        """Bulk volume [m³]."""
        if self.power == 0:
            return self.area_factor * self.length
        ends = abs(self.radius(self.end)), abs(self.radius(self.start))
        n = self.power + 1
        return self.area_factor * abs(ends[0] ** n - ends[1] ** n) / n

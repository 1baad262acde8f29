"""The jobs that are measured: one sealed layer and moves of one bump, and the numbers that outside methods need."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np

import flatplan as fp

CHANGE = 1.5e6  # Pa
TIMES = 2000


def rock(permeability: float = 4e-14) -> fp.Rock:
    """Rock of the worked example."""
    return fp.Rock(permeability=permeability, porosity=0.12, compressibility=5e-10)


def fluid() -> fp.Fluid:
    """Fluid of the worked example."""
    return fp.Fluid(viscosity=5e-4, compressibility=4.5e-10)


def layer():
    """A fresh sealed layer, nothing computed for it yet."""
    return fp.slab(length=140.0, area=6000.0, rock=rock(), fluid=fluid())


@dataclass(frozen=True)
class Job:
    """A plan of one bump in a sealed layer, with the numbers of its series.

    With ``σ = t/duration`` and ``X = travel_time/duration`` its rate is
    ``factor / ∫b · Σ_(k=1..terms) X^k/(2k-1)! b^(k-1)(σ)``.

    Attributes
    ----------
    name : str
    plan : flatplan plan
    travel_time, duration : float
        [s]; taken as exact.
    gamma : float
        Exponent of the bump.
    factor : float
        Conductance over length, times the change [m³/s].
    terms : int
    """

    name: str
    plan: object
    travel_time: float
    duration: float
    gamma: float
    factor: float
    terms: int

    def times(self, count: int = TIMES) -> np.ndarray:
        """Times spread evenly inside the move [s]."""
        return np.linspace(0.0, self.duration, count + 2)[1:-1]


def one_bump(x: float, order: float, tolerance: float = 1e-9) -> Job:
    """The job with ``X = x`` and one bump of this Gevrey order."""
    medium = layer()
    duration = medium.travel_time / x
    plan = fp.feedforward(medium, fp.Target(start=21e6).move(by=CHANGE, over=duration, order=order), tolerance=tolerance)
    (segment,) = medium.segments
    factor = segment.mobility * segment.area_factor / segment.length * CHANGE
    terms = plan.certificate.terms
    return Job(f"X = {x:g}, order {order:g}, {terms} terms", plan, medium.travel_time, duration, 1.0 / (order - 1.0), factor, terms)


@lru_cache
def with_terms(terms: int, order: float) -> Job:
    """The job of this order whose number of terms is nearest to ``terms``."""
    return min((one_bump(x / 10.0, order) for x in range(24, 31)), key=lambda job: abs(job.terms - terms))

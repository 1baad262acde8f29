"""The medium: the coefficients of the diffusion equation along the path, and what follows from them.

Everything above this floor asks a medium for ``S``, ``T``, ``Λ``, its faces and its well, and for
nothing else: no floor above knows whether flow is linear or radial.
"""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass, field
from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np

from flatplan import units
from flatplan.records import Record
from flatplan.site.face import Face
from flatplan.site.segment import Segment
from flatplan.site.well import Well
from flatplan.wiring import provider

if TYPE_CHECKING:
    import sympy

_FLOW_POWER = {"linear": 0, "radial": 1, "spherical": 2}


@dataclass(frozen=True, repr=False)
class Equilibrium(Record):
    """A steady state with the target face changed by a stated pressure.

    Attributes
    ----------
    change : float
        Pressure change at the target face [Pa] (held face: rate through it [m³/s]).
    rate : float
        Injection rate that keeps it [m³/s]; 0 in a medium that neither leaks nor is held.
    bottomhole_change : float
        Change of bottomhole pressure [Pa].
    stored_volume : float
        Volume stored in the rock, behind the face and in the wellbore [m³].
    """

    change: float
    rate: float
    bottomhole_change: float
    stored_volume: float

    def _rows(self) -> Iterable[tuple[str, str]]:
        yield "change at the target", units.text(self.change, "pressure")
        yield "steady rate", units.text(self.rate, "rate")
        yield "change at bottomhole", units.text(self.bottomhole_change, "pressure")
        yield "stored volume", units.text(self.stored_volume, "volume")


@dataclass(frozen=True, repr=False)
class Medium(Record):
    """Porous rock between a target face and a well, as one path.

    Made by `flatplan.slab` and its sisters, not by hand.

    Attributes
    ----------
    flow : str
        "linear", "radial" or "spherical".
    segments : tuple of Segment
        In order from the target face; they join.
    face : Face
        Condition at the target face.
    well : Well
        What stands between pump and sandface.
    well_resistance : float
        Skin and stated resistance together, R [Pa s/m³].
    inputs : dict
        What the user stated, by name, for reports and for making a medium with other properties.
    """

    flow: str
    segments: tuple[Segment, ...]
    face: Face = field(default_factory=Face)
    well: Well = field(default_factory=Well)
    well_resistance: float = 0.0
    inputs: dict[str, Any] = field(default_factory=dict, compare=False)
    # What higher floors computed for this medium once (series, modes); never part of what it is.
    memory: dict[str, Any] = field(default_factory=dict, compare=False, init=False)

    def __post_init__(self) -> None:
        if self.flow not in _FLOW_POWER:
            raise ValueError(f"flow: got {self.flow!r}; it takes one of {', '.join(map(repr, _FLOW_POWER))}.")
        for before, after in zip(self.segments, self.segments[1:], strict=False):
            if before.end != after.start:
                raise ValueError(f"zones: one ends at {before.end:g} m and the next starts at {after.start:g} m; they must join.")

    # --- the coefficients along the path -------------------------------------------------------

    @property
    def uniform(self) -> bool:
        """Whether rock and fluid are the same everywhere in each zone."""
        return all(segment.uniform for segment in self.segments)

    @property
    def length(self) -> float:
        """Length L of the path from the target face to the sandface [m]."""
        return self.segments[-1].end

    @cached_property
    def travel_time(self) -> float:
        """Diffusive travel time ``t_D = (∫ sqrt(S/T) dx)²`` [s]."""
        return sum(s.length / math.sqrt(s.diffusivity) for s in self.segments) ** 2

    @property
    def leaks(self) -> bool:
        """Whether a steady pressure change needs a steady rate."""
        return bool(self.face.held or self.face.leak or any(s.leakage for s in self.segments))

    def segment_at(self, x: float) -> Segment:
        """The segment that holds path coordinate ``x`` (a join belongs to the one before it)."""
        ends = [s.end for s in self.segments]
        return self.segments[min(int(np.searchsorted(ends, x, side="left")), len(ends) - 1)]

    def positions(self, x: Any, name: str = "x") -> np.ndarray:
        """``x`` as a float array, checked to lie on the path.

        Raises
        ------
        ValueError
            Not a length, or outside ``0 … L``.
        """
        array = units.si_array(x, "length", name)
        outside = (array < 0.0) | (array > self.length)
        if np.any(outside):
            raise ValueError(f"{name}: got {array[outside][0]:g} m; the path runs from 0 (target face) to {self.length:g} m (sandface).")
        return array

    # --- steady states -------------------------------------------------------------------------

    def equilibrium(self, change: Any) -> Equilibrium:
        """The steady state with the target face changed by ``change`` (held face: this rate through it).

        Parameters
        ----------
        change : float, str or quantity
            Pressure change [Pa]; for a held face a rate [m³/s].

        Returns
        -------
        Equilibrium
        """
        value = units.si(change, "rate" if self.face.held else "pressure", "change")
        steady = provider("series").steady_state(self)
        return Equilibrium(
            change=value,
            rate=value * steady.injection_rate,
            bottomhole_change=value * steady.bottomhole_pressure,
            stored_volume=value * steady.stored_volume,
        )

    def stored_volume(self, change: Any) -> float:
        """Volume [m³] that the whole medium, face and wellbore take up when it settles at ``change``."""
        return self.equilibrium(change).stored_volume

    # --- computed on the floor of the series ---------------------------------------------------

    def coefficients(self, channel: str, terms: int, x: Any = None) -> np.ndarray:
        """Coefficients ``c_0 … c_terms`` of a channel: ``output = Σ c_k y^(k)``.

        Parameters
        ----------
        channel : str
            "target_pressure", "sandface_pressure", "sandface_rate", "bottomhole_pressure",
            "injection_rate", "injected_volume", "stored_volume", or "pressure" with ``x``.
        terms : int
            Highest derivative.
        x : float, str or quantity, optional
            Where, for "pressure" [m].

        Returns
        -------
        numpy.ndarray
            float64, SI, shape ``(terms + 1,)``.

        Raises
        ------
        ValueError
            Unknown channel, terms not a whole number from 0, or a coefficient outside the range of a float.
        """
        return provider("series").coefficients(self, channel, terms, x)

    def generating_function(self, k: int, kind: str = "pressure") -> sympy.Expr:
        """Generating function φ_k(x) (or F_k(x) with ``kind="rate"``) as an exact sympy expression in ``x``.

        Its parameters are symbols that know their value: ``float(expression.subs("x", 70))`` is a number.

        Parameters
        ----------
        k : int
            From 0.
        kind : {"pressure", "rate"}

        Returns
        -------
        sympy.Expr
            A Piecewise where there are several zones.

        Raises
        ------
        ValueError
            ``k`` not a whole number from 0, or a rock that varies along the path, for which there is no closed form.
        """
        return provider("exact forms").generating_function(self, k, kind)

    def series(self, channel: str, terms: int, *, numbers: bool = False) -> sympy.Expr:
        """A channel as ``Σ c_k y^(k)(t)``, exact, to the derivative ``terms``.

        Parameters
        ----------
        channel : str
            "target_pressure", "sandface_pressure", "sandface_rate", "bottomhole_pressure" or "injection_rate".
        terms : int
            Highest derivative, from 0.
        numbers : bool
            Put in the values of the parameters [SI].

        Returns
        -------
        sympy.Expr
            In ``y(t)``, the pressure change at the target face (held face: the rate through it), and its derivatives.

        Raises
        ------
        ValueError
            Unknown channel, terms not a whole number from 0, or a rock that varies along the path.
        """
        return provider("exact forms").series(self, channel, terms, numbers=numbers)

    def _title(self) -> str:
        count = len(self.segments)
        if not self.uniform:
            return f"Medium: {self.flow} flow, rock varying along the path ({count} pieces)"
        return f"Medium: {self.flow} flow, {count} zone{'s' if count > 1 else ''}"

    def _rows(self) -> Iterable[tuple[str, str]]:
        yield "length of path", units.text(self.length, "length")
        yield "travel time", units.text(self.travel_time, "time")
        values = [s.diffusivity for s in self.segments]
        if len(values) > 6:
            yield "diffusivity", f"{units.text(min(values), 'diffusivity')} to {units.text(max(values), 'diffusivity')}"
        else:
            for i, value in enumerate(values):
                name = f"zone {i + 1} " if len(values) > 1 else ""
                yield f"{name}diffusivity", units.text(value, "diffusivity")
        yield "target face", "; ".join(": ".join(row) for row in self.face._rows())
        if self.well_resistance:
            yield "well resistance", units.text(self.well_resistance, "resistance")
        if self.well.storage:
            yield "wellbore storage", units.text(self.well.storage, "storage")

"""The target face and what may leak: conditions at ``x = 0`` and through a confining bed."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any

from flatplan import units
from flatplan.records import Record


@dataclass(frozen=True, repr=False)
class Face(Record):
    """The target face: ``T p_x = leak · p + storage · p_t`` at ``x = 0``.

    Parameters
    ----------
    leak : float, str or quantity
        κ, rate that leaves through the face per pressure change [m³/(Pa s)]; 0 for a sealed face.
    storage : float, str or quantity
        C_f, volume stored behind the face per pressure change [m³/Pa].
    held : bool
        True for a face held at its starting pressure; the wanted history is then the rate through it.

    Raises
    ------
    ValueError
        A negative value, another dimension, or a held face that also leaks or stores.
    """

    leak: float
    storage: float
    held: bool

    def __init__(self, leak: Any = 0.0, storage: Any = 0.0, held: bool = False) -> None:
        put = object.__setattr__
        put(self, "leak", units.si(leak, "face leak", "leak", "not negative"))
        put(self, "storage", units.si(storage, "storage", "face storage", "not negative"))
        if not isinstance(held, bool):
            raise ValueError(f"held: got {held!r}; it takes true or false.")
        if held and (self.leak or self.storage):
            raise ValueError("held: a face held at its pressure cannot also have leak or storage.")
        put(self, "held", held)

    @property
    def sealed(self) -> bool:
        """Neither leaking, storing nor held."""
        return not (self.held or self.leak or self.storage)

    def _rows(self) -> Iterable[tuple[str, str]]:
        if self.held:
            yield "held", "at its starting pressure"
        elif self.sealed:
            yield "sealed", "no flow, no storage"
        if self.leak:
            yield "leak", units.text(self.leak, "face leak")
        if self.storage:
            yield "storage", units.text(self.storage, "storage")


@dataclass(frozen=True, repr=False)
class ConfiningBed(Record):
    """A bed above or below the layer that lets some of the injected fluid through.

    Parameters
    ----------
    permeability : float, str or quantity
        Vertical permeability k' of the bed [m²]; above zero.
    thickness : float, str or quantity
        Thickness b' of the bed [m]; above zero.
    height : float, str or quantity
        Height h of the layer that leaks into it [m]; above zero.

    Raises
    ------
    ValueError
        A value that is not above zero, or of another dimension.
    """

    permeability: float
    thickness: float
    height: float

    def __init__(self, permeability: Any, thickness: Any, height: Any) -> None:
        put = object.__setattr__
        put(self, "permeability", units.si(permeability, "permeability", "confining permeability", "positive"))
        put(self, "thickness", units.si(thickness, "length", "confining thickness", "positive"))
        put(self, "height", units.si(height, "length", "layer height", "positive"))

    def leakage(self, viscosity: float) -> float:
        """Λ/A = k' / (μ b' h) [1/(Pa s)], the confining bed's storage neglected [HantushJacob1955]."""
        return self.permeability / (viscosity * self.thickness * self.height)

    def _rows(self) -> Iterable[tuple[str, str]]:
        yield "permeability", units.text(self.permeability, "permeability")
        yield "thickness", units.text(self.thickness, "length")
        yield "layer height", units.text(self.height, "length")


def leakage_value(leakage: Any, viscosity: float, name: str = "leakage") -> float:
    """Λ/A [1/(Pa s)] from a number, a text, a quantity or a `ConfiningBed`."""
    if isinstance(leakage, ConfiningBed):
        return leakage.leakage(viscosity)
    return units.si(leakage, "leakage", name, "not negative")

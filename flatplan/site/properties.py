"""Rock and fluid: the properties a log or a laboratory reports, checked when they are stated."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any

from flatplan import units
from flatplan.records import Record


@dataclass(frozen=True, repr=False)
class Rock(Record):
    """A porous rock.

    Parameters
    ----------
    permeability : float, str or quantity
        Absolute permeability along the flow [m²]; above zero.
    porosity : float or str
        Connected porosity, a fraction strictly between 0 and 1 ("12 %" works).
    compressibility : float, str or quantity
        Pore-volume compressibility of the rock [1/Pa]; zero or more.

    Raises
    ------
    ValueError
        A value out of its physical range, or of another dimension.
    """

    permeability: float
    porosity: float
    compressibility: float

    def __init__(self, permeability: Any, porosity: Any, compressibility: Any) -> None:
        put = object.__setattr__
        put(self, "permeability", units.si(permeability, "permeability", "permeability", "positive"))
        value = units.si(porosity, "fraction", "porosity")
        if not 0.0 < value < 1.0:
            raise ValueError(f"porosity: got {porosity!r}; it takes a fraction strictly between 0 and 1.")
        put(self, "porosity", value)
        put(self, "compressibility", units.si(compressibility, "compressibility", "rock compressibility", "not negative"))

    def _rows(self) -> Iterable[tuple[str, str]]:
        yield "permeability", units.text(self.permeability, "permeability")
        yield "porosity", f"{self.porosity:.4g}"
        yield "pore compressibility", units.text(self.compressibility, "compressibility", "SI")


@dataclass(frozen=True, repr=False)
class Fluid(Record):
    """The fluid that fills the pores and is injected, slightly compressible, one phase.

    Parameters
    ----------
    viscosity : float, str or quantity
        Dynamic viscosity at reservoir conditions [Pa s]; above zero.
    compressibility : float, str or quantity
        Isothermal compressibility [1/Pa]; zero or more.

    Raises
    ------
    ValueError
        A value out of its physical range, or of another dimension.
    """

    viscosity: float
    compressibility: float

    def __init__(self, viscosity: Any, compressibility: Any) -> None:
        put = object.__setattr__
        put(self, "viscosity", units.si(viscosity, "viscosity", "viscosity", "positive"))
        put(self, "compressibility", units.si(compressibility, "compressibility", "fluid compressibility", "not negative"))

    def _rows(self) -> Iterable[tuple[str, str]]:
        yield "viscosity", units.text(self.viscosity, "viscosity")
        yield "compressibility", units.text(self.compressibility, "compressibility", "SI")


def total_compressibility(rock: Any, fluid: Fluid) -> float:
    """Pore-volume plus fluid compressibility, ``c_t`` [1/Pa]; zero would make pressure spread at once.

    Source: the usual single-phase definition, e.g. Dake 1978 [Dake1978].
    """
    total = rock.compressibility + fluid.compressibility
    if total <= 0.0:
        raise ValueError("compressibility: rock and fluid are both 0; at least one must be above zero.")
    return total

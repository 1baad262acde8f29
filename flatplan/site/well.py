"""The well: what stands between the pump and the sandface."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any

from flatplan import units
from flatplan.records import Record


@dataclass(frozen=True, repr=False)
class Well(Record):
    """An injection well: skin or a stated resistance, and wellbore storage.

    Bottomhole pressure is ``p_w = p(L) + R Q_s`` and injection rate ``Q = Q_s + C dp_w/dt``
    [vanEverdingen1953]_ [Ramey1970]_.

    Parameters
    ----------
    skin : float
        Dimensionless skin factor; the medium turns it into a resistance ``skin μ / (2π k h)``.
    storage : float, str or quantity
        Wellbore storage C [m³/Pa]; zero or more.
    resistance : float, str or quantity
        Pressure drop per rate between well and sandface [Pa s/m³], added to what the skin gives.

    Raises
    ------
    ValueError
        A negative storage or resistance, another dimension, not finite.
    """

    skin: float
    storage: float
    resistance: float

    def __init__(self, skin: Any = 0.0, storage: Any = 0.0, resistance: Any = 0.0) -> None:
        put = object.__setattr__
        put(self, "skin", units.si(skin, "fraction", "skin"))
        put(self, "storage", units.si(storage, "storage", "wellbore storage", "not negative"))
        put(self, "resistance", units.si(resistance, "resistance", "well resistance", "not negative"))

    def _rows(self) -> Iterable[tuple[str, str]]:
        yield "skin", f"{self.skin:.4g}"
        yield "wellbore storage", units.text(self.storage, "storage")
        yield "stated resistance", units.text(self.resistance, "resistance")

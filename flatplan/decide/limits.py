"""What the pump, the fracture pressure and the target allow."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, fields
from typing import Any

from flatplan import units
from flatplan.records import Record

# limit -> (kind of number, accepted sign, words)
LIMITS: dict[str, tuple[str, str, str]] = {
    "max_rate": ("rate", "any", "largest injection rate"),
    "min_rate": ("rate", "any", "smallest injection rate (below zero: back-flow allowed)"),
    "max_rate_change": ("rate change", "positive", "largest change of rate"),
    "max_bottomhole_pressure": ("pressure", "any", "largest bottomhole pressure"),
    "min_bottomhole_pressure": ("pressure", "any", "smallest bottomhole pressure"),
    "max_pressure_change": ("pressure rate", "positive", "fastest pressure change at the target"),
    "max_volume": ("volume", "positive", "largest net injected volume"),
}


@dataclass(frozen=True, repr=False)
class Limits(Record):
    """Limits of the pump and of the ground; one that is not stated does not bind.

    Parameters
    ----------
    max_rate, min_rate : float, str or quantity, optional
        Injection rate [m³/s]; ``min_rate=0`` means injection only, below zero allows back-flow.
    max_rate_change : float, str or quantity, optional
        Largest change of rate, up or down [m³/s²], such as "0.5 L/s/h".
    max_bottomhole_pressure, min_bottomhole_pressure : float, str or quantity, optional
        [Pa, absolute]. The upper one is the fracture pressure less the margin the local rules set.
    max_pressure_change : float, str or quantity, optional
        Fastest change of pressure at the target [Pa/s], such as "20 kPa/h".
    max_volume : float, str or quantity, optional
        Largest net injected volume [m³].

    Raises
    ------
    ValueError
        A value of another dimension, not finite, of the wrong sign, or limits that contradict each other.
    """

    max_rate: float | None
    min_rate: float | None
    max_rate_change: float | None
    max_bottomhole_pressure: float | None
    min_bottomhole_pressure: float | None
    max_pressure_change: float | None
    max_volume: float | None

    def __init__(
        self,
        *,
        max_rate: Any = None,
        min_rate: Any = None,
        max_rate_change: Any = None,
        max_bottomhole_pressure: Any = None,
        min_bottomhole_pressure: Any = None,
        max_pressure_change: Any = None,
        max_volume: Any = None,
    ) -> None:
        given = dict(
            max_rate=max_rate,
            min_rate=min_rate,
            max_rate_change=max_rate_change,
            max_bottomhole_pressure=max_bottomhole_pressure,
            min_bottomhole_pressure=min_bottomhole_pressure,
            max_pressure_change=max_pressure_change,
            max_volume=max_volume,
        )
        for name, value in given.items():
            kind, sign, _ = LIMITS[name]
            object.__setattr__(self, name, None if value is None else units.si(value, kind, name, sign))
        for low, high, kind in (("min_rate", "max_rate", "rate"), ("min_bottomhole_pressure", "max_bottomhole_pressure", "pressure")):
            bottom, top = getattr(self, low), getattr(self, high)
            if bottom is not None and top is not None and bottom >= top:
                raise ValueError(
                    f"{low}: got {units.text(bottom, kind)}, which is not below {high} ({units.text(top, kind)}); "
                    "nothing could satisfy both."
                )

    @property
    def stated(self) -> dict[str, float]:
        """The limits that were given, by name, SI."""
        return {f.name: getattr(self, f.name) for f in fields(self) if getattr(self, f.name) is not None}

    def _rows(self) -> Iterable[tuple[str, str]]:
        if not self.stated:
            yield "none", "nothing is limited"
        for name, value in self.stated.items():
            kind, _, words = LIMITS[name]
            yield words, units.text(value, kind)

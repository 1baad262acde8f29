"""The outputs of a plan or a simulation over time, by the names used everywhere."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np

from flatplan import units
from flatplan.records import Record

# channel name -> (kind of number, words for titles and columns)
CHANNELS: dict[str, tuple[str, str]] = {
    "injection_rate": ("rate", "injection rate"),
    "sandface_rate": ("rate", "sandface rate"),
    "bottomhole_pressure": ("pressure", "bottomhole pressure"),
    "sandface_pressure": ("pressure", "sandface pressure"),
    "target_pressure": ("pressure", "target pressure"),
    "injected_volume": ("volume", "injected volume"),
}


def described(name: str, target_kind: str = "pressure") -> tuple[str, str]:
    """(kind of number, words) of a channel; where the target face is held, "target_pressure" is the rate through it.

    >>> described("target_pressure", "rate")
    ('rate', 'rate through the target face')
    """
    if name == "target_pressure" and target_kind == "rate":
        return "rate", "rate through the target face"
    return CHANNELS[name]


@dataclass(frozen=True, repr=False, eq=False)  # arrays do not compare to one truth value
class Channels(Record):
    """Every output at the times asked for; arrays of shape ``(len(times),)``, float64, SI.

    Attributes
    ----------
    times : ndarray
        [s] from the start of the plan.
    injection_rate, sandface_rate : ndarray
        [m³/s], positive into the ground.
    bottomhole_pressure, sandface_pressure, target_pressure : ndarray
        Absolute [Pa] where the start is. For a held face target_pressure is the rate through it [m³/s].
    injected_volume : ndarray
        Net volume since the start [m³].
    target_kind : str
        What target_pressure holds: "pressure", or "rate" for a held face.
    """

    times: np.ndarray
    injection_rate: np.ndarray
    sandface_rate: np.ndarray
    bottomhole_pressure: np.ndarray
    sandface_pressure: np.ndarray
    target_pressure: np.ndarray
    injected_volume: np.ndarray
    target_kind: str = "pressure"

    def _title(self) -> str:
        return f"Channels at {len(self.times)} time{'s' if len(self.times) != 1 else ''}"

    def _rows(self) -> Iterable[tuple[str, str]]:
        for name in CHANNELS:
            kind, words = described(name, self.target_kind)
            values = getattr(self, name)
            if values.size:
                yield words, f"{units.text(values.min(), kind)} to {units.text(values.max(), kind)}"

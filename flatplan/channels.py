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
        Absolute [Pa] where the start is.
    injected_volume : ndarray
        Net volume since the start [m³].
    """

    times: np.ndarray
    injection_rate: np.ndarray
    sandface_rate: np.ndarray
    bottomhole_pressure: np.ndarray
    sandface_pressure: np.ndarray
    target_pressure: np.ndarray
    injected_volume: np.ndarray

    def _title(self) -> str:
        return f"Channels at {len(self.times)} time{'s' if len(self.times) != 1 else ''}"

    def _rows(self) -> Iterable[tuple[str, str]]:
        for name, (kind, words) in CHANNELS.items():
            values = getattr(self, name)
            if values.size:
                yield words, f"{units.text(values.min(), kind)} to {units.text(values.max(), kind)}"

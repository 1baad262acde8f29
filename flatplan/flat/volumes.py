"""Where the injected fluid is: stored, or gone through the bed and the target face."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np

from flatplan import units
from flatplan.records import Record


@dataclass(frozen=True, repr=False)
class Volumes(Record):
    """Volumes since the start of a plan, arrays of shape ``(len(times),)`` [m³].

    Attributes
    ----------
    times : ndarray
        [s].
    injected : ndarray
        Net volume pumped in.
    stored : ndarray
        Taken up by the rock, behind the target face and in the wellbore.
    leaked : ndarray
        Gone through the confining bed and through the target face: injected less stored.
    """

    times: np.ndarray
    injected: np.ndarray
    stored: np.ndarray
    leaked: np.ndarray

    def _title(self) -> str:
        return f"Volumes at {units.text(float(self.times[-1]), 'time')}"

    def _rows(self) -> Iterable[tuple[str, str]]:
        for name in ("injected", "stored", "leaked"):
            yield name, units.text(float(getattr(self, name)[-1]), "volume")

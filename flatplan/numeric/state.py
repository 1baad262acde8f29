"""The state of a medium at one moment, from which a simulation can go on."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np

from flatplan import units
from flatplan.numeric.elements import Mesh
from flatplan.numeric.model import DiscreteModel
from flatplan.records import Record


@dataclass(frozen=True, repr=False, eq=False)
class State(Record):
    """Pressure everywhere at one moment, as amplitudes of the modes of a model.

    Attributes
    ----------
    model : DiscreteModel
    time : float
        When [s], on the clock of the history that led here.
    amplitudes : ndarray
        shape (modes,).
    injected_volume : float
        Net volume injected up to then [m³].
    rate : float
        Injection rate just before [m³/s].
    """

    model: DiscreteModel
    time: float
    amplitudes: np.ndarray
    injected_volume: float = 0.0
    rate: float = 0.0

    def pressure(self, x: np.ndarray) -> np.ndarray:
        """Pressure change [Pa] at path coordinates ``x`` [m], shape (len(x),)."""
        return self.model.field(np.asarray(x, dtype=float)) @ self.amplitudes

    def on(self, other: DiscreteModel) -> np.ndarray:
        """The same pressure field as amplitudes of another model of the same medium, shape (modes,)."""
        if other is self.model:
            return self.amplitudes
        here = self.model
        drop = 0.0
        if here.medium.well.storage and here.medium.well_resistance:
            drop = float((here.readouts["bottomhole_pressure"].state - here.readouts["sandface_pressure"].state) @ self.amplitudes)
        return other.amplitudes(self.pressure(other.sample_positions()), drop)

    @property
    def mesh(self) -> Mesh:
        """The mesh of the model it is written in."""
        return self.model.mesh

    def _title(self) -> str:
        return f"State at {units.text(self.time, 'time')}"

    def _rows(self) -> Iterable[tuple[str, str]]:
        readouts = self.model.readouts
        if not self.model.medium.face.held:
            yield "change at the target", units.text(float(readouts["target_pressure"].state @ self.amplitudes), "pressure")
        yield "change at the sandface", units.text(float(readouts["sandface_pressure"].state @ self.amplitudes), "pressure")
        yield "stored volume", units.text(float(self.model.stored @ self.amplitudes), "volume")

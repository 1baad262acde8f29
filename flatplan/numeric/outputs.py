"""The outputs of one model under one rate, and how far those of two meshes are apart."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from flatplan.numeric.model import DiscreteModel
from flatplan.numeric.panels import Panels


@dataclass(frozen=True, eq=False)
class Outputs:
    """What one model gives at the output times.

    Attributes
    ----------
    model : DiscreteModel
    begin : ndarray
        Amplitudes at the start, shape (modes,).
    channels : dict of str to ndarray
        The model's readouts: pressure changes [Pa] and the sandface rate [m³/s], shape (n,).
    stored, leaked : ndarray
        Volume held, and volume that left through beds and face since the start [m³], shape (n,).
    """

    model: DiscreteModel
    begin: np.ndarray
    channels: dict[str, np.ndarray]
    stored: np.ndarray
    leaked: np.ndarray

    def pressures(self) -> list[str]:
        """Names of the channels that are pressures: a held face's target is a rate."""
        held = self.model.medium.face.held
        return [name for name in self.channels if name.endswith("_pressure") and not (held and name == "target_pressure")]

    def imbalance(self, injected: np.ndarray) -> float:
        """Largest ``|injected - leaked - stored|`` over the largest injected volume reached (where none is: over the stored one)."""
        gain = self.stored - float(self.model.stored @ self.begin)
        off = float(np.max(np.abs(injected - self.leaked - gain)))
        scale = float(np.max(np.abs(injected))) or float(np.max(np.abs(self.stored)))
        return off / scale if scale else off


def outputs(model: DiscreteModel, panels: Panels, times: np.ndarray, rates: tuple[np.ndarray, np.ndarray], begin: np.ndarray) -> Outputs:
    """Every output at ``times`` [s] for the rate in ``panels``, whose values there and just before are ``rates``."""
    channels = {name: np.empty(len(times)) for name in model.readouts}
    stored, leaked = np.empty((2, len(times)))
    volume = panels.volume(times)
    # ∫c dt from λ ∫c dt = g ∫Q dt - (c - c(0)); the constant mode of a medium that does not leak needs none
    moving = model.decay > 0.0
    weight = np.where(moving, model.leaked.state, 0.0) / np.where(moving, model.decay, 1.0)
    for part, states in model.states(panels, times, begin):
        sides = [(model.changes(states, rate[part]), rate[part]) for rate in rates]
        for name, readout in model.readouts.items():
            channels[name][part] = readout.of(states, *sides[int(readout.continuous)])
        stored[part] = states @ model.stored
        grown = states - begin
        leaked[part] = (model.drive * volume[part, None] - grown) @ weight + grown @ model.leaked.change
    return Outputs(model, begin, channels, stored, leaked)


@dataclass(frozen=True)
class Comparison:
    """How far two meshes are apart.

    Attributes
    ----------
    errors : dict of str to float
        Largest difference of each channel plus what the rate's polynomials may be off [Pa, m³/s].
    relative : float
        The largest of the pressures' errors over the scale, and of the rate's through a held face over its own.
    following : float
        The part of it that no finer mesh makes smaller: what the rate's polynomials may be off.
    largest_change : float
        Largest pressure change [Pa].
    """

    errors: dict[str, float]
    relative: float
    following: float
    largest_change: float


def compare(coarse: Outputs, fine: Outputs, panels: Panels, duration: float, scale: float | None) -> Comparison:
    """Compare the outputs of two meshes, relative to ``scale`` (the target's change; by default the largest simulated)."""
    model = fine.model
    follow = _following_error(model, panels, duration)
    errors = {name: float(np.max(np.abs(fine.channels[name] - coarse.channels[name]))) + follow[name] for name in model.readouts}
    largest = max(float(np.max(np.abs(fine.channels[name]))) for name in fine.pressures())
    held = model.medium.face.held
    scales = dict.fromkeys(fine.pressures(), largest if scale is None or held else scale)
    if held:
        scales["target_pressure"] = float(np.max(np.abs(fine.channels["target_pressure"]))) if scale is None else scale
    relative, following = (max(_over(found[name], scales[name]) for name in scales) for found in (errors, follow))
    return Comparison(errors, relative, following, largest)


def _following_error(model: DiscreteModel, panels: Panels, duration: float) -> dict[str, float]:
    """Bound for what the polynomials' departure from the history does to each channel.

    Pressure answers a rate at the well with a kernel that is never negative, and that at the sandface is largest and falls with time.
    So a rate off by δ all along moves a pressure by at most δ times its answer to a unit rate; one off by δ over a
    time w only, by at most δ times the sandface's answer to a unit rate of that length. Rates follow at most as they are.
    """
    well = 0.0 if model.medium.well.storage else abs(model.medium.well_resistance)
    common = min(panels.error, 1e-13 * panels.peak)
    above = panels.errors > common
    answers = model.unit_answer(np.append(np.diff(panels.edges)[above], duration))
    pressure = common * answers[-1] + float(panels.errors[above] @ answers[:-1])
    return {
        "target_pressure": panels.error if model.medium.face.held else pressure,
        "sandface_pressure": pressure,
        "bottomhole_pressure": pressure + well * panels.error,
        "sandface_rate": panels.error,
    }


def _over(error: float, scale: float) -> float:
    """``error / scale``, 0 where both are."""
    return float(error / scale) if scale > 0.0 else (0.0 if error == 0.0 else math.inf)

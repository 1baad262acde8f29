"""The outputs of one model under one rate, and how far those of two meshes are apart."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from flatplan.numeric.march import March
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


def outputs(model: DiscreteModel, way: March, volume: np.ndarray, rates: tuple[np.ndarray, np.ndarray], begin: np.ndarray) -> Outputs:
    """Every output at the times of ``way``, where ``volume`` [m³] is injected and the rates there and just before are ``rates``."""
    count = len(way.widths)
    channels = {name: np.empty(count) for name in model.readouts}
    stored, leaked = np.zeros((2, count))
    # ∫c dt from λ ∫c dt = g ∫Q dt - (c - c(0)); the constant mode of a medium that does not leak needs none
    moving = model.decay > 0.0
    weight = np.where(moving, model.leaked.state, 0.0) / np.where(moving, model.decay, 1.0)
    for part, states in model.states(way, begin):
        for name, readout in model.readouts.items():
            rate = rates[int(readout.continuous)][part]
            channels[name][part] = readout.of(states, model.changes(states, rate) if np.any(readout.change) else None, rate)
        stored[part] = states @ model.stored
        if model.medium.leaks:
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
    shares : dict of str to float
        The errors of the pressures, and of the rate through a held face, each over its scale (see `compare`).
    mesh, following : float
        The largest share due to the mesh, and the largest that no finer mesh makes smaller: what the rate's polynomials may be off.
    largest_change : float
        Largest pressure change [Pa].
    """

    errors: dict[str, float]
    shares: dict[str, float]
    mesh: float
    following: float
    largest_change: float

    @property
    def relative(self) -> float:
        """The largest of ``shares``."""
        return max(self.shares.values())


def compare(coarse: Outputs, fine: Outputs, panels: Panels, duration: float, scale: float | None) -> Comparison:
    """Compare the outputs of two meshes.

    Each error is taken relative to a scale: with ``scale`` (the target's change) that of the target to it, and that of each other
    pressure to the larger of it and that pressure's own largest change. A fast move needs pressures at the well far above the
    target's change, and no mesh resolves them to a share of the latter. Without ``scale``, every pressure's error is relative to the
    largest pressure change simulated, and the rate through a held face to its own largest.
    """
    model = fine.model
    follow = _following_error(model, panels, duration)
    meshes = {name: float(np.max(np.abs(fine.channels[name] - coarse.channels[name]))) for name in model.readouts}
    reached = {name: float(np.max(np.abs(fine.channels[name]))) for name in model.readouts}
    largest = max(reached[name] for name in fine.pressures())
    held = model.medium.face.held
    scales = dict.fromkeys(fine.pressures(), largest)
    if scale is not None:
        scales = {name: reached[name] if held else max(scale, reached[name]) for name in scales}
        scales["target_pressure"] = scale
    elif held:
        scales["target_pressure"] = reached["target_pressure"]
    errors = {name: meshes[name] + follow[name] for name in meshes}
    shares, mesh, following = ({name: _over(part[name], scales[name]) for name in scales} for part in (errors, meshes, follow))
    return Comparison(errors, shares, max(mesh.values()), max(following.values()), largest)


def _following_error(model: DiscreteModel, panels: Panels, duration: float) -> dict[str, float]:
    """Bound for what the polynomials' departure from the history does to each channel.

    Pressure answers a rate at the well with a kernel that is never negative, and that at the sandface is largest and falls with time.
    So a rate off by δ all along moves a pressure by at most δ times its answer to a unit rate; one off by δ over a
    time w only, by at most δ times the sandface's answer to a unit rate of that length. Rates follow at most as they are.
    The target answers far less than that, see `DiscreteModel.most_answers`.
    """
    well = 0.0 if model.medium.well.storage else abs(model.medium.well_resistance)
    common = min(panels.error, 1e-13 * panels.peak)
    above = panels.errors > common
    answers = model.unit_answer(np.append(np.diff(panels.edges)[above], duration))
    pressure = common * answers[-1] + float(panels.errors[above] @ answers[:-1])
    to_rate, to_volume = model.most_answers()
    target = min(to_volume * float(panels.errors @ np.diff(panels.edges)), to_rate * panels.error if panels.error else 0.0)
    return {
        "target_pressure": target if model.medium.face.held else min(target, pressure),
        "sandface_pressure": pressure,
        "bottomhole_pressure": pressure + well * panels.error,
        "sandface_rate": panels.error,
    }


def _over(error: float, scale: float) -> float:
    """``error / scale``, 0 where both are."""
    return float(error / scale) if scale > 0.0 else (0.0 if error == 0.0 else math.inf)

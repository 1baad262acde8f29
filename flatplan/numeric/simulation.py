"""Simulating a medium under a rate history, refined until the error estimate is below what is asked."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np

from flatplan import units
from flatplan.channels import Channels
from flatplan.numeric.elements import Mesh
from flatplan.numeric.first_mesh import FIRST_DEGREE, first_mesh
from flatplan.numeric.history import panels_of
from flatplan.numeric.march import March, march
from flatplan.numeric.model import DiscreteModel, discrete_model
from flatplan.numeric.outputs import Outputs, compare, outputs
from flatplan.numeric.panels import Panels
from flatplan.numeric.state import State
from flatplan.numeric.steps import Steps
from flatplan.records import Record, of_type
from flatplan.site.medium import Medium

MOST_REFINEMENTS = 6
_CAUSE = " (the rate has noise of its own)"


@dataclass(frozen=True, repr=False, eq=False)
class Simulation(Record):
    """A simulated history and what is known about its accuracy.

    Attributes
    ----------
    channels : Channels
        The outputs. For a held face ``target_pressure`` is the rate through it [m³/s].
    model : DiscreteModel
        The finest model used.
    panels : Panels
        The rate as piecewise polynomials.
    errors : dict
        For each pressure channel and the sandface rate the largest error estimate over the times asked for [Pa, m³/s]: the
        difference between the two finest meshes (so rather the error of the coarser), plus what the rate's polynomials may be off.
    grid_error : float
        The largest of the pressure channels' errors [Pa].
    relative_errors : dict
        The errors of the pressures, and of the rate through a held face, each over its scale: the largest pressure change (that rate: its
        own largest). Where a scale was given: for the target that scale, for another pressure the larger of it and its own largest change.
    relative_error : float
        The largest of ``relative_errors``.
    following_error : float
        The largest part of them that comes from following the rate by polynomials.
    converged : bool
        Whether that came below the tolerance before the cap on refinements.
    tolerance : float
        What was asked for.
    refinements : int
        How often the mesh was refined.
    largest_change : float
        Largest pressure change over all pressure channels and times [Pa].
    stored_volume, leaked_volume : ndarray
        What rock, face and wellbore hold more than at equilibrium, and what left through beds and face since the start [m³], shape (n,).
    mass_balance : float
        Largest ``|injected - leaked - stored|`` over the largest injected volume reached.
    begin : ndarray
        Amplitudes at the start, shape (modes,).
    start : float
        Pressure that changes are counted from [Pa].
    volume_before : float
        Volume that the initial state had been given already [m³].
    """

    channels: Channels
    model: DiscreteModel
    panels: Panels
    errors: dict[str, float]
    grid_error: float
    relative_errors: dict[str, float]
    relative_error: float
    following_error: float
    converged: bool
    tolerance: float
    refinements: int
    largest_change: float
    stored_volume: np.ndarray
    leaked_volume: np.ndarray
    mass_balance: float
    begin: np.ndarray
    start: float
    volume_before: float

    @property
    def modes(self) -> int:
        """Number of modes of the finest model."""
        return self.model.modes

    @cached_property
    def _way(self) -> March:
        return march(self.panels, self.channels.times)

    def amplitudes(self) -> np.ndarray:
        """Amplitudes of the modes at every output time, shape (n, modes): with `DiscreteModel.free`, what a stop there leads to."""
        found = np.empty((len(self.channels.times), self.modes))
        for part, states in self.model.states(self._way, self.begin):
            found[part] = states
        return found

    @cached_property
    def state(self) -> State:
        """The state at the last output time, from which `run` and `simulate` can go on."""
        last = self.channels.times[-1:]
        ((_, states),) = self.model.states(march(self.panels, last), self.begin)
        rate = float(self.panels.rate(last, before=True)[0])
        return State(self.model, float(last[0]), states[0], self.volume_before + float(self.panels.volume(last)[0]), rate)

    def pressure(self, x: Any) -> np.ndarray:
        """Absolute pressure [Pa] at path coordinates ``x`` [m] and the output times, shape (len(x), n).

        Raises
        ------
        ValueError
            A coordinate off the path.
        """
        field = self.model.field(self.model.medium.positions(x))
        found = np.empty((len(field), len(self.channels.times)))
        for part, states in self.model.states(self._way, self.begin):
            found[:, part] = field @ states.T
        return self.start + found

    def _title(self) -> str:
        return f"Simulation at {len(self.channels.times)} times"

    def _rows(self) -> Iterable[tuple[str, str]]:
        yield "modes", str(self.modes)
        yield "largest pressure change", units.text(self.largest_change, "pressure")
        yield "grid error", units.text(self.grid_error, "pressure", "SI")
        yield "mass balance", f"{self.mass_balance:.1e} of the injected volume"
        yield "converged", f"{'yes' if self.converged else 'no'}, to {self.relative_error:.1e} ({self.tolerance:g} asked)"


def simulate(
    medium: Medium,
    history: Any,
    times: Any,
    start: Any = 0.0,
    *,
    tolerance: float = 1e-8,
    knots: Any = None,
    initial: State | None = None,
) -> Channels:
    """What a medium does under a rate history, by an independent discretised model.

    Parameters
    ----------
    medium : Medium
    history : Steps, plan or callable
        The injection rate. A function takes times [s], shape (n,), and gives rates [m³/s], shape (n,).
    times : array_like
        Output times [s], zero or more, increasing.
    start : float, str or quantity
        Pressure at which everything is at rest before the rate begins [Pa].
    tolerance : float
        Error asked for, relative to the largest pressure change over all pressure channels; between 1e-13 and 0.1.
    knots : array_like, optional
        Times [s] where a function jumps, bends or is not analytic.
    initial : State, optional
        A state to go on from instead of rest (`Simulation.state`); output times must not lie before it.

    Returns
    -------
    Channels
        Arrays of shape (len(times),), SI. For a held face ``target_pressure`` is the rate through it [m³/s].

    Raises
    ------
    ValueError
        Times that do not increase or are negative, a rate that is not finite or too rough, a tolerance that cannot be reached.
    TypeError
        A medium, history or state of another type.

    Notes
    -----
    Spectral elements in space, exact in time (see `flatplan.numeric`). Rest at ``start`` is assumed before time 0, or before the
    first edge of `Steps` that begin earlier. At a jump of the rate the rate that begins there counts. Rounding, which the
    error estimate does not contain, stays near 1e-13 of the largest change; for outputs only 1e-9 travel times after a jump it
    grows to 1e-10.

    Examples
    --------
    >>> from flatplan.site import Fluid, Rock, slab
    >>> rock = Rock(permeability="40 mD", porosity=0.12, compressibility="5e-10 1/Pa")
    >>> medium = slab(length="140 m", area="6000 m^2", rock=rock, fluid=Fluid(viscosity="0.5 cP", compressibility="4.5e-10 1/Pa"))
    >>> pumped = Steps(edges=["0 h", "12 h"], rates=["2 L/s"])
    >>> out = simulate(medium, pumped, ["12 h", "5 d"], start="21 MPa")
    >>> (out.target_pressure / 1e6).round(4)
    array([21.8037, 21.9023])
    """
    found = run(medium, history, times, start, tolerance=tolerance, knots=knots, initial=initial)
    if not found.converged:
        raise ValueError(
            f"tolerance: got {found.tolerance:g}, but the error estimate stayed at {found.relative_error:.1e} of the largest pressure "
            f"change after {found.refinements} refinements{_CAUSE if found.following_error > found.tolerance else ''}; "
            "it takes a larger one."
        )
    return found.channels


def run(
    medium: Medium,
    history: Any,
    times: Any,
    start: Any = 0.0,
    *,
    tolerance: float = 1e-8,
    knots: Any = None,
    initial: State | None = None,
    scale: float | None = None,
) -> Simulation:
    """As `simulate`, with the model, the error estimates and the balances; says whether it converged instead of raising.

    Parameters
    ----------
    medium, history, times, start, tolerance, knots, initial
        As in `simulate`.
    scale : float, optional
        Change of the target [Pa] that the tolerance refers to (held face: of its rate [m³/s]); for the other pressures their own largest
        change counts where it is larger (held face: always). By default the largest pressure change simulated counts for all.

    Returns
    -------
    Simulation

    Raises
    ------
    ValueError, TypeError
        As `simulate`, but for a tolerance that is not reached.
    """
    of_type(medium, Medium, "medium", "a flatplan medium")
    start_pressure = units.si(start, "pressure", "start")
    at = _checked_times(times)
    tolerance = units.si(tolerance, "fraction", "tolerance", "positive")
    if not 1e-13 <= tolerance <= 0.1:
        raise ValueError(f"tolerance: got {tolerance:g}; it takes a share of the largest pressure change from 1e-13 to 0.1.")
    begin = min(0.0, float(history.edges[0])) if isinstance(history, Steps) else 0.0
    if initial is not None:
        begin = _checked_initial(initial, medium, at)
    # a run of no length still needs a panel
    end = float(at[-1]) if at[-1] > begin else begin + float(medium.travel_time)
    panels = panels_of(history, begin, end, knots, _volume_that_shows(medium, history, tolerance, scale))
    rates = panels.rate(at, before=True)
    rates_before = rates.copy()
    rates_before[at == begin] = initial.rate if initial is not None else 0.0
    if isinstance(history, Steps):
        rates = history.panels.rate(at)
    else:
        # a function has no edge where it ends, so its last value is the one before
        jumps = np.isin(at, panels.edges[:-1])
        rates[jumps] = panels.rate(at[jumps])
    way, injected = march(panels, at), panels.volume(at)

    def on(mesh: Mesh) -> Outputs:
        model = discrete_model(medium, mesh)
        return outputs(model, way, injected, (rates, rates_before), model.rest() if initial is None else initial.on(model))

    mesh = first_mesh(medium, panels, at, tolerance)
    if initial is not None:
        mesh = Mesh(mesh.degree, max(mesh.layers, initial.mesh.layers))
    coarse, fine = on(mesh), on(mesh.finer())
    found = compare(coarse, fine, panels, float(at[-1]) - begin, scale)
    refinements = 1
    # What follows the rate too loosely for the tolerance stops it only where it is the larger part. `converged` says what ended it.
    while found.relative > tolerance and (found.following <= tolerance or found.mesh > found.following) and refinements < MOST_REFINEMENTS:
        coarse, fine = fine, on(fine.model.mesh.finer())
        found = compare(coarse, fine, panels, float(at[-1]) - begin, scale)
        refinements += 1
    before = initial.injected_volume if initial is not None else 0.0
    channels = Channels(
        times=at,
        injection_rate=rates,
        sandface_rate=fine.channels["sandface_rate"],
        bottomhole_pressure=start_pressure + fine.channels["bottomhole_pressure"],
        sandface_pressure=start_pressure + fine.channels["sandface_pressure"],
        target_pressure=fine.channels["target_pressure"] + (0.0 if medium.face.held else start_pressure),
        injected_volume=before + injected,
        target_kind="rate" if medium.face.held else "pressure",
    )
    return Simulation(
        channels=channels,
        model=fine.model,
        panels=panels,
        errors=found.errors,
        grid_error=max(found.errors[name] for name in fine.pressures()),
        relative_errors=found.shares,
        relative_error=found.relative,
        following_error=found.following,
        converged=found.relative <= tolerance,
        tolerance=tolerance,
        refinements=refinements,
        largest_change=found.largest_change,
        stored_volume=fine.stored,
        leaked_volume=fine.leaked,
        mass_balance=fine.imbalance(injected),
        begin=fine.begin,
        start=start_pressure,
        volume_before=before,
    )


def _volume_that_shows(medium: Medium, history: Any, tolerance: float, scale: float | None) -> float:
    """Volume by which a rate may be off before the target shows half of the tolerance [m³]."""
    if scale is None or isinstance(history, Steps | Panels):
        return math.inf
    # any mesh has the slowest decay; this one is where most plans begin
    _, to_volume = discrete_model(medium, Mesh(FIRST_DEGREE, 1)).most_answers()
    return tolerance / 2.0 * scale / to_volume


def _checked_times(times: Any) -> np.ndarray:
    at = units.si_array(times, "time", "times")
    if at[0] < 0.0:
        raise ValueError(f"times: got {at[0]:g} s; output times are zero or more.")
    wrong = np.flatnonzero(np.diff(at) <= 0.0)
    if wrong.size:
        i = int(wrong[0])
        raise ValueError(
            f"times: got {at[i]:.10g} s followed by {at[i + 1]:.10g} s at position {i + 1}; it takes times that strictly increase."
        )
    return at


def _checked_initial(initial: Any, medium: Medium, times: np.ndarray) -> float:
    of_type(initial, State, "initial", "a State, as Simulation.state gives it")
    if initial.model.medium != medium:
        raise ValueError("initial: got the state of another medium; simulate the past on this medium first.")
    if times[0] < initial.time:
        raise ValueError(f"times: got {times[0]:g} s, before the initial state at {initial.time:g} s; it takes times from there on.")
    return float(initial.time)

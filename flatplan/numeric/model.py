"""The model of a medium: its decaying modes, found once, and exact steps in time.

``M p' + K p = b Q`` is split by the symmetric eigenproblem ``M w = ν (K + σ M) w`` with ``σ = 1/t_D``. Its
largest ν belong to the slowest modes, and LAPACK finds large eigenvalues to rounding relative to themselves; the
plain problem ``K v = λ M v`` would bury slow modes under the rounding of the fastest, 1e12 and more times larger.
The decay rates then come from the energies, ``λ = wᵀKw / wᵀMw``: sums of squares, with an error of second order in that
of ``w`` (Parlett 1980, ch. 4 and 15) [Parlett1980]. Where nothing leaks, mode 0 is known and is set: constant, λ = 0.

With ``w`` scaled so that ``wᵀ(K + σM)w = 1`` and ``p = Σ c_n w_n``:

    c_n' = -λ_n c_n + g_n Q,      g_n = (λ_n + σ) w_nᵀ b.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
import scipy.linalg

from flatplan.numeric.assembly import Assembly, assemble
from flatplan.numeric.elements import Mesh, sample_points, shapes
from flatplan.numeric.exponential import decay_moments
from flatplan.numeric.march import March, chained
from flatplan.numeric.panels import Panels
from flatplan.site.medium import Medium

# Numbers held at a time while many times are worked through [doubles].
_CHUNK = 2_000_000
# Steps of one length from which on a matrix product beats working through them one by one.
_ALIKE = 8


@dataclass(frozen=True, eq=False)
class Readout:
    """One output as a linear function of the state: ``state · c + change · c' + rate Q``.

    Attributes
    ----------
    state : ndarray
        Weight of each mode's amplitude, shape (modes,).
    change : ndarray
        Weight of each amplitude's rate of change [s times the unit of ``state``], shape (modes,).
    rate : float
        Weight of the injection rate.
    continuous : bool
        True where the output does not jump with the rate although ``change`` does: at a jump, take rate and rates of change from before
        it. (After it they hold the answer of modes finer than the mesh, which is no answer of the medium.)
    """

    state: np.ndarray
    change: np.ndarray
    rate: float = 0.0
    continuous: bool = False

    def of(self, states: np.ndarray, changes: np.ndarray | None, rates: np.ndarray) -> np.ndarray:
        """The output for states and their rates of change, shape (n, modes; None: of no weight), and rates, shape (n,)."""
        found = states @ self.state + self.rate * rates
        return found if changes is None else found + changes @ self.change


@dataclass(frozen=True, eq=False)
class DiscreteModel:
    """A medium on one mesh, as decaying modes; made by `discrete_model`, which keeps the latest ones.

    Attributes
    ----------
    medium : Medium
    mesh : Mesh
    assembly : Assembly
        The matrices that the modes come from.
    decay : ndarray
        λ of each mode [1/s], slowest first, shape (modes,).
    drive : ndarray
        How the injection rate drives each amplitude, g [1/m³ times the unit of an amplitude], shape (modes,).
    vectors : ndarray
        The modes in the unknowns of ``assembly``, shape (unknowns, modes).
    readouts : dict of str to Readout
        "target_pressure", "sandface_pressure", "bottomhole_pressure" (changes from the start; of a held face's target the rate
        through it) and "sandface_rate".
    stored : ndarray
        Volume held by each mode in rock, face and wellbore [m³ per unit amplitude], shape (modes,).
    leaked : Readout
        Rate that leaves through beds and face.
    """

    medium: Medium
    mesh: Mesh
    assembly: Assembly
    decay: np.ndarray
    drive: np.ndarray
    vectors: np.ndarray
    readouts: dict[str, Readout]
    stored: np.ndarray
    leaked: Readout

    @property
    def modes(self) -> int:
        """Number of modes."""
        return len(self.decay)

    def rest(self) -> np.ndarray:
        """The amplitudes of equilibrium: zeros, shape (modes,)."""
        return np.zeros(self.modes)

    def unit_answer(self, durations: np.ndarray) -> np.ndarray:
        """Sandface pressure change [Pa s/m³] at the end of a unit rate of each duration [s] from rest, shape of ``durations``."""
        (means,) = decay_moments(np.outer(durations, self.decay), 0)
        return durations * (means @ (self.drive * self.readouts["sandface_pressure"].state))

    def most_answers(self) -> tuple[float, float]:
        """What the target answers at most to a unit rate [Pa s/m³] and to a unit volume [Pa/m³] (held face: 1 and [1/s]).

        The rate is ``Σ c_k y^(k)`` of the target, so the transfer function from it to the target has no zeros: a chain of decays
        ``G / Π (1 + s/λ)``, whose kernel is never negative, has area G, and is nowhere above ``λ G`` with the slowest λ, since no further
        decay raises the maximum of the first. Where nothing leaks, G is infinite and ``λ G`` is the answer of the constant mode.
        """
        weights = self.readouts["target_pressure"].state * self.drive
        if not self.decay[0]:
            return np.inf, float(weights[0])
        lasting = float(np.sum(weights / self.decay))
        return lasting, lasting * float(self.decay[0])

    def panel_starts(self, panels: Panels, initial: np.ndarray) -> np.ndarray:
        """Amplitudes at every edge of ``panels`` from ``initial`` at the first one, shape (m + 1, modes)."""
        states = np.empty((len(panels.edges), self.modes))
        states[0] = initial
        widths = np.diff(panels.edges)
        for part in self._parts(len(widths), panels.degree):
            states[1:][part] = self._steps(panels.coefficients[part], *np.unique(widths[part], return_inverse=True))
        for k, width in enumerate(widths):
            states[k + 1] += states[k] * np.exp(-width * self.decay)
        return states

    def states(self, way: March, initial: np.ndarray) -> Iterator[tuple[slice, np.ndarray]]:
        """Amplitudes at the times of ``way``, exact mode by mode, in parts that fit in memory.

        Parameters
        ----------
        way : March
            Rate and times; its panels' first edge is where ``initial`` holds.
        initial : ndarray
            Amplitudes at the first edge, shape (modes,).

        Yields
        ------
        slice, ndarray
            Which times, and the amplitudes there, shape (len, modes).
        """
        starts = self.panel_starts(way.panels, initial)
        state = initial
        for part in self._parts(len(way.widths), way.panels.degree):
            widths, kind = way.kinds(part)
            states = self._steps(way.coefficients[part], widths, kind)
            kept = np.exp(-np.outer(widths, self.decay))[kind]
            anew = np.flatnonzero(way.panel[part] >= 0)
            states[anew] += kept[anew] * starts[way.panel[part][anew]]
            kept[anew] = 0.0
            states = chained(states, kept, state)
            state = states[-1]
            yield part, states

    def _steps(self, coefficients: np.ndarray, widths: np.ndarray, kind: np.ndarray) -> np.ndarray:
        """Amplitudes after one step each from rest, shape (n, modes); step i is ``widths[kind[i]]`` long."""
        moments = decay_moments(np.outer(widths, self.decay), coefficients.shape[1] - 1)
        scaled = coefficients * widths[kind][:, None]
        found = np.empty((len(kind), self.modes))
        many = np.bincount(kind) >= _ALIKE
        single = np.flatnonzero(~many[kind])
        found[single] = np.einsum("jnm,nj->nm", moments[:, kind[single]], scaled[single])
        for k in np.flatnonzero(many):
            own = np.flatnonzero(kind == k)
            found[own] = scaled[own] @ moments[:, k]
        found *= self.drive
        return found

    def _parts(self, count: int, degree: int) -> Iterator[slice]:
        step = max(1, _CHUNK // ((degree + 3) * self.modes))
        for low in range(0, count, step):
            yield slice(low, min(low + step, count))

    def changes(self, states: np.ndarray, rates: np.ndarray) -> np.ndarray:
        """``dc/dt`` for amplitudes, shape (n, modes), and injection rates [m³/s], shape (n,)."""
        return self.drive * rates[:, None] - self.decay * states

    def free(self, channel: str, states: np.ndarray, after: np.ndarray) -> np.ndarray:
        """An output after the rate stops: what each state does on its own.

        Parameters
        ----------
        channel : str
            A name in ``readouts``.
        states : ndarray
            Amplitudes when the rate stops, shape (n, modes).
        after : ndarray
            Times since then [s], shape (k,).

        Returns
        -------
        ndarray
            shape (n, k).
        """
        readout = self.readouts[channel]
        weights = readout.state - self.decay * readout.change
        return (states * weights) @ np.exp(-np.outer(self.decay, after))

    def field(self, x: np.ndarray) -> np.ndarray:
        """Matrix from amplitudes to pressure changes at path coordinates ``x`` [m], shape (len(x), modes)."""
        parts = self.assembly.elements
        distance = self.medium.length - x
        nears = np.array([e.near for e in parts])[::-1]  # rising from the sandface
        owner = len(parts) - 1 - np.clip(np.searchsorted(nears, distance, side="right") - 1, 0, len(parts) - 1)
        local = self.assembly.local(self.vectors)
        rows = np.empty((len(x), self.modes))
        for i in np.unique(owner):
            here = owner == i
            rows[here] = shapes(parts[i].reference(distance[here]), parts[i].degree) @ local[i]
        return rows

    def sample_positions(self) -> np.ndarray:
        """Path coordinates [m] at which pressures fix a field on this mesh, ``degree + 1`` for each element in path order."""
        return self.medium.length - np.concatenate([e.distance(sample_points(e.degree)) for e in self.assembly.elements])

    def amplitudes(self, samples: np.ndarray, well_drop: float = 0.0) -> np.ndarray:
        """Amplitudes of a pressure field.

        Parameters
        ----------
        samples : ndarray
            Pressure changes at `sample_positions` [Pa].
        well_drop : float
            Bottomhole less sandface pressure [Pa], where both R and C_w are above zero.

        Returns
        -------
        ndarray
            shape (modes,).
        """
        unknowns = np.zeros(len(self.assembly.mass))
        unknowns[0] = samples[0]
        used = 0
        for element, drop in zip(self.assembly.elements, self.assembly.drops, strict=True):
            count = element.degree + 1
            fitted = np.linalg.solve(shapes(sample_points(element.degree), element.degree), samples[used : used + count])
            unknowns[drop : drop + element.degree] = fitted[1:]
            used += count
        if self.medium.well.storage and self.medium.well_resistance:
            unknowns[-1] = well_drop
        # the modes are orthonormal in K + σM
        return self.vectors.T @ (self.assembly.stiffness @ unknowns + (self.assembly.mass @ unknowns) / self.medium.travel_time)


@lru_cache(maxsize=32)
def discrete_model(medium: Medium, mesh: Mesh) -> DiscreteModel:
    """The modes of ``medium`` on ``mesh``, kept for the next call (media are compared by value).

    Parameters
    ----------
    medium : Medium
    mesh : Mesh

    Returns
    -------
    DiscreteModel

    Raises
    ------
    ValueError
        A negative well resistance together with wellbore storage.
    """
    assembly = assemble(medium, mesh)
    held = medium.face.held
    free = slice(1, None) if held else slice(None)
    shift = 1.0 / float(medium.travel_time)
    mass, stiffness = assembly.mass[free, free], assembly.stiffness[free, free]
    shifted = stiffness + shift * mass
    # check_finite costs as much as assembling; the inputs come from finite records
    _, vectors = scipy.linalg.eigh(mass, shifted, check_finite=False)
    vectors = vectors[:, ::-1]  # slowest first
    whole = np.zeros((len(assembly.mass), vectors.shape[1]))
    whole[free] = vectors
    if not medium.leaks:
        whole = _with_constant(whole, assembly, shift)
    stored_energy, flow_energy = assembly.energies(whole)
    decay = flow_energy / stored_energy
    if not medium.leaks:
        decay[0] = 0.0
    scale = 1.0 / np.sqrt(flow_energy + shift * stored_energy)
    whole *= scale
    drive = (decay + shift) * (assembly.load @ whole)

    none = np.zeros(len(decay))
    leaked = Readout(assembly.leak @ whole, none)
    if held:
        # what does not balance at the held face flows out there
        target = Readout(-(assembly.face_stiffness @ whole), -(assembly.face_mass @ whole), continuous=True)
        leaked = Readout(leaked.state + target.state, target.change)
    else:
        target = Readout(whole[0], none)
    sandface = Readout(assembly.sandface @ whole, none)
    resistance, wellbore_storage = medium.well_resistance, medium.well.storage
    if not wellbore_storage:
        wellbore = Readout(sandface.state, none, resistance)
        sandface_rate = Readout(none, none, 1.0)
    elif resistance:
        wellbore = Readout(assembly.load @ whole, none)
        sandface_rate = Readout(whole[-1] / resistance, none)
    else:
        wellbore = sandface
        sandface_rate = Readout(none, -wellbore_storage * sandface.state, 1.0, continuous=True)
    readouts = {
        "target_pressure": target,
        "sandface_pressure": sandface,
        "bottomhole_pressure": wellbore,
        "sandface_rate": sandface_rate,
    }
    return DiscreteModel(medium, mesh, assembly, decay, drive, whole, readouts, assembly.content @ whole, leaked)


def _with_constant(vectors: np.ndarray, assembly: Assembly, shift: float) -> np.ndarray:
    """The modes with the slowest replaced by the constant, and the others made orthogonal to it."""
    constant = np.zeros(len(vectors))
    constant[0] = 1.0 / np.sqrt(shift * assembly.mass[0, 0])
    others = vectors[:, 1:]
    others = others - np.outer(constant, shift * constant[0] * (assembly.mass[0] @ others))
    return np.column_stack([constant, others])

"""``confirm`` against scipy's implicit integrators and against a general-purpose finite-element package.

Outside models are driven by our rate, handed to them as a spline, and their error is the largest departure of the
target pressure from the target, relative to its change: our plan is exact to far better than any of them reaches.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from scipy.integrate import solve_ivp
from scipy.interpolate import make_interp_spline
from scipy.sparse import csc_matrix, diags_array
from scipy.sparse.linalg import splu
from skfem import Basis, ElementLineP2, ElementLinePp, MeshLine, asm
from skfem.models.poisson import laplace, mass

import flatplan as fp
from flatplan.numeric import discrete_model

from .jobs import CHANGE, Job, one_bump
from .table import Row, by_turns, faster

AIM = 20.0
FLOOR = 1e-13  # least error that scipy's integrators follow with profit
_OUTPUTS = 200


class _Wanted:
    """The job's rate as a spline, and the target at a few times."""

    def __init__(self, job: Job) -> None:
        self.job = job
        (segment,) = job.plan.medium.segments
        self.length = segment.end
        self.storage = segment.capacity * segment.area_factor
        self.conductance = segment.mobility * segment.area_factor
        nodes = np.linspace(0.0, job.duration, 3001)
        self.rate = make_interp_spline(nodes, job.plan.rate(nodes), k=7)
        self.times = np.linspace(0.0, job.duration, _OUTPUTS)
        self.change = job.plan.target.pressure(self.times) - job.plan.target.start

    def error(self, target_change: np.ndarray) -> float:
        return float(np.abs(target_change - self.change).max()) / CHANGE


def _solved(wanted: _Wanted, slope: Callable, matrix: object, size: int, method: str, closeness: float) -> np.ndarray:
    """``solve_ivp`` from rest, told that the slope is linear: values at the wanted times, shape (size, times)."""
    span, start = (0.0, wanted.job.duration), np.zeros(size)
    return solve_ivp(slope, span, start, method, wanted.times, jac=matrix, rtol=closeness, atol=closeness * CHANGE).y


def finite_volumes(wanted: _Wanted, cells: int, method: str) -> float:
    """Method of lines: cell-centred finite volumes, ``solve_ivp`` with tolerances below the error in space."""
    h = wanted.length / cells
    link = wanted.conductance / h / (wanted.storage * h)
    middle = np.full(cells, -2.0 * link)
    middle[[0, -1]] = -link
    matrix = csc_matrix(diags_array([np.full(cells - 1, link), middle, np.full(cells - 1, link)], offsets=[-1, 0, 1]))
    gain = np.zeros(cells)
    gain[-1] = 1.0 / (wanted.storage * h)

    def slope(t: float, p: np.ndarray) -> np.ndarray:
        return matrix @ p + gain * wanted.rate(t)

    closeness = 0.02 / cells**2
    solved = _solved(wanted, slope, matrix, cells, method, closeness)
    # at the sealed face the parabola through the first two cells has no slope
    return wanted.error((9.0 * solved[0] - solved[1]) / 8.0)


def elements_in_time(wanted: _Wanted, closeness: float, method: str) -> float:
    """Method of lines on four finite elements of degree 8 (scikit-fem), ``solve_ivp`` with ``rtol = closeness``."""
    basis = Basis(MeshLine(np.linspace(0.0, wanted.length, 5)), ElementLinePp(8), intorder=18)
    stiff = (wanted.conductance * asm(laplace, basis)).toarray()
    weight = (wanted.storage * asm(mass, basis)).toarray()
    face, sand = (int(basis.nodal_dofs[0, i]) for i in (0, 4))
    matrix = -np.linalg.solve(weight, stiff)
    gain = np.linalg.solve(weight, np.eye(basis.N)[sand])

    def slope(t: float, p: np.ndarray) -> np.ndarray:
        return matrix @ p + gain * wanted.rate(t)

    return wanted.error(_solved(wanted, slope, matrix, basis.N, method, closeness)[face])


def finite_elements(wanted: _Wanted, elements: int) -> float:
    """scikit-fem: quadratic elements in space, Crank–Nicolson in time, one step count for both errors to fall alike."""
    mesh = MeshLine(np.linspace(0.0, wanted.length, elements + 1))
    basis = Basis(mesh, ElementLineP2())
    stiff, weight = wanted.conductance * asm(laplace, basis), wanted.storage * asm(mass, basis)
    face, sand = (int(basis.nodal_dofs[0, i]) for i in (0, elements))
    per_output = max(1, elements**2 // (2 * _OUTPUTS))
    steps = per_output * (_OUTPUTS - 1)
    dt = wanted.job.duration / steps
    solve = splu(csc_matrix(weight / dt + 0.5 * stiff)).solve
    old = csc_matrix(weight / dt - 0.5 * stiff)
    rates = wanted.rate(np.linspace(0.0, wanted.job.duration, steps + 1))
    p, found = np.zeros(basis.N), [0.0]
    for i in range(steps):
        load = old @ p
        load[sand] += 0.5 * (rates[i] + rates[i + 1])
        p = solve(load)
        if (i + 1) % per_output == 0:
            found.append(float(p[face]))
    return wanted.error(np.array(found))


@dataclass(frozen=True)
class _AtError:
    """What a model needs to reach an error: from runs of growing fineness, time as a power of the error."""

    seconds: float
    best: float  # least error that was run
    extrapolated: bool

    @classmethod
    def of(cls, runs: Sequence[tuple[float, float]], error: float) -> _AtError:
        """From (error, seconds) of each run: between the two that enclose ``error``, else beyond the most accurate."""
        runs = sorted(runs, reverse=True)
        finer = next((i for i, run in enumerate(runs) if run[0] <= error), len(runs) - 1)
        coarser = max(finer - 1, 0) if runs[finer][0] <= error else 0
        (e0, t0), (e1, t1) = runs[coarser], runs[finer]
        power = max(math.log(t1 / t0) / math.log(e0 / e1), 0.0) if finer > coarser else 0.0
        return cls(t1 * (e1 / error) ** power, e1, e1 > error)


def confirmation(quick: bool) -> list[Row]:
    """Confirming one plan, at equal error: at our model's own estimate, and at the error it has, as far as others can follow.

    No tolerance of scipy's integrators brings the error much below 1e-13, so that is where the second comparison stops.
    """
    job = one_bump(0.5, 1.8)
    wanted = _Wanted(job)
    repeats = 1 if quick else 4
    fresh = [one_bump(0.5, 1.8).plan for _ in range(repeats + 1)]
    check = fp.confirm(job.plan)
    estimate, found = check.grid_error / CHANGE, check.target_error / CHANGE
    lowest = max(found, FLOOR)
    levels = ((estimate, f"error {estimate:.0e}, our own estimate"), (lowest, f"error {lowest:.0e} (ours: {found:.0e})"))
    close = (1e-10, 1e-12, 3e-14)
    cells = (400, 1600) if quick else (1600, 6400)
    others = (
        ("scipy Radau, elements of degree 8", lambda v: elements_in_time(wanted, v, "Radau"), close, AIM),
        ("scipy BDF, elements of degree 8", lambda v: elements_in_time(wanted, v, "BDF"), close, AIM),
        ("scipy Radau, finite volumes", lambda v: finite_volumes(wanted, v, "Radau"), cells, AIM),
        ("scipy BDF, finite volumes", lambda v: finite_volumes(wanted, v, "BDF"), cells, AIM),
        ("scikit-fem P2, Crank–Nicolson", lambda v: finite_elements(wanted, v), (40, 80) if quick else (80, 160), None),
    )
    models = [(row, model, value) for row, (_, model, fineness, _) in enumerate(others) for value in fineness]
    errors = [0.0] * len(models)

    def own() -> None:
        discrete_model.cache_clear()  # media are compared by value: each confirmation finds its modes anew
        fp.confirm(fresh.pop())

    def side(i: int) -> None:
        errors[i] = models[i][1](models[i][2])

    sides = [lambda i=i: side(i) for i in range(len(models))]
    ours, *seconds = by_turns([own, *sides], repeats, budget=90.0, shortest=0.0)
    runs: list[list[tuple[float, float]]] = [[] for _ in others]
    for (row, _, _), error, spent in zip(models, errors, seconds, strict=True):
        runs[row].append((error, spent))
    rows = []
    for error, label in levels:
        for (name, _, _, least), measured in zip(others, runs, strict=True):
            at = _AtError.of(measured, error)
            how = f"{name}, continued from {at.best:.0e}" if at.extrapolated else name
            rows.append(faster(f"confirm, X = 0.5, {label}", how, ours, at.seconds, least=least, extrapolated=at.extrapolated))
    return rows

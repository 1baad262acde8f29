"""Confirming a plan, or the rate as it will be pumped, on the independent model."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any

import numpy as np

from flatplan import units
from flatplan.channels import Channels
from flatplan.numeric.simulation import run
from flatplan.numeric.steps import Steps
from flatplan.records import Record

ALLOWED_PLAN = 1e-6
ALLOWED_STEPS = 1e-2
MOST_IMBALANCE = 1e-9
TIMES = 1500


@dataclass(frozen=True, repr=False, eq=False)
class Check(Record):
    """What the independent model says of a plan; pressures in Pa (held face: the target's numbers are rates, m³/s).

    Attributes
    ----------
    subject : str
        "plan", or "steps" for a rate as pumped.
    target_error : float
        Largest departure of the simulated target pressure from the target [Pa].
    when : float
        Where that is [s].
    settling_error : float
        Departure when the target ends [Pa].
    target_change : float
        Largest change the target asks for, the scale of the errors [Pa].
    grid_error : float
        The model's own error estimate for the target pressure [Pa] (held face: for the rate through it [m³/s]).
    other_error : float
        The same for the other pressures, the largest: each relative to the larger of the target's change and its own largest change. (A
        fast move needs pressures at the well far above the target's change.)
    mass_balance : float
        Largest ``|injected - leaked - stored|`` over the largest injected volume reached.
    allowed : float
        Share of the change that the target may be off.
    tolerance : float
        Share that the model aims at for its own errors.
    modes : int
        Number of modes of the model.
    channels : Channels
        The simulated outputs at the times compared; for a held face its pressures count from the target's ``pressure=``.
    wanted : ndarray
        The target at those times [Pa, absolute], shape (n,).
    """

    subject: str
    target_error: float
    when: float
    settling_error: float
    target_change: float
    grid_error: float
    other_error: float
    mass_balance: float
    allowed: float
    tolerance: float
    modes: int
    channels: Channels
    wanted: np.ndarray
    _kind: str = "pressure"

    @property
    def confirmed(self) -> bool:
        """Target error within ``allowed``, mass balance within 1e-9, and grid errors too small to matter: see `confirm`."""
        grid = max(self.tolerance, self.allowed / 10.0)
        return (
            self.target_error <= self.allowed * self.target_change
            and self.mass_balance <= MOST_IMBALANCE
            and self.grid_error <= grid * self.target_change
            and self.other_error <= grid
        )

    def _title(self) -> str:
        what = "plan" if self.subject == "plan" else "rate as pumped"
        return f"Check of the {what}: {'confirmed' if self.confirmed else 'not confirmed'}"

    def _rows(self) -> Iterable[tuple[str, str]]:
        def of_change(value: float) -> str:
            return f"{units.text(value, self._kind, 'SI')} ({value / self.target_change:.1e} of the change)"

        yield "target error", f"{of_change(self.target_error)}, at {units.text(self.when, 'time')}"
        yield "allowed", f"{self.allowed:g} of the change"
        yield "error at the end", of_change(self.settling_error)
        yield "grid error", of_change(self.grid_error)
        yield "grid error at the well", f"{self.other_error:.1e} of the pressures there"
        yield "mass balance", f"{self.mass_balance:.1e} of the injected volume"
        yield "modes", str(self.modes)


def confirm(subject: Any, *, tolerance: float = 1e-8, allowed: float | None = None, times: Any = None) -> Check:
    """Drive the independent model with a plan's rate, or with the rate as pumped, and compare the target pressure with the target.

    Parameters
    ----------
    subject : Plan, or Steps made from one
        What to confirm.
    tolerance : float
        What the model's own error estimates are brought below: for the target pressure relative to the target's change, for another
        pressure to the larger of that and its own largest change.
    allowed : float, optional
        Share of the change that the target pressure may be off: by default 1e-6 for a plan, 1e-2 for a rate as pumped.
    times : array_like, optional
        When to compare [s], zero or more, strictly increasing; by default 1500 times to the end with all knots, and 200
        beyond the end.

    Returns
    -------
    Check
        ``check.confirmed`` is ``target_error ≤ allowed · change`` and ``mass_balance ≤ 1e-9`` and
        ``grid_error ≤ max(tolerance, allowed / 10) · change`` and ``other_error ≤ max(tolerance, allowed / 10)``. A model that does
        not reach its tolerance is no error: its grid errors say so, and the last conditions judge them.

    Raises
    ------
    TypeError
        A subject that is neither a plan nor steps made from one.
    ValueError
        A tolerance or share that makes no sense, times that are not increasing.

    Notes
    -----
    The run goes on past the end by a tenth of the plan or one travel time, whichever is more (but by no more than the plan's
    own duration), at the settled rate. A rate as pumped is zero after its last step; where the medium leaks, the
    comparison therefore ends with the last step.
    """
    plan, pumped = _parts(subject)
    tolerance = units.si(tolerance, "fraction", "tolerance", "positive")
    share = units.si((ALLOWED_STEPS if pumped else ALLOWED_PLAN) if allowed is None else allowed, "fraction", "allowed", "positive")
    medium, target = plan.medium, plan.target
    held = medium.face.held
    at = _times(plan, subject if pumped else None) if times is None else times
    change = float(target.largest_change)
    if not (math.isfinite(change) and change > 0.0):
        raise ValueError("subject: its target never changes; there is nothing to confirm.")
    result = run(medium, subject, at, target.rest_pressure if held else target.start, tolerance=tolerance, scale=change)
    at = result.channels.times
    wanted = np.asarray(target.pressure(at), dtype=float)
    simulated = result.channels.target_pressure + (target.start if held else 0.0)
    # compared as changes, so that the digits of the start pressure play no part
    error = np.abs((simulated - target.start) - (wanted - target.start))
    worst = int(np.argmax(error))
    last = max(int(np.searchsorted(at, plan.end, side="right")) - 1, 0)
    return Check(
        subject="steps" if pumped else "plan",
        target_error=float(error[worst]),
        when=float(at[worst]),
        settling_error=float(error[last]),
        target_change=change,
        grid_error=result.errors["target_pressure"],
        other_error=max(share for name, share in result.relative_errors.items() if name != "target_pressure"),
        mass_balance=result.mass_balance,
        allowed=share,
        tolerance=tolerance,
        modes=result.modes,
        channels=result.channels,
        wanted=wanted,
        _kind="rate" if held else "pressure",
    )


def _parts(subject: Any) -> tuple[Any, bool]:
    """The plan behind a subject, and whether the subject is a rate as pumped."""
    pumped = isinstance(subject, Steps)
    plan = getattr(subject, "plan", None) if pumped else subject
    if plan is None:
        raise TypeError("subject: got Steps that belong to no plan; it takes a plan, or the steps that flatplan.steps makes of one.")
    missing = [name for name in ("medium", "target", "rate", "knots", "end") if not hasattr(plan, name)]
    if missing:
        raise TypeError(f"subject: got {type(subject).__name__}; it takes a plan, or the steps that flatplan.steps makes of one.")
    return plan, pumped


def _times(plan: Any, pumped: Steps | None) -> np.ndarray:
    """Times to compare at: dense to the end, every knot, and some beyond the end."""
    end = float(plan.end)
    beyond = max(end, pumped.end) if pumped is not None else end
    more = min(max(0.1 * end, float(plan.medium.travel_time)), end)
    marks = [np.linspace(0.0, end, TIMES), np.asarray(plan.knots, dtype=float)]
    if pumped is None or not plan.medium.leaks:
        marks.append(np.linspace(beyond, beyond + more, 200))
    elif beyond > end:
        marks.append(np.linspace(end, beyond, 200)[:-1])
    if pumped is not None and plan.medium.leaks:
        limit = pumped.end
        return np.unique(np.concatenate([m[m < limit] for m in marks]))
    return np.unique(np.concatenate(marks))

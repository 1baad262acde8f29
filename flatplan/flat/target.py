"""The wanted pressure history at the target face: moves and holds, as a sum of rises.

>>> target = Target(start="21.0 MPa").move(to="22.5 MPa", over="3 d", order=1.8, easing=0.3).hold("5 d")
>>> target.pressure([0.0, 8 * 86400.0])
array([21000000., 22500000.])
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np

from flatplan import units
from flatplan.flat.bump import MOST_ORDERS
from flatplan.flat.rise import Rise
from flatplan.flat.summation import corner_tables, derivative_weights
from flatplan.records import Record

# γ = 1/(s - 1) below 6: `bump_integral` keeps 14 digits and `bump.FLAT_EXPONENT` holds up to there.
LEAST_ORDER = 1.17
# A ramp much shorter than its bump is a difference of two nearly equal bumps: 1e-3 of its length costs three digits.
MOST_EASING = 0.999


@dataclass(frozen=True)
class Move:
    """One change of level.

    Attributes
    ----------
    start : float
        When it begins [s].
    duration : float
        How long it takes [s].
    change : float
        By how much [Pa] (for a held face [m³/s]).
    order : float
        Gevrey order s of its eased corners, 1 < s ≤ 2.
    easing : float
        Share of the duration that each corner's bump takes; 1 is a single bump.
    """

    start: float
    duration: float
    change: float
    order: float
    easing: float

    @property
    def end(self) -> float:
        """When it is done [s]."""
        return self.start + self.duration

    @property
    def rise(self) -> Rise:
        """The smoothed ramp that carries it out."""
        width = self.easing * self.duration
        ramp = self.duration - width if self.easing < 1.0 else 0.0
        return Rise(self.start, width, ramp, self.change, 1.0 / (self.order - 1.0))


@dataclass(frozen=True, repr=False)
class Target(Record):
    """A wanted history at the target face, built move by move; every call returns a new target.

    Parameters
    ----------
    start : float, str or quantity
        Pressure at which everything is at rest when the plan starts [Pa, absolute]. For a held face the
        rate through it, with its unit: "0 L/s", counted from the equilibrium at the start.
    pressure : float, str or quantity, optional
        For a held face only: the pressure it is held at [Pa, absolute], so that the plan's pressures are absolute.

    Attributes
    ----------
    start : float
        [Pa].
    moves : tuple of Move
    end : float
        When the last move or hold is over [s].
    kind : str
        "pressure", or "rate" for a held face.
    rest_pressure : float
        Pressure at rest [Pa, absolute]; 0 for a held face whose pressure is not stated.

    Raises
    ------
    ValueError
        A start that is not a finite pressure.
    """

    start: float
    moves: tuple[Move, ...]
    end: float
    kind: str
    rest_pressure: float

    def __init__(
        self, start: Any, moves: tuple[Move, ...] = (), end: float = 0.0, kind: str | None = None, *, pressure: Any = None
    ) -> None:
        put = object.__setattr__
        if kind is None:
            kind = "rate" if _is_rate(start) else "pressure"
        put(self, "start", units.si(start, kind, "start"))
        if kind == "pressure" and pressure is not None:
            raise ValueError("pressure: is for a held face, whose target starts at a rate; here start= is the pressure at rest.")
        put(
            self,
            "rest_pressure",
            self.start if kind == "pressure" else units.si(0.0 if pressure is None else pressure, "pressure", "pressure"),
        )
        put(self, "moves", tuple(moves))
        put(self, "end", float(end))
        put(self, "kind", kind)

    # --- building ------------------------------------------------------------------------------

    def move(self, to: Any = None, over: Any = None, order: float = 1.8, easing: float = 1.0, *, by: Any = None, at: Any = None) -> Target:
        """Add a change of level.

        Parameters
        ----------
        to : float, str or quantity
            Level to settle at [Pa, absolute]; or give ``by``.
        over : float, str or quantity
            Duration [s]; above zero.
        order : float
            Gevrey order s, 1.17 ≤ s ≤ 2. Nearer 2 is less peaked, and its series falls more slowly; at 2 it converges only
            while the medium's travel time is below twice the eased corner.
        easing : float
            Share of the duration that each corner's bump takes, 0 < easing ≤ 1; 1 is one bump, small is a
            straight ramp with tight corners.
        by : float, str or quantity, optional
            Change of level [Pa] instead of ``to``.
        at : float, str or quantity, optional
            When it begins [s]; by default when the last move or hold is over. Moves may overlap.

        Returns
        -------
        Target

        Raises
        ------
        ValueError
            A duration not above zero, an order outside [1.17, 2], an easing not in (0, 0.999] or 1, no change of level.
        """
        duration = units.si(_given(over, "over", 'a duration such as "3 d"'), "time", "over", "positive")
        order_value = units.si(order, "fraction", "order")
        if not 1.0 < order_value <= 2.0:
            why = (
                "above 2 the derivatives of a move grow faster than (2k)!, and the series diverges for every medium and duration."
                if order_value > 2.0
                else "at 1 a move is analytic and cannot start from rest."
            )
            raise ValueError(f"order: got {order!r}; it takes a Gevrey order above 1 and up to 2: {why}")
        if order_value < LEAST_ORDER:
            raise ValueError(
                f"order: got {order!r}; orders from {LEAST_ORDER} on are held "
                "(nearer 1 a bump is a spike of a few thousandths of its width)."
            )
        easing_value = units.si(easing, "fraction", "easing")
        if not 0.0 < easing_value <= 1.0:
            raise ValueError(f"easing: got {easing!r}; it takes a share above 0 and up to 1 (1 is a single bump).")
        if MOST_EASING < easing_value < 1.0:
            raise ValueError(f"easing: got {easing!r}; it takes a share up to {MOST_EASING}, or exactly 1 (a single bump).")
        if (to is None) == (by is None):
            raise ValueError("to: give either to= (the level to settle at) or by= (the change of level), one of them.")
        level = self.level
        change = units.si(by, self.kind, "by") if to is None else units.si(to, self.kind, "to") - level
        if abs(change) <= 1e-14 * max(abs(level), *(abs(m.change) for m in self.moves), 0.0):  # levels are sums: equal to rounding is equal
            given = by if to is None else to
            raise ValueError(f"{'by' if to is None else 'to'}: got {given!r}, which changes nothing; use hold() to stay at a level.")
        start = self.end if at is None else units.si(at, "time", "at", "not negative")
        added = Move(start, duration, change, order_value, easing_value)
        return replace_moves(self, (*self.moves, added), max(self.end, added.end))

    def hold(self, duration: Any) -> Target:
        """Stay at the level reached for ``duration`` [s], above zero."""
        return replace_moves(self, self.moves, self.end + units.si(duration, "time", "hold", "positive"))

    def stretched(self, factor: float) -> Target:
        """The same levels in ``factor`` times the time, moves and holds alike; above zero."""
        ratio = units.si(factor, "fraction", "factor", "positive")
        moves = tuple(Move(m.start * ratio, m.duration * ratio, m.change, m.order, m.easing) for m in self.moves)
        return replace_moves(self, moves, self.end * ratio)

    # --- evaluating ----------------------------------------------------------------------------

    @property
    def level(self) -> float:
        """Level after the last move [Pa, absolute]."""
        return self.start + sum(m.change for m in self.moves)

    @cached_property
    def rises(self) -> tuple[Rise, ...]:
        """The smoothed ramps whose sum is the change from the start."""
        return tuple(m.rise for m in self.moves)

    @cached_property
    def knots(self) -> np.ndarray:
        """Times [s] where a corner begins or ends: smooth there, but not analytic. Sorted, from 0 to the end."""
        at = {0.0, self.end}
        for rise in self.rises:
            for start, _ in rise.corners:
                at |= {start, start + rise.width}
        return np.array(sorted(at))

    @cached_property
    def largest_change(self) -> float:
        """Largest departure from the start [Pa]; found at the ends of moves, and between them where moves overlap."""
        times = np.unique(np.concatenate([self.knots, np.linspace(0.0, self.end, 2001)]))
        return float(np.max(np.abs(self.derivatives(times, 0)[0])))

    def pressure(self, times: Any) -> np.ndarray:
        """The wanted pressure [Pa, absolute] (held face: rate [m³/s]) at ``times`` [s], shape (len(times),)."""
        return self.start + self.derivatives(times, 0)[0]

    def derivatives(self, times: Any, orders: int) -> np.ndarray:
        """The change from the start and its time derivatives.

        Parameters
        ----------
        times : array_like
            [s], shape (n,).
        orders : int
            Highest derivative.

        Returns
        -------
        ndarray
            ``y, y', …`` [Pa s^-k], shape (orders + 1, n).

        Raises
        ------
        ValueError
            Times that are not finite, orders not a whole number from 0 to 650, derivatives outside the range of a float.
        """
        t = units.si_array(times, "time", "times")
        if isinstance(orders, bool) or not isinstance(orders, (int, np.integer)) or not 0 <= orders <= MOST_ORDERS:
            raise ValueError(f"orders: got {orders!r}; it takes a whole number from 0 to {MOST_ORDERS}.")
        out = np.zeros((orders + 1, t.size))
        with np.errstate(over="ignore", invalid="ignore"):
            for rise in self.rises:
                for k in range(min(rise.lift, orders + 1)):
                    out[k] += rise.low_order(t, k)
                _add_bumps(out, rise, t)
        if not np.all(np.isfinite(out)):
            last = int(np.flatnonzero(~np.all(np.isfinite(out), axis=1))[0]) - 1
            raise ValueError(f"orders: got {orders}; in SI units the derivatives leave the range of a float after order {last}.")
        return out

    def _title(self) -> str:
        return "Target"

    def _rows(self) -> Iterable[tuple[str, str]]:
        yield "start", units.text(self.start, self.kind)
        level = self.start
        for m in self.moves:
            level += m.change
            yield (
                f"from {units.text(m.start, 'time')}",
                f"to {units.text(level, self.kind, digits=6)} over {units.text(m.duration, 'time')} "
                f"(order {m.order:g}, easing {m.easing:g})",
            )
        yield "end", units.text(self.end, "time")


def _add_bumps(out: np.ndarray, rise: Rise, t: np.ndarray) -> None:
    """Add the derivatives that are bumps: order k is the bump's derivative k - lift."""
    count = out.shape[0] - rise.lift
    if count <= 0:
        return
    weights = derivative_weights(rise.width, rise.lift, count)
    for after, sign in rise.bumps:
        for at, table in corner_tables(rise, after, t, weights):
            out[rise.lift :, at] += sign * rise.bump_factor * table


def replace_moves(target: Target, moves: tuple[Move, ...], end: float) -> Target:
    """The same start with other moves."""
    held = {"pressure": target.rest_pressure} if target.kind == "rate" else {}
    return Target(target.start, moves, end, target.kind, **held)


def _given(value: Any, name: str, takes: str) -> Any:
    if value is None:
        raise ValueError(f"{name}: is missing; it takes {takes}.")
    return value


def _is_rate(start: Any) -> bool:
    """Whether a start with a unit is a rate (for held faces)."""
    if isinstance(start, (int, float)):
        return False
    try:
        units.si(start, "rate", "start")
    except ValueError:
        return False
    return True

"""The shortest duration of one eased ramp under limits: order, easing and duration by search on its dimensionless shape.

For one order and easing the excess over the limits falls as the duration grows, so the duration is a root: Brent's method
[Brent1973], chapter 4. Order and easing are sought on a coarse grid, on which a shape that fails at the best duration so far is put
aside after one look, and then by a compass search with halved steps [KoldaLewisTorczon2003].
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from flatplan.decide.limits import Limits
from flatplan.decide.move_shape import MoveShape, coefficients, move_shape
from flatplan.decide.physical import DEMANDS, Demand
from flatplan.flat.generating import scaled_coefficients
from flatplan.site import Medium

# The family searched: outside it nothing is gained (a bump of low order is a spike, a small easing a corner).
ORDERS = (1.3, 1.4, 1.5, 1.6, 1.7, 1.8, 1.87, 1.93)
EASINGS = (0.04, 0.07, 0.11, 0.16, 0.22, 0.3, 0.4, 0.52, 0.67, 0.82, 1.0)
ORDER_RANGE = (1.2, 1.96)
EASING_RANGE = (0.02, 1.0)
# Durations sought, relative to the travel time and to the least that a balance of volume allows.
SHORTEST = 1.0 / 16.0
LONGEST = 3000.0
_SCAN = 1.3  # ratio of the durations looked at before a root is bracketed
_CLOSE = 1e-6  # relative accuracy of a duration
_GAIN = 5e-5  # least relative gain that makes another shape better
_MOST_LOOKS = 160  # shapes looked at by the compass search
# An excess of this share of the scale is rounding: a rate that may not fall below zero starts from zero.
_ROUNDING = 1e-10
_BINDS = 2e-3  # share of a limit's range within which it binds


@dataclass(frozen=True)
class Start:
    """What holds when a move begins.

    Attributes
    ----------
    level : float
        Change at the target so far [Pa] (held face [m³/s]).
    volume : float
        Net volume injected so far [m³].
    rest_pressure : float
        What pressures count from [Pa, absolute].
    """

    level: float
    volume: float
    rest_pressure: float


@dataclass(frozen=True)
class Eased:
    """A shape and its shortest duration [s]."""

    order: float
    easing: float
    duration: float


class EasedSearch:
    """The limits of one move as functions of its shape and duration.

    Parameters
    ----------
    medium : Medium
    change : float
        Of the move [Pa] (held face [m³/s]).
    limits : Limits
    start : Start
    """

    def __init__(self, medium: Medium, change: float, limits: Limits, start: Start) -> None:
        self.medium, self.change, self.limits, self.start = medium, change, limits, start
        self.demands: list[tuple[Demand, float]] = [(d, limits.stated[d.name]) for d in DEMANDS if d.name in limits.stated]
        self.asks_rate = any(d.channel == "injection_rate" for d, _ in self.demands)
        self.rate = float(scaled_coefficients(medium, "injection_rate", 1)[0])  # steady, per unit of level
        before, after = medium.equilibrium(start.level), medium.equilibrium(start.level + change)
        self.volume = abs(after.stored_volume - before.stored_volume)
        self.scales = {d.name: self._scale(d, limit) for d, limit in self.demands}

    def _scale(self, demand: Demand, limit: float) -> float:
        """What an excess over a limit is measured by: the room that the limit leaves at rest, or the limit itself."""
        if demand.kind == "pressure":
            rest = self.start.rest_pressure + self.medium.equilibrium(self.start.level).bottomhole_change
            return abs(limit - rest) or abs(self.medium.equilibrium(self.change).bottomhole_change)
        if demand.name == "min_rate" and limit == 0.0:
            return self.limits.max_rate or self.volume / self.medium.travel_time
        return abs(limit) or self.volume / self.medium.travel_time

    def _values(self, shape: MoveShape, duration: float) -> Iterator[tuple[Demand, float, np.ndarray | None]]:
        """(demand, limit, what the move asks on the shape's grid)."""
        held: dict[tuple[str, int], np.ndarray | None] = {}
        times = shape.places * (shape.easing * duration)
        for demand, limit in self.demands:
            name, shift = ("injection_rate", -1) if demand.channel == "injected_volume" else (demand.channel, 0)
            shift += demand.derivative
            if (name, shift) not in held:
                unit = shape.channel(coefficients(self.medium, name), self.medium.travel_time, duration, shift)
                base: float | np.ndarray = 0.0
                if name == "injection_rate" and shift <= 0:
                    base = self.rate * self.start.level * (1.0 if shift == 0 else times) + (self.start.volume if shift else 0.0)
                elif name == "bottomhole_pressure" and shift == 0:
                    base = self.start.rest_pressure + self.medium.equilibrium(self.start.level).bottomhole_change
                held[name, shift] = None if unit is None else base + self.change * unit
            yield demand, limit, held[name, shift]

    def margins(self, shape: MoveShape, duration: float) -> dict[str, float] | None:
        """Distance to each stated limit in units of its scale; None where the shape is not resolved at this duration."""
        out = {}
        if not self.asks_rate and shape.channel(coefficients(self.medium, "injection_rate"), self.medium.travel_time, duration) is None:
            return None  # the plan stands on the rate, whether limited or not
        for demand, limit, values in self._values(shape, duration):
            if values is None:
                return None
            signs = {"largest": (1.0,), "least": (-1.0,), "size": (1.0, -1.0)}[demand.side]
            seen = max(_top(sign * values) for sign in signs)
            out[demand.name] = demand.margin(-seen if demand.side == "least" else seen, limit) / self.scales[demand.name]
        return out

    def excess(self, shape: MoveShape, duration: float) -> float:
        """The worst excess over a limit, relative to its scale and above rounding; infinite where the shape is not resolved."""
        found = self.margins(shape, duration)
        return math.inf if found is None else -min(found.values()) - _ROUNDING

    # --- durations ---------------------------------------------------------------------------------

    def least_duration(self) -> float:
        """A duration that no eased move beats: the mean rate, and the mean slope of the target [s]; at least `SHORTEST`."""
        least = SHORTEST * self.medium.travel_time
        limits = self.limits
        if not self.medium.leaks:
            toward = limits.max_rate if self._fills else limits.min_rate
            if toward:
                least = max(least, self.volume / abs(toward))
            if limits.max_rate_change:  # up and down again: a triangle of the rate
                least = max(least, 2.0 * math.sqrt(self.volume / limits.max_rate_change))
        if limits.max_pressure_change:
            least = max(least, abs(self.change) / limits.max_pressure_change)
        return least

    @property
    def _fills(self) -> bool:
        return self.change > 0.0

    def shortest(self, shape: MoveShape, least: float, below: float = math.inf) -> float | None:
        """Shortest duration of a shape from ``least`` on; None where there is none shorter than ``below``."""
        from scipy.optimize import brentq

        if math.isfinite(below):
            high = below * (1.0 - _GAIN)
            if high <= least or self.excess(shape, high) > 0.0:
                return None
            low = high / _SCAN
            while low > least and self.excess(shape, low) <= 0.0:
                high, low = low, low / _SCAN
        else:
            low, high = least / _SCAN, least
            while self.excess(shape, high) > 0.0:
                low, high = high, high * _SCAN
                if high > LONGEST * least:
                    return None
        low = max(low, least)
        if low >= high or self.excess(shape, low) <= 0.0:
            return min(low, high)
        while not math.isfinite(self.excess(shape, low)):  # a root needs numbers at both ends
            middle = math.sqrt(low * high)
            if middle <= low * (1.0 + _CLOSE):
                return high
            if self.excess(shape, middle) <= 0.0:
                high = middle
            else:
                low = middle
        return float(brentq(lambda d: self.excess(shape, d), low, high, xtol=0.1 * _CLOSE * low, rtol=1e-9))

    # --- shapes ------------------------------------------------------------------------------------

    def best(self, order: float | None, easing: float | None) -> Eased | None:
        """Order, easing and shortest duration; what the caller fixes stays. None where no duration looked at meets the limits."""
        least = self.least_duration()
        best: Eased | None = None

        def look(o: float, e: float) -> bool:
            nonlocal best
            shape = move_shape(o, e)
            duration = self.shortest(shape, least, best.duration if best else math.inf)
            if duration is None:
                return False
            best = Eased(o, e, duration)
            return True

        # middling shapes first: the sooner a good duration is known, the more shapes one look puts aside
        for e in (easing,) if easing is not None else sorted(EASINGS, key=lambda value: abs(math.log(value / 0.25))):
            for o in (order,) if order is not None else sorted(ORDERS, key=lambda value: abs(value - 1.8)):
                look(o, e)
        if best is None:
            return None
        order_step, easing_step = (0.0 if order is not None else 0.03), (0.0 if easing is not None else 0.16)
        looks = 0
        while (order_step > 0.003 or easing_step > 0.004) and looks < _MOST_LOOKS:
            centre = best
            moved = False
            for i, j in ((0, 1), (0, -1), (1, 0), (-1, 0), (1, 1), (-1, -1), (1, -1), (-1, 1)):
                o, e = _on_lattice(centre.order + i * order_step, centre.easing * math.exp(j * easing_step))
                o, e = (order if order is not None else o), (easing if easing is not None else e)
                looks += 1
                if (o, e) != (centre.order, centre.easing) and look(o, e):
                    moved = True
                    break
            if not moved:
                order_step, easing_step = 0.5 * order_step, 0.5 * easing_step
        return best

    def binding(self, found: Eased) -> tuple[str, ...]:
        """Names of the limits that the move uses up."""
        margins = self.margins(move_shape(found.order, found.easing), found.duration) or {}
        return tuple(name for name, margin in margins.items() if margin <= _BINDS)


def _top(values: np.ndarray) -> float:
    """The largest value, by the parabola through it and its neighbours."""
    at = int(np.argmax(values))
    y1 = float(values[at])
    if 0 < at < len(values) - 1:
        y0, y2 = float(values[at - 1]), float(values[at + 1])
        bend = y0 - 2.0 * y1 + y2
        if bend < 0.0:
            return y1 - (y2 - y0) ** 2 / (8.0 * bend)
    return y1


def _on_lattice(order: float, easing: float) -> tuple[float, float]:
    """The nearest order and easing that are looked at: rounded, so that prepared shapes serve again."""
    low, high = EASING_RANGE
    e = round(min(max(easing, low), high), 4)
    return round(min(max(order, ORDER_RANGE[0]), ORDER_RANGE[1]), 3), 1.0 if e > 0.99 else e

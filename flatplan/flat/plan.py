"""From a medium and a target to a plan: how many terms, in what precision, and how far off at most."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from flatplan import units
from flatplan.channels import CHANNELS, Channels
from flatplan.flat.bump import MOST_ORDERS
from flatplan.flat.certificate import Certificate
from flatplan.flat.extended import evaluate_extended
from flatplan.flat.generating import generating_table, pressure_at, scaled_coefficients
from flatplan.flat.precise import precise_pressure, precise_scaled
from flatplan.flat.rise import Rise
from flatplan.flat.summation import SeriesSum
from flatplan.flat.tail import gevrey_radius, tail_table
from flatplan.flat.target import Target
from flatplan.flat.volumes import Volumes
from flatplan.records import Record, of_type, one_of
from flatplan.site import Medium

# Channels whose tails decide the number of terms: (channel, derivative of it). The derivative of the rate
# is there so that the extremes of the plan can be located on it.
_DECIDING = (
    ("injection_rate", 0),
    ("sandface_rate", 0),
    ("bottomhole_pressure", 0),
    ("sandface_pressure", 0),
    ("injection_rate", -1),
    ("injection_rate", 1),
)
_SERIES_NAME = {"injected_volume": ("injection_rate", -1)}
# Orders bounded one by one before the closed form takes over.
_FIRST_ORDERS = 96
# Rounding of the double path, in units of 2^-53 times the sum of the sizes of the terms: measured, see
# tests/test_flat_accuracy.py, where it is compared with ball arithmetic.
_ROUNDING_UNITS = 40.0
_ROUNDING_UNITS_PER_TERM = 2.5  # the coefficients' own error grows with their order
_UNIT = 2.0**-53


@dataclass(frozen=True, repr=False)
class Plan(Record):
    """The feedforward rate that makes the target face follow the target, and everything that goes with it.

    Made by `feedforward`. Times are seconds from the start; after the end everything is settled.

    Attributes
    ----------
    medium : Medium
    target : Target
    tolerance : float
        Relative to each channel's peak.
    certificate : Certificate
    series : SeriesSum
        The cut series, term counts per rise.
    """

    medium: Medium
    target: Target
    tolerance: float
    certificate: Certificate
    series: SeriesSum = field(repr=False)

    @property
    def end(self) -> float:
        """When the last move or hold is over [s]."""
        return self.target.end

    @property
    def knots(self) -> np.ndarray:
        """Times [s] where a corner begins or ends."""
        return self.target.knots

    def evaluate(self, channel: str, times: Any, derivative: int = 0) -> np.ndarray:
        """One channel, or a time derivative of it, as a series.

        Parameters
        ----------
        channel : str
            A name of `Channels`.
        times : array_like
            [s], shape (n,).
        derivative : int
            Order of the time derivative, from 0.

        Returns
        -------
        ndarray
            SI, shape (n,); pressures as the *change* from the start.

        Raises
        ------
        ValueError
            Unknown channel, times not finite, derivative not a whole number from 0.
        """
        one_of(channel, tuple(CHANNELS), "channel")
        if isinstance(derivative, bool) or not isinstance(derivative, (int, np.integer)) or derivative < 0:
            raise ValueError(f"derivative: got {derivative!r}; it takes a whole number, 0 or more.")
        return self.rows([(channel, int(derivative))], units.si_array(times, "time", "times"))[0]

    def rows(self, wanted: list[tuple[str, int]], times: np.ndarray) -> np.ndarray:
        """Several (channel, derivative) pairs at once, shape (len(wanted), len(times)), as `evaluate` gives them one by one.

        Pairs whose series start at the same derivative share one pass.
        """
        out = np.empty((len(wanted), times.size))
        groups: dict[int, list[tuple[int, str]]] = {}
        for row, (channel, derivative) in enumerate(wanted):
            name, shift = _SERIES_NAME.get(channel, (channel, 0))
            groups.setdefault(shift + derivative, []).append((row, name))
        for shift, members in groups.items():
            rows = [row for row, _ in members]
            out[rows] = self._sum_shift([name for _, name in members], times, shift)
        return out

    def _sum_shift(self, names: list[str], times: np.ndarray, shift: int) -> np.ndarray:
        most = max(self.series.terms)
        if self.certificate.digits > 16:
            exact = precise_scaled(self.medium, tuple(names), most, self._bits)
            if exact is not None:
                return evaluate_extended(self.series, exact, times, shift, self.certificate.digits)
        return self.series.evaluate(np.array([scaled_coefficients(self.medium, name, most) for name in names]), times, shift)

    @property
    def _bits(self) -> int:
        """Working bits of the coefficients where double precision is not enough."""
        return math.ceil(self.certificate.digits * math.log2(10.0))

    def rate(self, times: Any) -> np.ndarray:
        """Injection rate [m³/s] at ``times`` [s], shape (len(times),)."""
        return self.evaluate("injection_rate", times)

    def at(self, times: Any) -> Channels:
        """Every channel at ``times``.

        Parameters
        ----------
        times : array_like, or texts such as "2 d"
            [s] from the start, shape (n,).

        Returns
        -------
        Channels
            Pressures absolute; for a held face relative to it unless the target states its pressure.

        Raises
        ------
        ValueError
            Times that are empty, not finite, or of another dimension.
        """
        t = units.si_array(times, "time", "times")
        values = dict(zip(CHANNELS, self.rows([(name, 0) for name in CHANNELS], t), strict=True))
        for name, (kind, _) in CHANNELS.items():
            if kind == "pressure":
                values[name] = values[name] + self.target.rest_pressure
        if self.medium.face.held:  # there the channel is the rate through the face
            values["target_pressure"] = self.target.pressure(t)
        return Channels(times=t, **values)

    def pressure(self, x: Any, times: Any) -> np.ndarray:
        """Pressure [Pa, absolute] along the path.

        Parameters
        ----------
        x : array_like
            Path coordinates from the target face [m], shape (m,).
        times : array_like
            [s], shape (n,).

        Returns
        -------
        ndarray
            Shape (m, n).

        Raises
        ------
        ValueError
            A place outside the path, times not finite.
        """
        places = self.medium.positions(x)
        t = units.si_array(times, "time", "times")
        if self.certificate.digits > 16:
            exact = [precise_pressure(self.medium, float(x), max(self.series.terms), self._bits) for x in places]
            return self.target.rest_pressure + evaluate_extended(self.series, exact, t, 0, self.certificate.digits)
        table = generating_table(self.medium, max(self.series.terms))
        scaled = pressure_at(table, places)[: max(self.series.terms) + 1].T
        return self.target.rest_pressure + self.series.evaluate(scaled, t)

    def volumes(self, times: Any = None) -> Volumes:
        """Injected, stored and leaked volume since the start.

        Parameters
        ----------
        times : array_like, optional
            [s], shape (n,); the end of the plan by default.

        Returns
        -------
        Volumes
        """
        t = units.si_array(self.end if times is None else times, "time", "times")
        in_rock = self._sum_shift(["stored_volume"], t, 0)[0]
        injected, bottomhole = self.rows([("injected_volume", 0), ("bottomhole_pressure", 0)], t)
        stored = in_rock + self.medium.well.storage * bottomhole
        if self.medium.face.storage:
            stored = stored + self.medium.face.storage * self.target.derivatives(t, 0)[0]
        return Volumes(times=t, injected=injected, stored=stored, leaked=injected - stored)

    def _title(self) -> str:
        return "Plan"

    def _rows(self) -> Iterable[tuple[str, str]]:
        c = self.certificate
        yield "duration", units.text(self.end, "time")
        yield "peak rate", units.text(c.peak["injection_rate"], "rate")
        yield "largest bottomhole change", units.text(c.peak["bottomhole_pressure"], "pressure")
        volumes = self.volumes()
        yield "net injected volume", units.text(float(volumes.injected[0]), "volume")
        if self.medium.leaks:
            yield "of it stored", units.text(float(volumes.stored[0]), "volume")
            yield "of it leaked", units.text(float(volumes.leaked[0]), "volume")
        yield (
            "series",
            f"order {c.order:.4g}, {c.terms} terms, {c.digits} digits; "
            f"{'within' if c.met else 'NOT within'} {self.tolerance:.0e} of each peak",
        )


def feedforward(medium: Medium, target: Target, *, tolerance: float = 1e-9) -> Plan:
    """The injection rate that makes the target face follow ``target``, in closed form.

    Parameters
    ----------
    medium : Medium
    target : Target
        With at least one move.
    tolerance : float
        Largest distance from the exact plan, relative to each channel's peak, from 1e-13 to 0.1.

    Returns
    -------
    Plan

    Raises
    ------
    TypeError
        A medium or target of another type.
    ValueError
        An empty target, a tolerance out of range, or a job whose series needs more terms or digits than
        are held; the sentence says which and what would do.

    Notes
    -----
    Differential flatness of the diffusion equation [FliessLevineMartinRouchon1995]_
    [LarocheMartinRouchon2000]_: every output is ``Σ c_k y^(k)`` with ``y`` the pressure at the target face.
    The cut is proven by `flatplan.flat.tail`.
    """
    of_type(medium, Medium, "medium", "a medium made by slab() or its sisters")
    of_type(target, Target, "target", "a Target")
    if not target.moves:
        raise ValueError('target: has no move; add at least one, such as .move(to="22.5 MPa", over="3 d").')
    if medium.face.held != (target.kind == "rate"):
        wants = 'a rate (start="0 L/s")' if medium.face.held else 'a pressure (start="21 MPa")'
        raise ValueError(f"target: its start is a {target.kind}, but for this target face it takes {wants}.")
    if medium.face.held and target.start != 0.0:
        raise ValueError(
            f"target: starts at {units.text(target.start, 'rate')}; the rate through a held face is counted from the equilibrium "
            "in which the plan starts, so it takes 0."
        )
    value = units.si(tolerance, "fraction", "tolerance", "positive")
    if not 1e-13 <= value <= 0.1:
        raise ValueError(f"tolerance: got {tolerance!r}; it takes a share of the peak from 1e-13 to 0.1.")
    return _Planner(medium, target, value).plan()


class _Planner:
    """Finds terms, peaks and precision together: each depends on the others."""

    def __init__(self, medium: Medium, target: Target, tolerance: float) -> None:
        self.medium, self.target, self.tolerance = medium, target, tolerance
        self.rises = target.rises
        self.grid = _grid(target)
        self.overlap = _largest_overlap(self.rises)
        # Equal rises (but for when and how much) share their tails.
        self.tails: dict[tuple[float, float, float, float], np.ndarray] = {}

    def plan(self) -> Plan:
        terms = tuple(8 for _ in self.rises)
        for _ in range(12):
            sums = SeriesSum(self.rises, terms, self.medium.travel_time)
            peak, size = self._peaks(sums)
            needed = tuple(self._terms(rise, peak) for rise in self.rises)
            if all(n <= have for n, have in zip(needed, terms, strict=True)):
                break
            terms = tuple(max(n, have) for n, have in zip(needed, terms, strict=True))
        else:
            raise ValueError("target: the number of terms did not settle; state a larger tolerance.")
        return self._certified(sums, peak, size)

    def _rows(self, sums: SeriesSum, *, sizes: bool = False) -> dict[tuple[str, int], np.ndarray]:
        most = max(sums.terms)
        out = {}
        for shift in (0, -1, 1):
            names = [name for name, s in _DECIDING if s == shift]
            scaled = np.array([scaled_coefficients(self.medium, name, most) for name in names])
            values = sums.evaluate(scaled, self.grid, shift, sizes=sizes)
            out.update({(name, shift): row for name, row in zip(names, values, strict=True)})
        return out

    def _peaks(self, sums: SeriesSum) -> tuple[dict, dict]:
        peak = {key: float(np.abs(row).max()) for key, row in self._rows(sums).items()}
        size = {key: float(row.max()) for key, row in self._rows(sums, sizes=True).items()}
        return peak, size

    def _tail(self, rise: Rise) -> np.ndarray:
        """Tail bounds of a rise for the deciding channels, grown until the closed form's rest is negligible."""
        key = (rise.width, rise.ramp, rise.gamma, abs(rise.weight))
        orders = _FIRST_ORDERS
        while key not in self.tails:
            table = tail_table(self.medium, rise, _DECIDING, orders)
            enough = table[:, -1] <= 1e-6 * self.tolerance * self._least_peaks()
            if np.all(enough) or orders >= MOST_ORDERS - 2:
                self.tails[key] = table
            orders = min(2 * orders, MOST_ORDERS - 2)
        return self.tails[key]

    def _least_peaks(self) -> np.ndarray:
        """A rough lower end of each deciding channel's peak, to judge when a rest is negligible."""
        rows = self._rows(SeriesSum(self.rises, tuple(2 for _ in self.rises), self.medium.travel_time))
        return np.array([max(float(np.abs(rows[key]).max()), 1e-300) for key in _DECIDING])

    def _terms(self, rise: Rise, peak: dict) -> int:
        allowed = np.array([self.tolerance * peak[key] / (2.0 * self.overlap) for key in _DECIDING])
        fits = np.all(self._tail(rise) <= allowed[:, None], axis=0)
        if not np.any(fits):
            x = self.medium.travel_time / rise.width
            raise ValueError(
                f"target: at order {rise.order:.4g} and an eased corner of {units.text(rise.width, 'time')} "
                f"(travel time over corner {x:.3g}) the series needs more than {MOST_ORDERS - 2} terms; "
                "take a longer duration, a larger easing or a lower order."
            )
        return max(int(np.argmax(fits)), 2)

    def _certified(self, sums: SeriesSum, peak: dict, size: dict) -> Plan:
        tails = _summed_tails(self.rises, [self._tail(rise)[:, n] for rise, n in zip(self.rises, sums.terms, strict=True)])
        units_lost = _ROUNDING_UNITS + _ROUNDING_UNITS_PER_TERM * max(sums.terms)
        rounding = {key: units_lost * _UNIT * size[key] for key in _DECIDING}
        digits = 16
        short = [key for key in _DECIDING if rounding[key] > 0.5 * self.tolerance * peak[key]]
        if short and all(segment.uniform for segment in self.medium.segments):
            ratio = max(size[key] / (self.tolerance * peak[key]) for key in _DECIDING)
            digits = int(np.ceil(np.log10(ratio))) + 6
            # the sum itself is rounded to a double once, and its smooth low orders are doubles
            rounding = {key: (16.0 + 2.0 * max(sums.terms)) * _UNIT * peak[key] + size[key] * 10.0**-digits for key in _DECIDING}
        names = {
            "injection_rate": 0,
            "sandface_rate": 0,
            "bottomhole_pressure": 0,
            "sandface_pressure": 0,
            "target_pressure": 0,
            "injected_volume": -1,
        }
        index = {key: i for i, key in enumerate(_DECIDING)}
        tail_out, rounding_out, peak_out, cancellation = {}, {}, {}, {}
        for name in CHANNELS:
            if name == "target_pressure":
                top = self.target.largest_change
                tail_out[name], rounding_out[name], peak_out[name], cancellation[name] = 0.0, 8.0 * _UNIT * top, top, 1.0
                continue
            key = (_SERIES_NAME.get(name, (name, 0))[0], names[name])
            tail_out[name] = float(tails[index[key]])
            rounding_out[name] = rounding[key]
            peak_out[name] = peak[key]
            cancellation[name] = size[key] / peak[key] if peak[key] else 1.0
        certificate = Certificate(
            order=max(rise.order for rise in self.rises),
            radius=min(gevrey_radius(rise) for rise in self.rises),
            terms=max(sums.terms),
            digits=digits,
            tolerance=self.tolerance,
            tail=tail_out,
            rounding=rounding_out,
            peak=peak_out,
            cancellation=cancellation,
        )
        return Plan(self.medium, self.target, self.tolerance, certificate, sums)


def _grid(target: Target, per_corner: int = 160) -> np.ndarray:
    """Times at which peaks are judged: dense on every corner, a few on every ramp."""
    parts = [target.knots, np.linspace(0.0, target.end, 200)]
    for rise in target.rises:
        parts.extend(np.linspace(start, start + rise.width, per_corner) for start, _ in rise.corners)
    return np.unique(np.concatenate(parts))


def _largest_overlap(rises: tuple[Rise, ...]) -> int:
    """How many rises are under way at once, at most."""
    return max(sum(other.start < rise.end and other.end > rise.start for other in rises) for rise in rises)


def _summed_tails(rises: tuple[Rise, ...], tails: list[np.ndarray]) -> np.ndarray:
    """Largest sum over time of the tails of the rises under way (a rise at rest has none)."""
    worst = np.zeros_like(tails[0])
    for rise in rises:
        total = sum(tail for other, tail in zip(rises, tails, strict=True) if other.start <= rise.start < other.end)
        worst = np.maximum(worst, total)
    return worst

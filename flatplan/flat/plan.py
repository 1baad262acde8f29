"""The plan: the cut series of every channel, which evaluates itself at any time and place."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from flatplan import units
from flatplan.channels import CHANNELS, Channels
from flatplan.flat.certificate import Certificate
from flatplan.flat.extended import ExtendedSum
from flatplan.flat.generating import generating_table, pressure_at, scaled_coefficients
from flatplan.flat.summation import SeriesSum
from flatplan.flat.target import Target
from flatplan.flat.terms import Terms, channel_terms
from flatplan.flat.volumes import Volumes
from flatplan.records import Record, one_of
from flatplan.site import Medium

_CHUNK = 32768  # times at once: bounds what is held beside the result

# Channels that are another channel's series from another derivative on.
SERIES_NAME = {"injected_volume": ("injection_rate", -1)}


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
    extended : ExtendedSum, optional
        The same series in more digits, where double precision does not serve.
    """

    medium: Medium
    target: Target
    tolerance: float
    certificate: Certificate
    series: SeriesSum = field(repr=False)
    extended: ExtendedSum | None = field(default=None, repr=False, compare=False)

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

        All share one table of the bump's derivatives.
        """
        out = np.empty((len(wanted), times.size))
        for start in range(0, times.size, _CHUNK):
            self._fill(out[:, start : start + _CHUNK], wanted, times[start : start + _CHUNK])
        return out

    def _fill(self, out: np.ndarray, wanted: list[tuple[str, int]], times: np.ndarray) -> None:
        groups: dict[int, list[tuple[int, str]]] = {}
        for row, (channel, derivative) in enumerate(wanted):
            name, shift = SERIES_NAME.get(channel, (channel, 0))
            groups.setdefault(shift + derivative, []).append((row, name))
        found = self._sums({shift: [name for _, name in members] for shift, members in groups.items()}, times)
        for shift, members in groups.items():
            out[[row for row, _ in members]] = found[shift]

    def _sums(self, names: dict[int, list[str]], times: np.ndarray) -> dict[int, np.ndarray]:
        """Series by name, for each derivative of them."""
        if self.extended is not None:
            return {shift: self.extended.evaluate(each, times, shift) for shift, each in names.items()}
        most = max(self.series.terms)
        hats = {shift: np.array([scaled_coefficients(self.medium, name, most) for name in each]) for shift, each in names.items()}
        return self.series.evaluate_all(hats, times)

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
                values[name] += self.target.rest_pressure
        if self.medium.face.held:  # there the channel is the rate through the face
            values["target_pressure"] = self.target.pressure(t)
        return Channels(times=t, **values, target_kind=self.target.kind)

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
        if self.extended is not None:
            return self.target.rest_pressure + self.extended.pressure(places, t)
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
        in_rock = self._sums({0: ["stored_volume"]}, t)[0][0]
        injected, bottomhole = self.rows([("injected_volume", 0), ("bottomhole_pressure", 0)], t)
        stored = in_rock + self.medium.well.storage * bottomhole
        if self.medium.face.storage:
            stored = stored + self.medium.face.storage * self.target.derivatives(t, 0)[0]
        return Volumes(times=t, injected=injected, stored=stored, leaked=injected - stored)

    def terms(self, channel: str = "injection_rate") -> Terms:
        """One channel's series term by term: the size each term reaches, its proven bound, and the tail after it.

        Parameters
        ----------
        channel : str
            A name of `Channels`.

        Returns
        -------
        Terms
            SI, shape (K + 1,) each; K lies some terms beyond the cut.

        Raises
        ------
        ValueError
            Unknown channel.
        """
        one_of(channel, tuple(CHANNELS), "channel")
        source = SERIES_NAME.get(channel, (channel, 0))
        return channel_terms(self.medium, self.target, self.series, self.certificate, channel, source)

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

"""A plan's series term by term: the size each term reaches, its proven bound, and what all later terms can add.

Term k of a channel is ``c_k y^(k)(t)`` with ``y`` the sum of all rises. Its bound is that of `tail`: the coefficient,
raised by far more than its rounding, times a bound on ``sup|y^(k)|``, summed over the rises that are under way at once.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable
from dataclasses import dataclass

import numpy as np
from scipy.special import gammaln

from flatplan import units
from flatplan.channels import described
from flatplan.flat.certificate import Certificate
from flatplan.flat.coefficient_bounds import scaled_sizes
from flatplan.flat.generating import scaled_coefficients
from flatplan.flat.rise import Rise
from flatplan.flat.summation import SeriesSum, corner_tables, low_factors, series_weights
from flatplan.flat.tail import MOST_BOUNDED, MOST_TERMS, rise_log_bounds, tail_table
from flatplan.flat.target import Target
from flatplan.records import Record
from flatplan.site import Medium

_FIRST_ORDERS = 96  # bounded one by one before the closed form takes over; doubled while its rest would show
_FEWEST_PLACES, _MOST_PLACES = 240, 1200  # on the middle of each corner, and towards each of its ends
_CHUNK = 2048  # times at once
_SLACK = 1.0 + 1e-9  # far above the rounding of a sum of rises


@dataclass(frozen=True, repr=False, eq=False)  # arrays do not compare to one truth value
class Terms(Record):
    """One channel of a plan term by term; arrays of shape ``(K + 1,)``, in the channel's SI unit.

    Every term is that of the whole target, all rises together, whether a plan uses it or not; the orders go
    some way beyond the cut, so that the fall is seen.

    Attributes
    ----------
    channel : str
        A name of `Channels`.
    target_kind : str
        What "target_pressure" stands for: "pressure", or "rate" for a held face (the rate through it [m³/s]).
    order : ndarray of int
        k = 0 … K.
    size : ndarray
        Largest ``|c_k y^(k)(t)|`` met on a grid of times that is dense on every corner; between its times it may be
        larger, by an eighth in the worst case met.
    bound : ndarray
        Proven bound on it at any time from the start to the end of the plan.
    tail : ndarray
        Proven bound on the sum of all terms after term k; inf where the terms' closed form does not fall yet.
    cut : int
        Last term used, in the rise that needs most.
    fewest : int
        Last term used in the rise that needs fewest; the same as ``cut`` where all rises are alike.
    left_out : float
        Proven bound on all that is left out, each rise cut at its own term: the certificate's tail (0 for the target,
        which is one term).
    peak : float
        The channel's peak (pressures: of the change).
    tolerance : float
        What was asked, relative to the peak.
    cancellation : float
        Largest sum of the sizes of the terms at one time, over the peak.
    """

    channel: str
    target_kind: str
    order: np.ndarray
    size: np.ndarray
    bound: np.ndarray
    tail: np.ndarray
    cut: int
    fewest: int
    left_out: float
    peak: float
    tolerance: float
    cancellation: float

    @property
    def kind(self) -> str:
        """Kind of number of the channel: "rate", "pressure" or "volume"."""
        return described(self.channel, self.target_kind)[0]

    @property
    def words(self) -> str:
        """The channel in words."""
        return described(self.channel, self.target_kind)[1]

    def _title(self) -> str:
        return f"Terms of the {self.words}"

    def _rows(self) -> Iterable[tuple[str, str]]:
        peak = self.peak or 1.0
        largest = int(np.argmax(self.size))
        yield "peak", units.text(self.peak, self.kind)
        yield "terms used", f"0 to {self.cut}" + (f", fewer in some moves (0 to {self.fewest})" if self.fewest < self.cut else "")
        yield "largest term", f"{self.size[largest] / peak:.3g} of the peak, k = {largest}"
        yield "cancellation", f"{self.cancellation:.3g} (sum of the sizes over the peak)"
        yield "last term used", f"{self.size[self.cut] / peak:.1e} of the peak, bound {self.bound[self.cut] / peak:.1e}"
        yield "left out", f"at most {self.left_out / peak:.1e} of the peak (tolerance {self.tolerance:.1e})"


def channel_terms(
    medium: Medium, target: Target, series: SeriesSum, certificate: Certificate, channel: str, source: tuple[str, int]
) -> Terms:
    """The terms of one channel.

    Parameters
    ----------
    medium : Medium
    target : Target
    series : SeriesSum
        The cut series.
    certificate : Certificate
        Of the plan.
    channel : str
        A name of `Channels`.
    source : tuple of (str, int)
        The channel whose coefficients it has, and from which derivative of the target on.

    Returns
    -------
    Terms
    """
    one_term = channel == "target_pressure"  # the target itself
    cut, fewest = (0, 0) if one_term else (max(series.terms), min(series.terms))
    last = min(cut + max(8, math.ceil(0.25 * cut)), MOST_TERMS)
    name, shift = source
    scaled = scaled_coefficients(medium, name, last)
    allowed = certificate.tolerance * certificate.peak[channel]
    bound = _bounds(target, scaled_sizes(medium, name, last), medium.travel_time, shift)
    tail = _under_way(target.rises, lambda rise: _tail(medium, rise, source, last, allowed))
    tail[0] = bound[1] + tail[1]  # `tail_table` begins behind term 1
    return Terms(
        channel=channel,
        target_kind=certificate.target_kind,
        order=np.arange(last + 1),
        size=_sizes(target, scaled, medium.travel_time, shift),
        bound=bound,
        tail=tail,
        cut=cut,
        fewest=fewest,
        left_out=0.0 if one_term else certificate.tail[channel],
        peak=certificate.peak[channel],
        tolerance=certificate.tolerance,
        cancellation=certificate.cancellation[channel],
    )


# --- sizes -----------------------------------------------------------------------------------------


def term_times(target: Target, orders: int) -> np.ndarray:
    """Times [s] on which the sizes are judged: the knots, even ones, and many on every corner.

    About its middle a bump is ``exp(-x²)`` with ``x = (σ - 1/2) / width``, and derivative k swings on ``x² < 2k``. If
    that reaches beyond the bump, the derivatives are largest near its ends, the nearer the higher k: towards them the
    times crowd in equal ratios.
    """
    parts = [target.knots, np.linspace(0.0, target.end, 200)]
    count = min(max(6 * orders, _FEWEST_PLACES), _MOST_PLACES)
    for rise in target.rises:
        width = (4.0 ** (rise.gamma + 1.0) * rise.gamma) ** -0.5
        middle = min(width * (math.sqrt(2.0 * orders) + 2.0), 0.5) * np.linspace(-1.0, 1.0, count + 1)
        # nearer the ends the bump and its derivatives up to ``orders`` are too small to matter
        nearest = 0.25 * (4.0**rise.gamma + 40.0 + 6.0 * orders) ** (-1.0 / rise.gamma)
        half = np.geomspace(nearest, 0.5, count)
        places = rise.width * np.concatenate([0.5 + middle, half, 1.0 - half])
        parts.extend(start + places for start, _ in rise.corners)
    return np.unique(np.concatenate(parts))


def _sizes(target: Target, scaled: np.ndarray, t_d: float, shift: int) -> np.ndarray:
    """Largest ``|c_k y^(k + shift)|`` over the times, k = 0 … K; shape (K + 1,)."""
    out = np.zeros(scaled.size)
    times = term_times(target, scaled.size - 1)
    for part in np.array_split(times, math.ceil(times.size / _CHUNK)):
        terms = np.zeros((scaled.size, part.size))
        for rise in target.rises:
            _add_rise(terms, rise, scaled, part, t_d, shift)
        out = np.maximum(out, np.abs(terms).max(axis=1))
    return out


def _add_rise(terms: np.ndarray, rise: Rise, scaled: np.ndarray, times: np.ndarray, t_d: float, shift: int) -> None:
    """Add the terms of one rise, as `SeriesSum` sums them."""
    last = scaled.size - 1
    live = np.flatnonzero(times > rise.start)
    if not live.size:
        return
    for k, factor in low_factors(t_d, shift, rise.lift):
        if k <= last and scaled[k]:
            terms[k, live] += scaled[k] * factor * rise.low_order(times[live], k + shift)
    lowest = rise.lift - shift
    if last < lowest or not np.any(scaled[lowest:]):
        return
    weights = series_weights(t_d / rise.width, lowest, 0, last - lowest + 1)
    factors = rise.bump_factor * rise.width**-shift * scaled[lowest:, None]
    for after, sign in rise.bumps:
        for at, table in corner_tables(rise, after, times, weights):
            terms[lowest:, at] += sign * factors * table


# --- bounds ----------------------------------------------------------------------------------------


def _under_way(rises: tuple[Rise, ...], values: Callable[[Rise], np.ndarray]) -> np.ndarray:
    """Largest sum over time of the values of the rises under way; ``values`` is asked once for rises that are alike."""
    made: dict[tuple[float, float, float, float], np.ndarray] = {}
    for rise in rises:
        key = _key(rise)
        if key not in made:
            made[key] = values(rise)
    each = np.array([made[_key(rise)] for rise in rises])
    starts, ends = np.array([rise.start for rise in rises]), np.array([rise.end for rise in rises])
    # the set under way grows only when a rise begins
    sums = [each[(starts <= start) & (start < ends)].sum(axis=0) for start in starts]
    return np.max(sums, axis=0)


def _key(rise: Rise) -> tuple[float, float, float, float]:
    return rise.width, rise.ramp, rise.gamma, abs(rise.weight)


def _tail(medium: Medium, rise: Rise, source: tuple[str, int], last: int, allowed: float) -> np.ndarray:
    """Tail bounds of a rise behind terms 0 … last, with enough orders bounded one by one."""
    orders = max(_FIRST_ORDERS, last + 1)
    while True:
        table = tail_table(medium, rise, (source,), orders)[0]
        # a rest by the closed form that shows would make the tail larger than it need be
        if table[-1] <= 1e-6 * min(allowed, table[last]) or orders >= MOST_BOUNDED:
            break
        orders = min(2 * orders, MOST_BOUNDED)
    return table[: last + 1].copy()


def _bounds(target: Target, scaled: np.ndarray, t_d: float, shift: int) -> np.ndarray:
    """Bound on every term; coefficients are sums of parts of one sign, good to far less than the slack."""
    k = np.arange(scaled.size, dtype=float)
    with np.errstate(divide="ignore"):
        log_coefficient = np.log(scaled * _SLACK) + k * math.log(t_d) - gammaln(2.0 * k + 1.0)

    def of_rise(rise: Rise) -> np.ndarray:
        sup = rise_log_bounds(rise.width, rise.ramp, rise.gamma, scaled.size - 1)
        at = np.maximum(np.arange(scaled.size) + shift, 0)
        with np.errstate(over="ignore"):
            return np.exp(log_coefficient + sup[at] + math.log(abs(rise.weight)))

    out = _under_way(target.rises, of_rise)
    level, area = _level_and_area(target)
    # what is not confined to the rises under way: the level itself, and its integral
    for order, most in ((0, level), (-1, area)):
        if 0 <= order - shift < scaled.size:
            out[order - shift] = math.exp(log_coefficient[order - shift]) * most
    return out * _SLACK


def _level_and_area(target: Target) -> tuple[float, float]:
    """Bounds on ``|y|`` and on the integral of it from the start to the end of the target.

    Between the moments at which rises begin and end, what is over adds its weight and what is under way a share of it.
    """
    rises = target.rises
    starts, ends, weights = (np.array([getattr(rise, name) for rise in rises]) for name in ("start", "end", "weight"))
    moments = np.unique(np.concatenate([starts, ends, [target.end]]))
    most = np.empty(moments.size)
    for i, moment in enumerate(moments):
        over = weights[ends <= moment].sum()
        going = weights[(starts <= moment) & (moment < ends)]
        most[i] = max(abs(over + going[going > 0.0].sum()), abs(over + going[going < 0.0].sum()))
    return float(most.max()), float(most[:-1] @ np.diff(moments))

"""Plan a case and compare every channel with balls that contain the exact value."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field

import ball_reference as balls
import numpy as np
import series_reference
from flint import arb

import flatplan as fp

from .cases import Case, build_medium, build_target

CHANNELS = ("injection_rate", "sandface_rate", "bottomhole_pressure", "sandface_pressure", "injected_volume")
MOST_TERMS = 220  # of a plan; the reference is summed further
MOST_TERMS_VARYING = 30  # where rock varies along the path the reference's coefficients take seconds
MOST_ORDERS, MOST_ORDERS_VARYING = 520, 48
# What the reference itself may be uncertain by, of what is claimed: its radius and its own cut.
SHARP = 1e-3
_WINDOW = 12


@dataclass
class Outcome:
    """What came of a case: "checked", "refused", or "too long" (for the reference).

    Attributes
    ----------
    shares : dict
        Channel to the largest share of tail + rounding that the distance from the exact value takes; above 1 is a violation.
    rounding_shares : dict
        The same of the rounding alone, where the tail is below a thousandth of it.
    """

    kind: str
    words: str = ""
    digits: int = 0
    terms: int = 0
    shares: dict[str, float] = field(default_factory=dict)
    rounding_shares: dict[str, float] = field(default_factory=dict)

    @property
    def violations(self) -> dict[str, float]:
        """Channels farther off than certified."""
        return {name: share for name, share in self.shares.items() if not share <= 1.0}


def check(case: Case, changed: Callable = lambda certificate: certificate) -> Outcome:
    """Plan it, and compare; ``changed`` alters the certificate, to see the check fail.

    Raises
    ------
    AssertionError
        A refusal that does not say what of target or medium it is about; a claim on the target that is not a number.
    """
    medium = build_medium(case.ground)
    target = build_target(case.steps, medium)
    try:
        plan = fp.feedforward(medium, target, tolerance=case.tolerance)
    except ValueError as refusal:
        words = str(refusal)
        assert words.startswith(("target: ", "medium: ")) and words.endswith("."), f"a refusal without a sentence: {words!r}"
        return Outcome("refused", words)
    certificate = changed(plan.certificate)
    out = Outcome("checked", digits=certificate.digits, terms=certificate.terms)
    if certificate.terms > (MOST_TERMS if medium.uniform else MOST_TERMS_VARYING):
        out.kind = "too long"
        return out
    claimed = certificate.tail["target_pressure"]
    # nan only for a stimulated well with wellbore storage, which no constructor makes
    assert math.isfinite(claimed) and claimed >= 0.0, f"the claim on the target is {claimed}"
    times = _times(target, case.seed)
    values = {name: plan.evaluate(name, times) for name in (*CHANNELS, "target_pressure")}
    reference = _Reference(medium, target, certificate.terms)
    for name in CHANNELS:
        claim = certificate.tail[name] + certificate.rounding[name]
        distance = [reference.distance(name, t, value, SHARP * claim) for t, value in zip(times, values[name], strict=True)]
        if None in distance:
            out.kind = "too long"
            return out
        out.shares[name] = max(distance) / claim
        if certificate.tail[name] < 1e-3 * certificate.rounding[name]:
            out.rounding_shares[name] = out.shares[name]
    # the target is no series: nothing of it is cut
    claim = certificate.rounding["target_pressure"]
    itself = target.derivatives(times, 0)[0]
    pairs = [*zip(times, values["target_pressure"], strict=True), *zip(times, itself, strict=True)]
    out.shares["target_pressure"] = max(reference.distance("target_pressure", t, value, SHARP * claim) for t, value in pairs) / claim
    return out


def _times(target, seed: int) -> np.ndarray:
    """One place where a corner is alive, in up to three corners; one on a ramp, one anywhere, one after the end."""
    rng = np.random.default_rng(seed)
    corners = [(start, rise) for rise in target.rises for start, _ in rise.corners]
    out = [rng.uniform(0.0, target.end), target.end * (1.0 + 0.2 * rng.random())]
    for i in rng.permutation(len(corners))[:3]:
        start, rise = corners[i]
        live = 0.5 - math.sqrt(0.25 - (4.0**rise.gamma + 60.0) ** (-1.0 / rise.gamma))
        out.append(start + rise.width * rng.uniform(live, 1.0 - live))
    rise = target.rises[rng.integers(len(target.rises))]
    if rise.ramp > rise.width:
        out.append(rise.start + rng.uniform(rise.width, rise.ramp))
    return np.array(sorted(out))


class _Path:
    """What a reference's coefficients take of a medium; its face and well come in later."""

    def __init__(self, medium) -> None:
        self.segments, self.travel_time = medium.segments, medium.travel_time


_slow_paths: dict[tuple, series_reference.Series] = {}


def _path(medium, orders: int, bits: int) -> series_reference.Series:
    """Its power series; kept where rock varies, as those take seconds."""
    if medium.uniform:
        return series_reference.Series(_Path(medium), orders, bits=bits)
    key = (medium.segments, orders, bits)
    if key not in _slow_paths:
        _slow_paths[key] = series_reference.Series(_Path(medium), orders, bits=bits)
    return _slow_paths[key]


class _Reference:
    """Exact values of the channels of one job, with more orders and more bits until they are sharp enough."""

    def __init__(self, medium, target, terms: int) -> None:
        self.medium = medium
        self.moves = [balls.Move(m.start, m.duration, m.change, m.order, m.easing) for m in target.moves]
        self.most = MOST_ORDERS if medium.uniform else MOST_ORDERS_VARYING
        self.orders = min(int(1.25 * terms) + 14, self.most) if medium.uniform else self.most
        self.bits = 320 + 3 * self.orders if medium.uniform else 320
        self.known: dict[float, list[arb]] = {}
        self.coefficients: dict[str, list[arb]] = {}

    def distance(self, channel: str, t: float, value: float, allowed: float) -> float | None:
        """Upper end of the distance from the exact value, uncertain by less than ``allowed``; None where that takes too many orders."""
        while True:
            ball, rest = self._sum(channel, t)
            with balls.precision(self.bits):
                radius = float(ball.rad())
                far = float(abs(arb(float(value)) - ball).upper())
            if radius > 0.5 * allowed or math.isnan(radius):
                assert self.bits < 20000, "the reference does not become sharp"
                self._again(self.orders, 2 * self.bits)
            elif rest > 0.5 * allowed:
                if self.orders >= self.most:
                    return None
                self._again(min(int(1.3 * self.orders) + 10, self.most), self.bits + self.orders)
            else:
                return far + rest

    def _again(self, orders: int, bits: int) -> None:
        self.orders, self.bits = orders, bits
        self.known.clear()
        self.coefficients = {}

    def _sum(self, channel: str, t: float) -> tuple[arb, float]:
        """The sum to `orders`, and what is left out at most, if the terms go on falling as they did over the last windows."""
        if t not in self.known:
            with balls.precision(self.bits):
                each = [_derivatives(move, t, self.orders) for move in self.moves]
                self.known[t] = [sum(same, arb(0)) for same in zip(*each, strict=True)]
        y = self.known[t]
        if channel == "target_pressure":
            return y[1], 0.0
        if not self.coefficients:
            self._coefficients()
        name, shift = ("injection_rate", -1) if channel == "injected_volume" else (channel, 0)
        with balls.precision(self.bits):
            terms = [c * y[k + 1 + shift] for k, c in enumerate(self.coefficients[name])]
            last, before = (max(_size(v) for v in part) for part in (terms[-_WINDOW:], terms[-2 * _WINDOW : -_WINDOW]))
            total = sum(terms, arb(0))
        if last == 0.0:
            return total, 0.0
        ratio = max(last / before, 0.25) if before else 1.0
        # the windows that follow, each of at most _WINDOW terms of its largest
        return total, _WINDOW * last * ratio / (1.0 - ratio) if ratio < 0.9 else math.inf

    def _coefficients(self) -> None:
        medium = self.medium
        while True:
            try:
                path = _path(medium, self.orders, self.bits)
                self.coefficients = path.channels(medium.face, medium.well_resistance, medium.well.storage, scaled=False)
                return
            except AssertionError:  # a coefficient that is not known to 60 bits
                assert self.bits < 20000, "the reference does not become sharp"
                self.bits *= 2


def _size(value: arb) -> float:
    return float(abs(value).upper())


def _derivatives(move: balls.Move, t: float, highest: int) -> list[arb]:
    """``y^(k)(t)`` of one move in the working precision that is set, k = -1 … highest (at least 1), so entry k + 1."""
    gamma = 1.0 / (move.order - 1.0)
    elapsed, width, outer = arb(float(t)) - arb(move.start), arb(move.easing * move.duration), arb(move.change)
    if not elapsed > 0:
        return [arb(0)] * (highest + 2)
    places, lift = [(elapsed / width, 1)], 1
    if move.easing < 1.0:
        ramp = arb(move.duration - move.easing * move.duration)
        places, lift = [(elapsed / width, 1), ((elapsed - ramp) / width, -1)], 2
        outer = outer * width / ramp
    out = [outer * sum((sign * balls.bump_running(gamma, s, lift - k) for s, sign in places), arb(0)) / width**k for k in range(-1, lift)]
    factor = outer / (balls.bump_integral(gamma) * width**lift)
    tables = [(balls._bump_taylor(s, gamma, highest - lift + 1), sign) for s, sign in places if s > 0 and s < 1]
    for j in range(highest - lift + 1):
        factor *= arb(j) / width if j else 1
        out.append(factor * sum((sign * table[j] for table, sign in tables), arb(0)))
    return out

"""What is proven, and what is estimated, about a plan's distance from the exact one."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass

from flatplan import units
from flatplan.channels import described
from flatplan.records import Record

# Share of its change by which the rounding of the rate may move the target before that is said.
_WORTH_SAYING = 1e-6


@dataclass(frozen=True, repr=False)
class Certificate(Record):
    """How far each channel of a plan can be from the exact one.

    Attributes
    ----------
    order : float
        Largest Gevrey order s among the moves. Below 2 the series converges at every duration; at 2 under a threshold.
    radius : float
        Smallest ρ [s] of the bounds ``sup|y^(k)| ≤ M (k!)^s / ρ^k``.
    log_constant : float
        ln M of the same bounds, for k ≥ 1 and all moves together (M itself leaves the range of a float at low orders), SI.
    terms : int
        Highest derivative used in any move.
    digits : int
        Decimal digits of the arithmetic the sum was made in (16: double precision).
    tolerance : float
        What was asked, relative to each channel's peak.
    tail : dict of str to float
        Proven bound on what the cut leaves out, for each channel, SI. For the target: how far the cut of the rate can move it.
    rounding : dict of str to float
        Bound on the rounding error of the sum, for each channel, SI: proven where more digits than a double's are carried; in
        double precision calibrated against ball arithmetic (at most 0.6 of it was used in 2,000 random cases). For the target: of
        the target as stated.
    peak : dict of str to float
        Largest size met on the plan's own grid, for each channel (pressures: of the change), SI.
    cancellation : dict of str to float
        Sum of the sizes of the terms over the peak: how much the terms cancel.
    target_kind : str
        What "target_pressure" stands for: "pressure", or "rate" for a held face (the rate through it [m³/s]).
    target_rounding : float
        How far the rounding of the rate can move the target, at most, SI: a rate in doubles that swings to 1e6 times its mean cannot
        hold the target to the last digits.
    share_of_threshold : float
        For moves of order 2: the travel time over twice the eased corner, the largest; their series converge while it is below 1.
        0 where every order is below 2.
    """

    order: float
    radius: float
    terms: int
    digits: int
    tolerance: float
    tail: dict[str, float]
    rounding: dict[str, float]
    peak: dict[str, float]
    cancellation: dict[str, float]
    target_kind: str = "pressure"
    target_rounding: float = 0.0
    share_of_threshold: float = 0.0
    log_constant: float = math.nan

    @property
    def met(self) -> bool:
        """Whether tail and rounding together stay within the tolerance in every channel."""
        return all(self.tail[c] + self.rounding[c] <= self.tolerance * self.peak[c] for c in self.tail)

    @property
    def rounding_basis(self) -> str:
        """What the bounds on rounding rest on: "proven", or in double precision "calibrated" against ball arithmetic."""
        return "proven" if self.digits > 16 else "calibrated"

    @property
    def convergence(self) -> str:
        """Why the series converges, in words."""
        if self.order < 2.0:
            return "below 2: converges for every duration"
        return f"at 2: converges while the travel time is below 2 eased corners; here it is {2.0 * self.share_of_threshold:.3g}"

    def _rows(self) -> Iterable[tuple[str, str]]:
        yield "Gevrey order", f"{self.order:.4g} ({self.convergence})"
        yield "radius ρ", units.text(self.radius, "time")
        yield "ln M", f"{self.log_constant:.4g} of sup|y^(k)| ≤ M (k!)^s / ρ^k, k ≥ 1, SI"
        yield "terms", f"{self.terms}, in {self.digits} digits (bounds on rounding: {self.rounding_basis})"
        for channel, tail in self.tail.items():
            kind, words = described(channel, self.target_kind)
            peak = self.peak[channel] or 1.0
            yield words, f"tail ≤ {tail / peak:.1e}, rounding ≤ {self.rounding[channel] / peak:.1e} of {units.text(peak, kind)}"
        yield "within tolerance", f"{'yes' if self.met else 'NO'} ({self.tolerance:.1e} of each peak)"
        share = self.target_rounding / (self.peak["target_pressure"] or 1.0)
        if share > _WORTH_SAYING:
            yield "rate as doubles", f"it swings so widely that its own rounding may move the target by up to {share:.1e} of its change"

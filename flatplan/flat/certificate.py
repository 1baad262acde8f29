"""What is proven, and what is estimated, about a plan's distance from the exact one."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

from flatplan import units
from flatplan.channels import described
from flatplan.records import Record


@dataclass(frozen=True, repr=False)
class Certificate(Record):
    """How far each channel of a plan can be from the exact one.

    Attributes
    ----------
    order : float
        Largest Gevrey order s among the moves; below 2, so the series converges at every duration.
    radius : float
        Smallest ρ [s] of the bounds ``sup|y^(k)| ≤ M (k!)^s / ρ^k``.
    terms : int
        Highest derivative used in any move.
    digits : int
        Decimal digits of the arithmetic the sum was made in (16: double precision).
    tolerance : float
        What was asked, relative to each channel's peak.
    tail : dict of str to float
        Proven bound on what the cut leaves out, for each channel, SI.
    rounding : dict of str to float
        Estimate of the rounding error of the sum, for each channel, SI.
    peak : dict of str to float
        Largest size met on the plan's own grid, for each channel (pressures: of the change), SI.
    cancellation : dict of str to float
        Sum of the sizes of the terms over the peak: how much the terms cancel.
    target_kind : str
        What "target_pressure" stands for: "pressure", or "rate" for a held face (the rate through it [m³/s]).
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

    @property
    def met(self) -> bool:
        """Whether tail and rounding together stay within the tolerance in every channel."""
        return all(self.tail[c] + self.rounding[c] <= self.tolerance * self.peak[c] for c in self.tail)

    def _rows(self) -> Iterable[tuple[str, str]]:
        yield "Gevrey order", f"{self.order:.4g} (below 2: converges for every duration)"
        yield "radius ρ", units.text(self.radius, "time")
        yield "terms", f"{self.terms}, in {self.digits} digits"
        for channel, tail in self.tail.items():
            kind, words = described(channel, self.target_kind)
            peak = self.peak[channel] or 1.0
            yield words, f"tail ≤ {tail / peak:.1e}, rounding about {self.rounding[channel] / peak:.1e} of {units.text(peak, kind)}"
        yield "within tolerance", f"{'yes' if self.met else 'NO'} ({self.tolerance:.1e} of each peak)"

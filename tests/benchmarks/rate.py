"""Our injection rate against ball-arithmetic power series, mpmath's Taylor derivatives and symbolic differentiation."""

from __future__ import annotations

import time
from dataclasses import dataclass
from functools import lru_cache

import mpmath
import numpy as np
import sympy

from flatplan.flat.extended import ExtendedSum

from .balls import TRUTH_BITS, BallRate, bits_for
from .jobs import TIMES, Job, one_bump, with_terms
from .table import EXTRAPOLATED, Row, at_most, by_turns, faster

BALL_AIM, OTHER_AIM, EXTENDED_AIM = 20.0, 1000.0, 3.0


@dataclass(frozen=True)
class Reference:
    """A job's exact rate at a few of its times, and how far ours is from it."""

    job: Job
    times: np.ndarray
    truth: np.ndarray
    peak: float
    error: float

    @classmethod
    def of(cls, job: Job, count: int) -> Reference:
        """The reference at ``count`` of the job's times."""
        times = job.times()[TIMES // (2 * count) :: TIMES // count]
        truth = BallRate(job, TRUTH_BITS)(times)
        peak = float(np.abs(truth).max())
        return cls(job, times, truth, peak, float(np.abs(job.plan.rate(times) - truth).max()))

    def as_accurate(self, times: np.ndarray) -> tuple[BallRate, float]:
        """Ball arithmetic at the least precision that is as accurate as ours, and how well both agree at ``times``.

        The precision is found where the truth is known, then raised until the two agree everywhere else as well.
        """
        bits = bits_for(self.job, self.error, self.truth, self.times)
        ours = self.job.plan.rate(times)
        while True:
            balls = BallRate(self.job, bits)
            apart = float(np.abs(ours - balls(times)).max())
            if apart <= 3.0 * self.error or bits >= TRUTH_BITS:
                return balls, apart / self.peak
            bits += 8


def double_path(quick: bool) -> list[Row]:
    """Jobs for which double precision serves."""
    rows = []
    for job in (one_bump(0.5, 1.8), with_terms(60, 1.8)):
        reference = Reference.of(job, 40 if quick else 100)
        rows += [_balls(reference, quick), _mpmath(reference, quick), _symbolic(job, quick)]
    return rows


def _balls(reference: Reference, quick: bool) -> Row:
    job, times = reference.job, reference.job.times()
    balls, agreement = reference.as_accurate(times)
    ours, other = by_turns([lambda: job.plan.rate(times), lambda: balls(times)], 3 if quick else 9)
    against = f"ball power series, {balls.bits} bits (accuracy of ours)"
    return faster(f"rate, {job.name}", against, ours, other, agreement=agreement, least=BALL_AIM)


def _mpmath(reference: Reference, quick: bool) -> Row:
    """``mpmath.taylor`` (finite differences in the precision it chooses) at a few times, taken times 2,000 / few."""
    job = reference.job
    few = 2 if quick else 5
    pick = np.linspace(0, reference.times.size - 1, few + 2).astype(int)[1:-1]
    times = reference.times[pick]
    x, gamma = mpmath.mpf(job.travel_time) / mpmath.mpf(job.duration), mpmath.mpf(job.gamma)
    height = 4**gamma

    def bump(z: mpmath.mpf) -> mpmath.mpf:
        return mpmath.exp(height - (z * (1 - z)) ** -gamma)

    ends = [0, mpmath.mpf(1) / 8, mpmath.mpf(1) / 2, mpmath.mpf(7) / 8, 1]
    total = mpmath.quad(lambda z: bump(z) if 0 < z < 1 else mpmath.mpf(0), ends)
    weights = [x**k * mpmath.factorial(k - 1) / mpmath.factorial(2 * k - 1) for k in range(1, job.terms + 1)]

    def rate() -> list[float]:
        out = []
        for t in times.tolist():
            taylor = mpmath.taylor(bump, mpmath.mpf(t) / mpmath.mpf(job.duration), job.terms - 1)
            out.append(job.factor * float(mpmath.fdot(weights, taylor) / total))
        return out

    all_times = job.times()
    ours, other = by_turns([lambda: job.plan.rate(all_times), rate], 1 if quick else 3)
    agreement = float(np.abs(job.plan.rate(times) - np.array(rate())).max()) / reference.peak
    against = f"mpmath.taylor, {few} times taken × {TIMES // few}"
    return faster(f"rate, {job.name}", against, ours, other * TIMES / few, agreement=agreement, least=OTHER_AIM, extrapolated=True)


@lru_cache
def _differentiated(gamma: float, orders: int) -> tuple[np.ndarray, list[float], np.ndarray]:
    """The bump differentiated by sympy, compiled and evaluated at 2,000 σ: (σ, seconds per order, derivatives)."""
    sigma = sympy.Symbol("sigma", positive=True)
    exact = sympy.nsimplify(gamma)
    formula = sympy.exp(4**exact - (sigma * (1 - sigma)) ** -exact)
    places = np.linspace(0.0, 1.0, TIMES + 2)[1:-1]
    costs, values = [], np.empty((orders + 1, TIMES))
    for k in range(orders + 1):
        begin = time.process_time()
        formula = sympy.diff(formula, sigma) if k else formula
        values[k] = sympy.lambdify(sigma, formula, "numpy")(places)
        costs.append(time.process_time() - begin)
    return places, costs, values


def _symbolic(job: Job, quick: bool) -> Row:
    """Symbolic differentiation of the bump, each derivative evaluated at 2,000 times.

    Measured for the first few orders; every further order is taken to cost no more than the last one measured
    (in truth each costs about twice the one before). Agreement: the derivatives themselves, each relative to its peak.
    """
    measured = 7 if quick else 9
    places, costs, values = _differentiated(job.gamma, measured)
    inside = (places > 0.1) & (places < 0.9)  # nearer to the ends the formulas lose their digits
    times = places * job.duration
    wanted = job.plan.target.derivatives(times[inside], measured + 1)[1:]
    found = values[:, inside] / job.duration ** np.arange(measured + 1)[:, None]
    found *= wanted[0].max() / found[0].max()  # the bump's height and integral
    agreement = float((np.abs(found - wanted).max(axis=1) / np.abs(wanted).max(axis=1)).max())
    other = sum(costs) + costs[-1] * (job.terms - 1 - measured)
    (ours,) = by_turns([lambda: job.plan.rate(job.times())], 5)
    against = f"sympy derivatives, orders 0–{measured} run once, each further one {EXTRAPOLATED} the last"
    return faster(f"rate, {job.name}", against, ours, other, agreement=agreement, least=OTHER_AIM, extrapolated=True)


def extended_path(quick: bool) -> list[Row]:
    """Jobs whose terms cancel so much that more digits are needed: the first time (with all curves made), and again."""
    rows = []
    for x, order in ((8.0, 1.25), (16.0, 1.5), (16.0, 1.25)):
        job = one_bump(x, order)
        plan = job.plan
        reference = Reference.of(job, 40 if quick else 100)
        # either side takes so long per time that a part of the 2,000 shows the ratio
        times = job.times(TIMES // 5 if quick else TIMES)
        balls, agreement = reference.as_accurate(times)

        def first(plan: object = plan, times: np.ndarray = times) -> np.ndarray:
            return ExtendedSum(plan.medium, plan.series, plan.certificate.digits).evaluate(["injection_rate"], times, 0)

        sides = [first, lambda j=job, t=times: j.plan.rate(t), lambda b=balls, t=times: b(t)]
        once, again, other = by_turns(sides, 5, budget=4.0 if quick else 45.0)
        what = f"rate, {job.name}, {plan.certificate.digits} digits, {times.size:,} times"
        against = f"ball power series, {balls.bits} bits (accuracy of ours)"
        rows.append(at_most(f"{what}, first call", against, once, other, EXTENDED_AIM, agreement=agreement))
        rows.append(at_most(f"{what}, later calls", against, again, other, EXTENDED_AIM))
    return rows

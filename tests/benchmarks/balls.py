"""Power series in ball arithmetic (python-flint), one time after the other; no code shared with the package."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager

import numpy as np
from flint import acb, arb, arb_series, ctx

from .jobs import Job

TRUTH_BITS = 1200


@contextmanager
def precision(bits: int, orders: int) -> Iterator[None]:
    """Working precision and series length, put back afterwards."""
    before, cap = ctx.prec, ctx.cap
    ctx.prec, ctx.cap = bits, orders
    try:
        yield
    finally:
        ctx.prec, ctx.cap = before, cap


def bump_series(sigma: arb, gamma: arb, height: arb, orders: int) -> arb_series:
    """Taylor series of the bump of height 1 at σ, ``orders`` coefficients."""
    return (height - arb_series([sigma * (1 - sigma), 1 - 2 * sigma, -1], orders) ** (-gamma)).exp()


def bump_total(gamma: float, bits: int) -> arb:
    """``∫ b`` of the bump of height 1, by rigorous integration."""
    with precision(bits + 40, 8):
        g, height = acb(gamma), acb(4) ** acb(gamma)
        # beyond these ends the bump is below exp(-bits)
        end = arb((4.0**gamma + bits) ** (-1.0 / gamma))
        return acb.integral(lambda z, _: (height - (z * (1 - z)) ** (-g)).exp(), end, 1 - end).real


class BallRate:
    """The injection rate of a job; what does not depend on time is made beforehand.

    Parameters
    ----------
    job : Job
    bits : int
        Working precision.
    terms : int, optional
        Terms of the series, by default the job's.
    """

    def __init__(self, job: Job, bits: int, terms: int | None = None) -> None:
        self.job, self.bits = job, bits
        self.terms = job.terms if terms is None else terms
        total = bump_total(job.gamma, bits)
        with precision(bits + 40, 8):
            x = arb(job.travel_time) / arb(job.duration)
            weight = arb(job.factor) / total * x
            weights = [weight]
            for k in range(2, self.terms + 1):
                weight = weight * x * (k - 1) / ((2 * k - 1) * (2 * k - 2))
                weights.append(weight)
        with precision(bits, 8):
            self.weights = [+w for w in weights]
            self.gamma = arb(job.gamma)
            self.height = arb(4) ** self.gamma

    def balls(self, times: np.ndarray) -> list[arb]:
        """The rate as balls."""
        with precision(self.bits, self.terms):
            width = arb(self.job.duration)
            out = []
            for t in times.tolist():
                series = bump_series(arb(t) / width, self.gamma, self.height, self.terms)
                total = arb(0)
                for k, weight in enumerate(self.weights):
                    total += weight * series[k]
                out.append(total)
            return out

    def __call__(self, times: np.ndarray) -> np.ndarray:
        """Midpoints of the balls: the rate [m³/s]."""
        return np.array([float(ball.mid()) for ball in self.balls(times)])


def bits_for(job: Job, error: float, truth: np.ndarray, times: np.ndarray) -> int:
    """Least precision, in steps of 8 bits from 40, whose midpoints are within ``error`` of the truth at ``times``."""
    low, high = 5, 50  # in bytes
    while low < high:
        middle = (low + high) // 2
        values = BallRate(job, 8 * middle)(times)
        if np.all(np.abs(values - truth) <= error):
            high = middle
        else:
            low = middle + 1
    return 8 * low

"""How cost grows with times, moves, terms and zones: the fitted exponent of processor time."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np

import flatplan as fp

from .jobs import CHANGE, fluid, layer, one_bump, rock
from .table import Row, by_turns, duration, exponent

_SLACK = 0.1  # an exponent is measured to about this


def growth(quick: bool) -> list[Row]:
    """Exponents of the rate at many times, of making a plan, and of a medium's coefficients."""
    repeats = 2 if quick else 5
    return [
        _times(repeats, (4_000, 32_000) if quick else (4_000, 16_000, 64_000, 256_000)),
        _moves(repeats, (2, 16) if quick else (2, 8, 32)),
        _making(repeats, (2, 16) if quick else (2, 8, 32)),
        _terms(repeats),
        *_five_zones(repeats),
        _zones(repeats, (4, 64, 256) if quick else (4, 16, 64, 256, 1024)),
    ]


def _row(what: str, sizes: Sequence[int], sides: Sequence[Callable[[], object]], repeats: int, most: float) -> Row:
    seconds = by_turns(sides, repeats)
    slope = exponent(sizes, seconds)
    span = f"{sizes[0]:,} to {sizes[-1]:,}"
    return Row(what, span, duration(seconds[0]), duration(seconds[-1]), f"exponent {slope:.2f}", "", f"≤ {most:g}", slope <= most + _SLACK)


def _times(repeats: int, counts: Sequence[int]) -> Row:
    job = one_bump(0.5, 1.8)
    each = [job.times(n) for n in counts]
    sides = [lambda t=t: job.plan.rate(t) for t in each]
    return _row("growth of rate with times (first, last)", counts, sides, repeats, 1.0)


def _overlapping(count: int) -> fp.Target:
    """Moves that are all under way together for most of the time."""
    target = fp.Target(start=21e6)
    for i in range(count):
        target = target.move(by=CHANGE / count, over=1e5, at=100.0 * i)
    return target


def _moves(repeats: int, counts: Sequence[int]) -> Row:
    plans = [fp.feedforward(layer(), _overlapping(n)) for n in counts]
    sides = [lambda p=p: p.rate(np.linspace(0.0, p.end, 2000)) for p in plans]
    return _row("growth of rate with moves, all under way at 2,000 times", counts, sides, repeats, 1.0)


def _making(repeats: int, counts: Sequence[int]) -> Row:
    targets = []
    for n in counts:
        target = fp.Target(start=21e6)
        for i in range(n):
            target = target.move(by=CHANGE * (-1) ** i, over=1e5)
        targets.append(target)
    medium = layer()
    sides = [lambda t=t: fp.feedforward(medium, t) for t in targets]
    return _row("growth of feedforward with moves, one after the other", counts, sides, repeats, 1.0)


def _terms(repeats: int) -> Row:
    jobs = [one_bump(x, 1.8) for x in (0.8, 1.6, 2.4, 3.2, 4.0)]
    times = [job.times() for job in jobs]
    sides = [lambda j=j, t=t: j.plan.rate(t) for j, t in zip(jobs, times, strict=True)]
    return _row("growth of rate with terms, 2,000 times", [j.terms for j in jobs], sides, repeats, 2.0)


def _zones(repeats: int, counts: Sequence[int]) -> Row:
    def fresh(count: int) -> None:
        zones = [fp.Zone(rock=rock(4e-14 * (1 + i % 3)), fluid=fluid(), length=140.0 / count, area=6000.0) for i in range(count)]
        fp.zoned(zones).coefficients("injection_rate", 40)

    return _row("growth of coefficients with zones, 40 terms", counts, [lambda n=n: fresh(n) for n in counts], repeats, 1.0)


def _five_zones(repeats: int) -> list[Row]:
    """150 coefficients of a chain of five zones, without and with leakage, nothing known beforehand."""

    def fresh(leakage: float) -> None:
        zones = [
            fp.Zone(rock=rock(k * 1e-14), fluid=fluid(), length=28.0, area=6000.0, leakage=leakage) for k in (4.0, 1.0, 9.0, 2.0, 5.0)
        ]
        fp.zoned(zones).coefficients("injection_rate", 150)

    plain, leaky = by_turns([lambda: fresh(0.0), lambda: fresh(1e-16)], repeats)
    return [
        Row("150 coefficients of five zones", "", duration(plain), "", "", "", "", None),
        Row("the same with leakage", "without", duration(leaky), duration(plain), f"{leaky / plain:.2g} × its time", "", "", None),
    ]

"""For the tests of `flatplan.decide` and `flatplan.field`: one slab, its plans, and plain looks at a channel."""

from __future__ import annotations

from functools import cache

import numpy as np

import flatplan as fp

ROCK = fp.Rock(permeability="40 mD", porosity=0.12, compressibility="5e-10 1/Pa")
WATER = fp.Fluid(viscosity="0.5 cP", compressibility="4.5e-10 1/Pa")
HOUR, DAY = 3600.0, 86400.0


def slab(**more):
    """A sealed layer, 140 m long; travel time about 7.9 hours."""
    return fp.slab(length="140 m", area="6000 m^2", rock=ROCK, fluid=WATER, **more)


MEDIUM = slab()
HELD = slab(face=fp.Face(held=True))
LEAKING = slab(leakage="2e-16 1/(Pa s)")


def one_move(over, order=1.8, easing=0.3, to="22.5 MPa", medium=MEDIUM, start="21 MPa", **rest):
    """The plan of a single move."""
    return fp.feedforward(medium, fp.Target(start=start).move(to=to, over=over, order=order, easing=easing), **rest)


@cache
def up():
    """Up 15 bar in three days: back-flow of a few litres."""
    return one_move("3 d")


@cache
def up_and_down():
    """Up 15 bar, held, down 7 bar."""
    target = fp.Target(start="21 MPa").move(to="22.5 MPa", over="3 d", easing=0.3).hold("5 d").move(to="21.8 MPa", over="4 d")
    return fp.feedforward(MEDIUM, target)


@cache
def held():
    """A rate through a face that is held at 180 bar."""
    return fp.feedforward(HELD, fp.Target(start="0 L/s", pressure="18 MPa").move(to="0.5 L/s", over="2 d"))


def sampled_extremes(plan, channel, derivative=0, count=200_000):
    """(least, when, largest, when) by looking alone: dense samples, and 401 more across the best one's neighbours, three times."""
    times = np.linspace(0.0, plan.end, count)
    values = plan.evaluate(channel, times, derivative)
    out = []
    for sign in (-1.0, 1.0):
        at, seen = times, sign * values
        for _ in range(3):
            i = int(np.argmax(seen))
            at = np.linspace(at[max(i - 1, 0)], at[min(i + 1, len(at) - 1)], 401)
            seen = sign * plan.evaluate(channel, at, derivative)
        i = int(np.argmax(seen))
        out += [sign * float(seen[i]), float(at[i])]
    return tuple(out)


def quadrature(function, edges, nodes=24):
    """Gauss-Legendre on each stretch between ``edges``."""
    x, w = np.polynomial.legendre.leggauss(nodes)
    edges = np.asarray(edges, dtype=float)
    half = 0.5 * np.diff(edges)
    times = edges[:-1, None] + half[:, None] * (x + 1.0)
    return float(np.sum(half[:, None] * w * function(times.ravel()).reshape(times.shape)))

"""For the tests of `flatplan.numeric`: media made by hand, and a second, plainly written solution in the Laplace domain."""

from __future__ import annotations

import math

import numpy as np
from flint import acb, arb, ctx

from flatplan.site import Face, Medium, Segment, Well

MOBILITY, CAPACITY = 8e-11, 1.1e-10  # 40 mD and 0.5 cP; 12 % and 9.2e-10 1/Pa
LENGTH, AREA, HEIGHT = 140.0, 6000.0, 20.0
FLOWS = ("linear", "radial", "spherical")
FACTORS = {"linear": AREA, "radial": 2.0 * math.pi * HEIGHT, "spherical": 4.0 * math.pi}


def linear(zones=((LENGTH, 1.0, 1.0, 0.0),), face=None, well=None, resistance=0.0):
    """A chain of zones (length [m], factor on mobility, factor on capacity, leakage [1/(Pa s)]) from the target face on."""
    ends = np.concatenate([[0.0], np.cumsum([z[0] for z in zones])])
    segments = [
        Segment(float(a), float(b), MOBILITY * m, CAPACITY * c, AREA, leak)
        for a, b, (_, m, c, leak) in zip(ends[:-1], ends[1:], zones, strict=True)
    ]
    return Medium("linear", tuple(segments), face or Face(), well or Well(), resistance)


def round_medium(flow, radii, zones=((1.0, 1.0, 0.0),), face=None, well=None, resistance=0.0):
    """Zones (factor on mobility, factor on capacity, leakage) between radii [m] from the target face to the well, rising or falling."""
    power = FLOWS.index(flow)
    direction = 1.0 if radii[-1] > radii[0] else -1.0
    ends = [direction * (r - radii[0]) for r in radii]
    segments = [
        Segment(a, b, MOBILITY * m, CAPACITY * c, FACTORS[flow], leak, power, radii[0], direction)
        for a, b, (m, c, leak) in zip(ends[:-1], ends[1:], zones, strict=True)
    ]
    return Medium(flow, tuple(segments), face or Face(), well or Well(), resistance)


# --- the Laplace domain, in ball arithmetic ----------------------------------------------------------


def _across(segment, s, p, flow):
    """Pressure and rate at the end of a segment from those at its start, for Laplace variable ``s``.

    Linear: hyperbolic functions; radial: modified Bessel functions; spherical: hyperbolic functions over r. Carslaw and Jaeger
    1959, ch. 12-13 [CarslawJaeger1959].
    """
    q = ((segment.capacity * s + segment.leakage) / segment.mobility).sqrt()
    a, b = (segment.origin + segment.direction * arb(x) for x in (segment.start, segment.end))
    t = segment.direction * arb(segment.mobility) * segment.area_factor
    if segment.power == 0:
        c, sh, t = (q * (b - a)).cosh(), (q * (b - a)).sinh(), t * q
        return p * c + flow * sh / t, p * t * sh + flow * c
    if segment.power == 1:
        (i0, i1), (j0, j1) = ((z.bessel_i(0), z.bessel_i(1)) for z in (q * a, q * b))
        (k0, k1), (l0, l1) = ((z.bessel_k(0), z.bessel_k(1)) for z in (q * a, q * b))
        slope = flow / (t * a * q)
        # Wronskian: I0 K1 + I1 K0 = 1/z
        grow, fall = q * a * (p * k1 + slope * k0), q * a * (p * i1 - slope * i0)
        return grow * j0 + fall * l0, t * b * q * (grow * j1 - fall * l1)
    u, du = p * a, p + flow / (t * a)  # u = r p obeys u'' = q² u
    c, sh = (q * (b - a)).cosh(), (q * (b - a)).sinh()
    u, du = u * c + du * sh / q, u * q * sh + du * c
    return u / b, t * b * (du - u / b)


def _transforms(medium, s):
    """Laplace transforms of the outputs for a unit rate from time 0 on."""
    face, well = medium.face, medium.well
    p, flow = (acb(0), acb(1)) if face.held else (acb(1), face.leak + face.storage * s)
    for segment in medium.segments:
        p, flow = _across(segment, s, p, flow)
    bottomhole = p + medium.well_resistance * flow
    rate = (flow + well.storage * s * bottomhole) * s
    return {
        "target_pressure": 1 / rate,
        "sandface_pressure": p / rate,
        "bottomhole_pressure": bottomhole / rate,
        "sandface_rate": flow / rate,
    }


def unit_rate_answers(medium, time, nodes=20):
    """Every output at ``time`` for a unit rate from time 0 on, by a fixed Talbot contour; about 0.6 digits for each node.

    Source: J. Abate and P. P. Valkó, "Multi-precision Laplace transform inversion", Int. J. Numer. Meth. Engng 60 (2004) 979.
    """
    before = ctx.prec
    try:
        ctx.prec = 160
        r = arb(2 * nodes) / (5 * arb(time))
        total = {name: (value * (r * time).exp() / 2).real for name, value in _transforms(medium, acb(r)).items()}
        for k in range(1, nodes):
            theta = k * arb.pi() / nodes
            cot = theta.cot()
            s = r * theta * acb(cot, 1)
            weight = (s * time).exp() * acb(1, theta + (theta * cot - 1) * cot)
            for name, value in _transforms(medium, s).items():
                total[name] += (weight * value).real
        return {name: float((value * r / nodes).mid()) for name, value in total.items()}
    finally:
        ctx.prec = before

"""Channel coefficients in any number of digits, for sums whose terms cancel too far for double precision.

In the Laplace domain ``(r^n T p')' = r^n (S s + Λ) p`` on each zone (n = 0, 1, 2), that is
``r p'' + n p' = κ r p`` with ``κ = (s + λ)/α``. About a place a, with ρ = r - a, the Taylor coefficients obey

    a (j+2)(j+1) c_(j+2) = κ (a c_j + c_(j-1)) - (j+1)(j+n) c_(j+1)

and each c_j is carried as a polynomial in s up to the order wanted: the generating functions themselves are
its coefficients, scaled as elsewhere by t_D^k/(2k)! so that all are of one size. In radial flow a zone is crossed
in steps of half the radius at most, so that the series fall by at least two with each term; in linear flow one
step and finitely many terms do (rock that varies along a zone: `precise_varying`). The numbers are integers times
2^-bits, one array entry for each power of s.
"""

from __future__ import annotations

import math
from dataclasses import replace
from itertools import pairwise

import mpmath
import numpy as np
from gmpy2 import mpz

from flatplan.flat.precise_varying import across_varying
from flatplan.site import Medium, Segment

_STEP = 0.5  # largest |ρ|/a in one step
_GUARD = 40


def precise_scaled(medium: Medium, channels: tuple[str, ...], orders: int, bits: int) -> list[list[mpmath.mpf]]:
    """``ĉ_0 … ĉ_orders`` of each channel to about ``bits`` bits.

    Parameters
    ----------
    medium : Medium
    channels : tuple of str
        Names as in `generating.scaled_coefficients`, without "pressure", which has a function of its own.
    orders : int
    bits : int

    Returns
    -------
    list of list of mpf
    """
    key = f"precise to {orders} in {bits} bits"
    if key not in medium.memory:
        medium.memory[key] = _carried(medium, tuple((s, 1.0) for s in medium.segments), orders, bits)
    pressure, rate, stored = medium.memory[key]
    with mpmath.workprec(bits + _GUARD):
        return [_channel(medium, name, pressure, rate, stored) for name in channels]


def precise_pressure(medium: Medium, x: float, orders: int, bits: int) -> list[mpmath.mpf]:
    """``φ̂_0(x) … φ̂_orders(x)`` to about ``bits`` bits."""
    before = tuple((s, min((x - s.start) / s.length, 1.0)) for s in medium.segments if s.start < x)
    if not before:
        first = mpmath.mpf(0 if medium.face.held else 1)
        return [first] + [mpmath.mpf(0)] * orders
    return _carried(medium, before, orders, bits)[0]


def _channel(medium: Medium, name: str, pressure: list, rate: list, stored: list) -> list[mpmath.mpf]:
    if name == "target_pressure":
        return [mpmath.mpf(1)] + [mpmath.mpf(0)] * (len(pressure) - 1)
    if name == "stored_volume":
        return stored
    if name == "sandface_pressure":
        return pressure
    if name == "sandface_rate":
        return rate
    resistance, storage, t_d = (mpmath.mpf(v) for v in (medium.well_resistance, medium.well.storage, medium.travel_time))
    bottomhole = [p + resistance * f for p, f in zip(pressure, rate, strict=True)]
    if name == "bottomhole_pressure":
        return bottomhole
    return [f + (storage * bottomhole[k - 1] * (2 * k * (2 * k - 1)) / t_d if k else 0) for k, f in enumerate(rate)]


def _carried(medium: Medium, stretches: tuple[tuple[Segment, float], ...], orders: int, bits: int) -> tuple[list, list, list]:
    """φ̂_k and F̂_k at the end of the stretches (each with the share of it that is crossed), carried zone by zone, and ∫ S φ̂_k dx.

    In this scaling an error made early grows by up to e^(2k) on the way, which is less than 3 bits for each order.
    """
    work = bits + _GUARD + 3 * orders

    def whole(value: mpmath.mpf) -> mpz:
        return mpz(int(mpmath.nint(mpmath.ldexp(value, work))))

    with mpmath.workprec(work + 64):
        t_d = mpmath.mpf(medium.travel_time)
        # rates are carried over the first conductance, so that both fields are of the size of a pressure
        first = stretches[0][0]
        unit = mpmath.mpf(first.mobility) * first.area_factor
        p, f = np.full((2, orders + 1), mpz(0), dtype=object)
        if medium.face.held:
            f[0] = whole(1 / unit)
        else:
            p[0] = mpz(1) << work
            f[0] = whole(mpmath.mpf(medium.face.leak) / unit)
            if orders:
                f[1] = whole(2 * mpmath.mpf(medium.face.storage) / t_d / unit)
        stored = [mpmath.mpf(0)] * (orders + 1)
        for segment, share in stretches:
            if segment.uniform:
                part = segment if share == 1.0 else replace(segment, end=segment.start + share * segment.length)
                p, f, content = _across(part, p, f, t_d, unit, work)
            else:
                p, f, content = across_varying(segment, share, p, f, t_d, unit, work, bits)
            stored = [before + mpmath.ldexp(mpmath.mpf(int(v)), -work) for before, v in zip(stored, content, strict=True)]
        pressure = [mpmath.ldexp(mpmath.mpf(int(v)), -work) for v in p]
        rate = [mpmath.ldexp(mpmath.mpf(int(v)), -work) * unit for v in f]
    return pressure, rate, stored


def _across(segment: Segment, p: np.ndarray, f: np.ndarray, t_d: mpmath.mpf, unit: mpmath.mpf, work: int) -> tuple:
    """Carry (p, T p_x / unit), scaled polynomials in s, over one zone; and ∫ S p dx over it [m³/Pa]."""
    trans = mpmath.mpf(segment.mobility) * mpmath.mpf(segment.area_factor) / unit
    capacity = mpmath.mpf(segment.capacity) * mpmath.mpf(segment.area_factor)
    alpha = mpmath.mpf(segment.mobility) / mpmath.mpf(segment.capacity)
    leak = mpmath.mpf(segment.leakage) / mpmath.mpf(segment.capacity)
    direction = 1 if segment.power == 0 else int(segment.direction)
    content = np.zeros_like(p)
    places = _places(segment)
    for a, b in pairwise(places):
        area = a**segment.power
        # along r the derivative carries the direction: dp/du with u = (r - a)/(b - a)
        slope = _scaled(f, direction * (b - a) / (trans * area), work)
        p, slope, mean = _step(segment.power, p, slope, a, b - a, alpha, leak, t_d, work)
        f = _scaled(slope, direction * trans * b**segment.power / (b - a), work)
        content = content + _scaled(mean, capacity * area * abs(b - a), work)
    return p, f, content


def _places(segment: Segment) -> list[mpmath.mpf]:
    """Ends of the steps over a zone: x in linear flow (one step), r otherwise."""
    if segment.power == 0:
        return [mpmath.mpf(0), mpmath.mpf(segment.length)]
    a, b = (mpmath.mpf(segment.origin) + mpmath.mpf(segment.direction) * mpmath.mpf(x) for x in (segment.start, segment.end))
    # inwards the step is measured on the larger radius, so a few more are needed
    count = max(1, math.ceil(abs(float(mpmath.log(b / a))) / math.log1p(_STEP) * (1.0 if b > a else 1.3)))
    return [a * (b / a) ** (mpmath.mpf(i) / count) for i in range(count + 1)]


def _scaled(values: np.ndarray, factor: mpmath.mpf, work: int) -> np.ndarray:
    whole = int(mpmath.nint(mpmath.ldexp(factor, work)))
    return values * whole >> work


def _step(
    power: int,
    p: np.ndarray,
    slope: np.ndarray,
    a: mpmath.mpf,
    h: mpmath.mpf,
    alpha: mpmath.mpf,
    leak: mpmath.mpf,
    t_d: mpmath.mpf,
    work: int,
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Sum the Taylor series over one step of signed length ``h``: (p, dp/du) at its end, and ∫ p (r/a)^n du."""
    by_s = int(mpmath.nint(mpmath.ldexp(h * h / (alpha * t_d), work)))
    by_leak = int(mpmath.nint(mpmath.ldexp(h * h * leak / alpha, work)))
    ratio = int(mpmath.nint(mpmath.ldexp(h / a, work))) if power else 0
    up = np.array([2 * k * (2 * k - 1) * by_s for k in range(1, len(p))], dtype=object)

    def kappa(values: np.ndarray) -> np.ndarray:
        """κ h² times a scaled polynomial in s: one order up in the scaling t_D^k/(2k)!."""
        out = np.zeros_like(values)
        out[1:] = values[:-1] * up >> work
        return out + (values * by_leak >> work) if by_leak else out

    before, now, after = np.zeros_like(p), p, slope  # c_(j-1), c_j, c_(j+1) for j = 0
    total, rise = p + slope, slope.copy()
    mean = _moment(power, p, 0, ratio, work) + _moment(power, slope, 1, ratio, work)
    j = 0
    small = 0
    while small < 3:
        right = kappa(now)
        if power:
            right = right + (kappa(before) * ratio >> work) - ((j + 1) * (j + power) * after * ratio >> work)
        new = right // ((j + 2) * (j + 1))
        total = total + new
        rise = rise + (j + 2) * new
        mean = mean + _moment(power, new, j + 2, ratio, work)
        # three terms in a row at the last bits: what follows falls by at least two each time
        small = small + 1 if max(abs(v) for v in new) <= 2 else 0
        before, now, after = now, after, new
        j += 1
    return total, rise, mean


def _moment(power: int, c: np.ndarray, j: int, ratio: int, work: int) -> np.ndarray:
    """∫_0^1 c u^j (1 + (h/a) u)^n du."""
    out = c // (j + 1)
    if power == 1:
        return out + ((c * ratio >> work) // (j + 2))
    if power == 2:
        first = c * ratio >> work
        return out + 2 * first // (j + 2) + ((first * ratio >> work) // (j + 3))
    return out

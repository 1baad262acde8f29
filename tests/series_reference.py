"""An independent reference for the tests: channel coefficients of any path from the defining power series, in ball arithmetic.

In each zone the Laplace-domain field is a sum of two functions that are entire in q² = (s + λ)/α: cosh and sinh (linear
flow), the same over r (spherical flow), and in radial flow the modified Bessel functions

    I_0(qr) = Σ z^j/j!²          ln(r/r_1) I_0(qr) - Σ H_j z^j/j!²          z = q² r²/4,  H_j = 1 + 1/2 + … + 1/j

which is K_0(qr) up to its sign and a multiple of I_0 [AbramowitzStegun1964], 9.6.10 to 9.6.13. Zones are multiplied as 2×2 matrices
of power series in s. Nothing is shared with the package but the numbers of the medium. Rock that varies along a zone: power series
along the path instead, from the recurrence itself.
"""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

from ball_reference import precision
from flint import arb, arb_poly, arb_series, ctx, fmpq

CHANNELS = ("sandface_pressure", "sandface_rate", "bottomhole_pressure", "injection_rate", "stored_volume")


class Series:
    """Power series in σ = s t_D of one path: columns for a sealed face (pressure 1) and for a held one (rate 1).

    Parameters
    ----------
    medium : Medium
        Its segments, and its travel time as the scale; its face and well are put in by `channels`.
    orders : int
    more : int
        Orders carried beyond those asked for.
    """

    def __init__(self, medium, orders: int, bits: int | None = None, x: float | None = None, more: int = 16) -> None:
        self.more = more
        self.orders = orders = orders + more
        self.bits = bits or 600 + 14 * orders
        self.t_d = medium.travel_time
        segments = medium.segments if x is None else tuple(replace(s, end=min(s.end, x)) for s in medium.segments if s.start < x)
        with self._settings():
            one, zero = arb_series([1], orders + 1), arb_series([0], orders + 1)
            self.columns = [(one, zero, zero), (zero, one, zero)]
            for segment in (piece for whole in segments for piece in _split(whole)):
                cross = _varying if segment.mobility_curve or segment.capacity_curve else _uniform
                (pp, pf), (fp, ff), content = cross(segment, arb(self.t_d), orders)
                moved = []
                for p, f, stored in self.columns:
                    p_end, f_end = pp * p + pf * f, fp * p + ff * f
                    inside = content[0] * p + content[1] * f if content else self._content(segment, f_end - f)
                    moved.append((p_end, f_end, stored + inside))
                self.columns = moved

    def _settings(self):
        return _capped(self.bits, self.orders + 1)

    def _content(self, segment, gain: arb_series) -> arb_series:
        """∫ S p dx over a zone of uniform rock: its rate grows by ∫ S (s + λ) p. Downwards in order, where errors die out."""
        shift = arb(segment.leakage) / arb(segment.capacity) * arb(self.t_d)
        values = [arb(0)] * (self.orders + 1)
        for k in range(self.orders, 0, -1):
            values[k - 1] = gain[k] - shift * values[k]
        return arb_series(values, self.orders + 1) * arb(self.t_d)

    def channels(self, face, resistance: float, storage: float, *, scaled: bool = True) -> dict[str, list[arb]]:
        """Coefficients 0 … orders by channel; scaled: ``c_k (2k)!/t_D^k``."""
        n = self.orders
        with self._settings():
            if face.held:
                pressure, rate, stored = self.columns[1]
            else:
                start = arb_series([arb(face.leak), arb(face.storage) / arb(self.t_d)], n + 1)
                pressure, rate, stored = (a + start * b for a, b in zip(*self.columns, strict=True))
            bottomhole = pressure + arb(resistance) * rate
            injection = rate + bottomhole * arb_series([0, arb(storage) / arb(self.t_d)], n + 1)
            out = {}
            for name, series in zip(CHANNELS, (pressure, rate, bottomhole, injection, stored), strict=True):
                values, factor = [], arb(1)
                for k in range(n + 1 - self.more):
                    if k:
                        factor = factor * (2 * k) * (2 * k - 1) if scaled else factor * arb(self.t_d)
                    value = series[k] * factor
                    assert value == 0 or value.rel_accuracy_bits() > 60, (name, k)
                    values.append(value)
                out[name] = values
            return out


def coefficients(medium, orders: int, *, scaled: bool = True, x: float | None = None, more: int = 16) -> dict[str, list[arb]]:
    """Coefficients 0 … orders of every channel of a medium; with ``x`` those of a path that ends there."""
    return Series(medium, orders, x=x, more=more).channels(medium.face, medium.well_resistance, medium.well.storage, scaled=scaled)


class _capped:
    """flint's precision and the length of its series, put back whatever happens."""

    def __init__(self, bits: int, length: int) -> None:
        self.inner, self.length = precision(bits), length

    def __enter__(self) -> None:
        self.inner.__enter__()
        ctx.cap = self.length

    def __exit__(self, *error) -> None:
        self.inner.__exit__(*error)


def _shifted(values, scale: arb, shift: arb, orders: int) -> arb_series:
    """Σ values[j] (shift + scale σ)^j, to the order wanted; the values fall like 1/(2j)!."""
    if shift == 0:
        out, power = [], arb(1)
        for value in values[: orders + 1]:
            out.append(value * power)
            power *= scale
    else:
        out = list(arb_poly(values)(arb_poly([shift, scale])))[: orders + 1]
    return arb_series(out, orders + 1)


def _terms(segment, t_d: arb, orders: int) -> tuple[int, arb, arb]:
    """How many powers of q², and q² = shift + scale σ [1/m²]."""
    alpha = arb(segment.mobility) / arb(segment.capacity)
    shift = arb(segment.leakage) / arb(segment.mobility)
    return orders + (80 if segment.leakage else 1), 1 / (alpha * t_d), shift


def _uniform(segment, t_d: arb, orders: int):
    """Transfer matrix ((p←p, p←F), (F←p, F←F)) over one zone; and what it stores, where that is had at once."""
    count, scale, shift = _terms(segment, t_d, orders)
    conductance = arb(segment.mobility) * arb(segment.area_factor)
    if segment.power == 0:
        return _hyperbolic(arb(segment.end) - arb(segment.start), count, scale, shift, orders, conductance)
    sign = 1 if segment.direction > 0 else -1
    a, b = (arb(segment.origin) + sign * arb(x) for x in (segment.start, segment.end))
    if segment.power == 2:
        (c, h), (g, _), _ = _hyperbolic(b - a, count, scale, shift, orders, arb(1))  # of u = r p: u, u' along r
        t_a, t_b = sign * conductance * a * a, sign * conductance * b * b

        def end(u, slope):
            u_b, slope_b = c * u + h * slope, g * u + c * slope
            return u_b / b, (slope_b - u_b / b) / b * t_b

        one = arb_series([1], orders + 1)
        (pp, fp), (pf, ff) = end(one * a, one), end(one * 0, one * (a / t_a))
        return (pp, pf), (fp, ff), None

    def solutions(r: arb):
        """I_0 and the logarithmic solution, and r d/dr of each."""
        z, z_0 = scale * r * r / 4, shift * r * r / 4
        bessel, harmonic, total = [arb(1)], [arb(0)], Fraction(0)
        for j in range(1, count + 1):
            total += Fraction(1, j)
            bessel.append(bessel[-1] / (j * j))
            harmonic.append(bessel[-1] * arb(fmpq(total.numerator, total.denominator)))
        i, h = (_shifted(v, z, z_0, orders) for v in (bessel, harmonic))
        di, dh = (_shifted([2 * j * c for j, c in enumerate(v)], z, z_0, orders) for v in (bessel, harmonic))
        log = (r / a).log()
        return i, i * log - h, di, di * log + i - dh

    u1, u2, d1, d2 = solutions(a)
    v1, v2, e1, e2 = solutions(b)
    t = sign * conductance  # F = t r p_r, and r (u1 u2' - u1' u2) = 1
    return (d2 * v1 - d1 * v2, (u1 * v2 - u2 * v1) / t), ((d2 * e1 - d1 * e2) * t, u1 * e2 - u2 * e1), None


def _hyperbolic(d: arb, count: int, scale: arb, shift: arb, orders: int, conductance: arb):
    even, odd = [arb(1)], [arb(1)]
    for j in range(1, count + 1):
        even.append(even[-1] / (2 * j * (2 * j - 1)))
        odd.append(odd[-1] / (2 * j * (2 * j + 1)))
    z, z_0 = scale * d * d, shift * d * d
    c, h = _shifted(even, z, z_0, orders), _shifted(odd, z, z_0, orders)
    return (c, h * (d / conductance)), (h * arb_series([z_0, z], orders + 1) * (conductance / d), c), None


def _split(segment) -> list:
    """A zone of varying rock and growing area in four, each with its own cubic; others as they are."""
    if segment.uniform or not segment.power:
        return [segment]
    out, h = [], 0.25
    for i in range(4):
        u = i * h
        curves = {
            name: (h * (a + u * (2 * b + 3 * c * u)), h * h * (b + 3 * c * u), h**3 * c) if curve else ()
            for name in ("mobility_curve", "capacity_curve")
            for curve in [getattr(segment, name)]
            for a, b, c in [curve or (0.0, 0.0, 0.0)]
        }
        start, end = (segment.start + segment.length * v for v in (u, u + h))
        at = {"mobility": float(segment.mobility_at(start)), "capacity": float(segment.capacity_at(start))}
        out.append(replace(segment, start=start, end=end, **at, **curves))
    return out


def _varying(segment, t_d: arb, orders: int):
    """A zone whose rock varies: φ_k and F_k as power series in u = 0 … 1 along it, from the recurrence.

    In radial and spherical flow it must be so short that 1/r is well inside its circle of convergence (see `_split`).
    """
    n = 2 * orders + 120
    length, area = arb(segment.end) - arb(segment.start), arb(segment.area_factor)
    with _capped(ctx.prec, n):

        def along(value, curve, sign):
            return arb_series([0, *(sign * arb(c) for c in curve)], n).exp() * value

        radius = arb_series([arb(segment.radius(segment.start)), segment.direction * length] if segment.power else [1], n)
        grow = radius * radius if segment.power == 2 else radius
        store = grow * along(length * arb(segment.capacity) * area, segment.capacity_curve, 1) / t_d
        resist = along(length / (arb(segment.mobility) * area), segment.mobility_curve, -1) / grow
        leak = grow * (arb(segment.leakage) * area * length)
        ends = []
        for start in ((arb(1), arb(0)), (arb(0), arb(1))):
            before, ends_p, ends_f, stored = None, [], [], []
            for k in range(orders + 1):
                p_0, f_0 = start if k == 0 else (arb(0), arb(0))
                source = arb_series([0], n) if before is None else store * before
                phi, rate = _solve(source, resist, leak, p_0, f_0, n)
                ends_p.append(sum(list(phi), arb(0)))
                ends_f.append(sum(list(rate), arb(0)))
                stored.append(sum(list((store * phi).integral()), arb(0)) * t_d)
                before = phi
            ends.append(tuple(arb_series(v, orders + 1) for v in (ends_p, ends_f, stored)))
    (pp, fp, sp), (pf, ff, sf) = ends
    return (pp, pf), (fp, ff), (sp, sf)


def _solve(source, resist, leak, p_0: arb, f_0: arb, n: int):
    """F' = source + leak φ, φ' = resist F, by integration; with leakage until nothing is added."""
    phi, rate = _integrated(source, resist, p_0, f_0, n)
    more = phi
    for _ in range(0 if leak[0] == 0 else 12):  # each falls by λ t_D at least
        more, more_rate = _integrated(more * leak, resist, arb(0), arb(0), n)
        phi, rate = phi + more, rate + more_rate
    return phi, rate


def _integrated(source, resist, p_0: arb, f_0: arb, n: int):
    rate = source.integral() + arb_series([f_0], n)
    return (resist * rate).integral() + arb_series([p_0], n), rate

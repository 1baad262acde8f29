"""An independent reference for the tests: plans of a sealed slab in ball arithmetic (python-flint).

Written from the formulas of the method alone, sharing no code with the package: the bump's Taylor series comes from
flint's own ``log`` and ``exp`` of power series, the slab's coefficients from ``cosh`` and ``sinh``, and the step, the eased
corner and its integral from flint's rigorous integration. Every number is a ball that contains the exact value. Floats
that come in (times, durations, properties) are taken as exact.

`path_taylor` gives the coefficients of any chain of linear, radial and spherical zones from transfer matrices of
hyperbolic and modified Bessel functions [CarslawJaeger1959] and Cauchy's integral.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable
from contextlib import contextmanager
from dataclasses import dataclass
from functools import lru_cache, wraps

from flint import acb, acb_mat, arb, arb_series, ctx

BITS = 600  # for up to 100 terms, and 8 more for each further one
INTEGRAL_BITS = 130  # for the integrals, which no large factor multiplies


@contextmanager
def precision(bits: int):
    """flint's working precision and series cap, put back whatever happens."""
    before, cap = ctx.prec, ctx.cap
    ctx.prec = bits
    try:
        yield
    finally:
        ctx.prec, ctx.cap = before, cap


def with_bits(function: Callable) -> Callable:
    """Run ``function`` at `BITS` bits, or more where its whole-number arguments ask for many terms."""

    @wraps(function)
    def wrapped(*args, **kwargs):
        most = max((a for a in (*args, *kwargs.values()) if isinstance(a, int)), default=0)
        with precision(max(BITS, 8 * most - 200)):
            return function(*args, **kwargs)

    return wrapped


def distance(value: float, ball: arb) -> float:
    """Upper end of ``|value - ball|``."""
    with precision(BITS):
        return float(abs(arb(float(value)) - ball).upper())


# --- the bump -----------------------------------------------------------------------------------


@with_bits
def bump_taylor(sigma: arb, gamma: float, count: int) -> list[arb]:
    """``b^(k)(σ)/k!``, k = 0 … count - 1, of the bump of height 1."""
    return _bump_taylor(sigma, gamma, count)


def _bump_taylor(sigma: arb, gamma: float, count: int) -> list[arb]:
    sigma = arb(sigma)
    if not (sigma > 0 and sigma < 1) or (sigma * (1 - sigma)) ** (-arb(gamma)) > 1e5:  # below exp(-9e4): nothing
        return [arb(0)] * count
    ctx.cap = count
    g = arb(gamma)
    q = arb_series([sigma * (1 - sigma), 1 - 2 * sigma, -1], count)
    b = (arb(4) ** g - (-g * q.log()).exp()).exp()
    return [b[k] for k in range(count)]


@with_bits
def bump_derivatives(sigma: arb, gamma: float, orders: int) -> list[arb]:
    """``b^(k)(σ)``, k = 0 … orders."""
    out, factorial = [], arb(1)
    for k, value in enumerate(bump_taylor(sigma, gamma, orders + 1)):
        factorial *= max(k, 1)
        out.append(value * factorial)
    return out


def log_size(ball: arb) -> float:
    """Logarithm of the least size a ball may have; -inf where it may be 0."""
    with precision(53):
        least = abs(ball).lower()
        if not least > 0:
            return -math.inf
        mantissa, exponent = least.man_exp()
        value = math.log(int(mantissa)) + int(exponent) * math.log(2.0)
        return value - 1e-12 * (1.0 + abs(value))  # far above the rounding of this line


def log_bump_suprema(gamma: float, orders: list[int]) -> dict[int, float]:
    """``ln sup |b^(k)|`` for each k in ``orders``, from below: the largest over a grid, its three best places refined."""

    def row(sigma: float, most: int) -> list[float]:
        with precision(480):
            return [log_size(value) + math.lgamma(k + 1.0) for k, value in enumerate(_bump_taylor(arb(sigma), gamma, most + 1))]

    most = max(orders)
    # below this place the bump and its derivatives are too small to matter
    low = 0.25 * (4.0**gamma + 40.0 + 6.0 * most) ** (-1.0 / gamma)
    ratio = (0.5 / low) ** (1.0 / 160.0)
    grid = sorted({*(low * ratio**i for i in range(160)), *(0.25 + 0.0025 * i for i in range(101))})
    table = [row(sigma, most) for sigma in grid]
    out = {}
    for k in orders:
        best = max(values[k] for values in table)
        for i in sorted(range(len(grid)), key=lambda i: -table[i][k])[:2]:
            a, b = grid[max(i - 1, 0)], grid[min(i + 1, len(grid) - 1)]
            for _ in range(2):
                places = [a + (b - a) * j / 8.0 for j in range(9)]
                sizes = [row(sigma, k)[k] for sigma in places]
                j = max(range(9), key=sizes.__getitem__)
                best = max(best, sizes[j])
                a, b = places[max(j - 1, 0)], places[min(j + 1, 8)]
        out[k] = best
    return out


def _moment(gamma: float, upto: arb, power: int) -> arb:
    """``∫_0^upto (upto - z)^power / power! b(z) dz``, 0 < upto ≤ 1."""
    with precision(INTEGRAL_BITS):
        g = acb(arb(gamma))
        height = acb(4) ** g  # the integrator's goal is absolute: give it a bump of height 1
        upto = arb(upto)

        def f(z, analytic):
            return (height - (z * (1 - z)) ** (-g)).exp() * (upto - z) ** power / math.factorial(power)

        # what is left out at each end is below exp(-100) of the bump's height
        lo = arb((4.0**gamma + 100.0) ** (-1.0 / gamma))
        if not upto > lo:
            return arb(0)
        return acb.integral(f, lo, upto if upto < 1 - lo else 1 - lo).real


@lru_cache(maxsize=256)
def _whole_moment(gamma: float, power: int) -> arb:
    return _moment(gamma, arb(1), power)


def bump_integral(gamma: float) -> arb:
    """``I = ∫ b`` over the whole bump of height 1."""
    return _whole_moment(gamma, 0)


def bump_running(gamma: float, sigma: arb, times: int) -> arb:
    """The normalised bump integrated ``times`` times from 0 to σ (1: the step Φ; any σ)."""
    with precision(INTEGRAL_BITS):
        sigma = arb(sigma)
        if not sigma > 0:
            return arb(0)
        total = bump_integral(gamma)
        if sigma < 1:
            return _moment(gamma, sigma, times - 1) / total
        past = sigma - 1  # beyond the end it is a polynomial: Taylor's formula from σ = 1
        ends = [_whole_moment(gamma, n - 1) / total for n in range(1, times + 1)]
        return sum((ends[times - 1 - i] * past**i / math.factorial(i) for i in range(times)), arb(0))


# --- moves --------------------------------------------------------------------------------------


@dataclass(frozen=True)
class Move:
    """One eased ramp: bump width ``easing · duration``, straight ramp for the rest (easing 1: one bump)."""

    start: float
    duration: float
    change: float
    order: float
    easing: float


@with_bits
def move_derivatives(move: Move, t: float, lowest: int, highest: int) -> dict[int, arb]:
    """``y^(k)(t)`` of one move, k = lowest … highest; order -1 is the integral from the start."""
    gamma = 1.0 / (move.order - 1.0)
    elapsed = arb(float(t)) - arb(move.start)
    width = arb(move.easing * move.duration)
    change = arb(move.change)
    lift = 1 if move.easing == 1.0 else 2
    if lift == 1:
        places, outer = [(elapsed / width, 1)], change
    else:
        ramp = arb(move.duration - move.easing * move.duration)
        places, outer = [(elapsed / width, 1), ((elapsed - ramp) / width, -1)], change * width / ramp
    out = {}
    for k in range(lowest, min(lift, highest + 1)):
        total = sum((sign * bump_running(gamma, sigma, lift - k) for sigma, sign in places), arb(0))
        out[k] = outer * total / width**k
    if highest >= lift:
        outer /= bump_integral(gamma)
        tables = [(bump_derivatives(sigma, gamma, highest - lift), sign) for sigma, sign in places]
        for k in range(max(lift, lowest), highest + 1):
            out[k] = outer * sum((sign * table[k - lift] for table, sign in tables), arb(0)) / width**k
    return out


@with_bits
def target_derivatives(moves: list[Move], t: float, lowest: int, highest: int) -> dict[int, arb]:
    """The same for a sum of moves."""
    each = [move_derivatives(m, t, lowest, highest) for m in moves]
    return {k: sum((d[k] for d in each), arb(0)) for k in range(lowest, highest + 1)}


# --- a sealed slab with a well ------------------------------------------------------------------


@dataclass(frozen=True)
class Slab:
    """A sealed linear layer of one zone, and its well.

    ``mobility`` k/μ, ``capacity`` φ c_t, ``resistance`` R and ``storage`` C_w, SI.
    """

    length: float
    area: float
    mobility: float
    capacity: float
    resistance: float = 0.0
    storage: float = 0.0

    @classmethod
    def of(cls, medium) -> Slab:
        """The numbers of a sealed slab of the package."""
        (segment,) = medium.segments
        assert medium.flow == "linear" and medium.face.sealed and not segment.leakage
        return cls(segment.end, segment.area_factor, segment.mobility, segment.capacity, medium.well_resistance, medium.well.storage)

    @with_bits
    def coefficients(self, channel: str, terms: int, x: float | None = None) -> list[arb]:
        """c_0 … c_terms, from the Taylor series of cosh and sinh."""
        length = arb(self.length if x is None else float(x))
        diffusivity = arb(self.mobility) / arb(self.capacity)
        conductance = arb(self.mobility) * arb(self.area)
        pressure, rate = [arb(1)], [arb(0)]
        for k in range(1, terms + 1):
            pressure.append(pressure[-1] * length**2 / (diffusivity * (2 * k) * (2 * k - 1)))
            rate.append(pressure[-1] * conductance * (2 * k) / length if x is None or x else arb(0))
        bottomhole = [p + arb(self.resistance) * f for p, f in zip(pressure, rate, strict=True)]
        injection = [f + (arb(self.storage) * bottomhole[k - 1] if k else 0) for k, f in enumerate(rate)]
        return {
            "target_pressure": [arb(1)] + [arb(0)] * terms,
            "sandface_pressure": pressure,
            "pressure": pressure,
            "sandface_rate": rate,
            "bottomhole_pressure": bottomhole,
            "injection_rate": injection,
            "injected_volume": injection,
        }[channel]

    @with_bits
    def evaluate(
        self, channels: Iterable[str], moves: list[Move], t: float, terms: int, derivative: int = 0, x: float | None = None
    ) -> dict[str, arb]:
        """The channels (pressures: their change), or a time derivative of them, at ``t`` from the terms k = 0 … terms."""
        wanted = {}
        for channel in channels:
            shift = derivative - (channel == "injected_volume")
            c = self.coefficients(channel, terms, x)
            wanted[channel] = {k + shift: c[k] for k in range(terms + 1) if c[k] != 0}
        orders = [n for c in wanted.values() for n in c]
        y = target_derivatives(moves, t, min(orders), max(orders))
        return {channel: sum((value * y[n] for n, value in c.items()), arb(0)) for channel, c in wanted.items()}


# --- coefficients of any path -------------------------------------------------------------------


def _zone(s: acb, segment) -> acb_mat:
    """Transfer matrix of (p, F) over one zone, in the Laplace variable ``s``."""
    q = ((s + acb(segment.leakage) / acb(segment.capacity)) * acb(segment.capacity) / acb(segment.mobility)).sqrt()
    length = arb(segment.end) - arb(segment.start)
    if segment.power == 0:
        trans = acb(segment.mobility) * acb(segment.area_factor)
        c, h = (q * length).cosh(), (q * length).sinh()
        return acb_mat([[c, h / (trans * q)], [trans * q * h, c]])
    sign = 1 if segment.direction > 0 else -1
    r0 = arb(segment.origin) + sign * arb(segment.start)
    r1 = arb(segment.origin) + sign * arb(segment.end)
    t0, t1 = (acb(segment.mobility) * acb(segment.area_factor) * r**segment.power for r in (r0, r1))
    if segment.power == 2:
        c, h = (q * length).cosh(), (q * length).sinh()
        # r p = u, u'' = q² u, u' = ± p + r p_x
        u = acb_mat([[c, h / q], [q * h, c]])
        into = acb_mat([[acb(r0), acb(0)], [acb(sign), r0 / t0]])
        back = acb_mat([[1 / acb(r1), acb(0)], [-sign * t1 / (r1 * r1), t1 / r1]])
        return back * u * into
    i = [[(q * r).bessel_i(n) for n in (0, 1)] for r in (r0, r1)]
    k = [[(q * r).bessel_k(n) for n in (0, 1)] for r in (r0, r1)]
    # p = A I0 + B K0, F = ± T q (A I1 - B K1); the Wronskian I0 K1 + I1 K0 is 1/(q r)
    wronskian = q * r0
    into = acb_mat([[k[0][1] * wronskian, k[0][0] * sign * r0 / t0], [i[0][1] * wronskian, -i[0][0] * sign * r0 / t0]])
    back = acb_mat([[i[1][0], k[1][0]], [sign * t1 * q * i[1][1], -sign * t1 * q * k[1][1]]])
    return back * into


def path_field(medium, s: acb) -> tuple[acb, acb, acb, acb]:
    """(p(L), F(L), p_w, Q) in the Laplace domain, for the flat output 1."""
    face = medium.face
    state = acb_mat([[acb(0)], [acb(1)]]) if face.held else acb_mat([[acb(1)], [acb(face.leak) + acb(face.storage) * s]])
    for segment in medium.segments:
        state = _zone(s, segment) * state
    p, f = state[0, 0], state[1, 0]
    bottomhole = p + acb(medium.well_resistance) * f
    return p, f, bottomhole, f + acb(medium.well.storage) * s * bottomhole


def path_taylor(medium, orders: int, bits: int | None = None, *, scaled: bool = True) -> dict[str, list[arb]]:
    """Taylor coefficients of `path_field`, k = 0 … orders, by channel; scaled: ``c_k (2k)!/t_D^k``.

    Cauchy's integral over a circle by the trapezoidal rule. The field is entire of order 1/2: with the radius
    ``orders²/t_D`` and ``4 orders`` places the aliasing is below 1e-3^orders, far below the rounding of a double.
    """
    n = 4 * max(orders, 12)
    with precision(bits or 300 + 6 * orders):
        t_d = sum(((arb(s.end) - arb(s.start)) * (arb(s.capacity) / arb(s.mobility)).sqrt() for s in medium.segments), arb(0)) ** 2
        radius = arb(max(orders, 12)) ** 2 / t_d
        unit = [acb(arb(2 * i) / n).exp_pi_i() for i in range(n)]
        half = [path_field(medium, acb(radius) * unit[i]) for i in range(n // 2 + 1)]
        names = ("sandface_pressure", "sandface_rate", "bottomhole_pressure", "injection_rate")
        out = {}
        for row, name in enumerate(names):
            values = [h[row] for h in half]
            coefficients, factor = [], arb(1)
            for k in range(orders + 1):
                if k:
                    factor *= (arb(2 * k) * (2 * k - 1) / t_d if scaled else 1) / radius
                total = values[0].real + (values[n // 2] * unit[(k * (n // 2)) % n]).real
                total += 2 * sum(((values[i] * unit[(-k * i) % n]).real for i in range(1, n // 2)), arb(0))
                coefficients.append((total / n * factor).mid())
            out[name] = coefficients
        return out

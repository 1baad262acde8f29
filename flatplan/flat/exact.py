"""Generating functions and channels as exact sympy expressions, to read, check and print.

Parameters are symbols that know their value (`Parameter`): an expression reads as a formula
(``x**6/(720*alpha**3)``), and ``float(expression.subs("x", 70))`` is a number.

| symbol | what | in several zones |
|---|---|---|
| alpha | hydraulic diffusivity k/(φ μ c_t) [m²/s] | alpha_1, alpha_2, … from the target face |
| T | conductance: A k/μ (linear), 2π h k/μ (radial, times r), 4π share k/μ (spherical, times r²) | T_1, … |
| lambda | leakage over storage Λ/S [1/s] | lambda_1, … |
| r_0, r_w | radius of the target face and of the well [m] | r_1, … where zone 1, … ends |
| l_1, … | linear flow: path coordinate at which zone 1, … ends [m] | |
| L | length of the path [m] | |
| kappa, C_f | leak and storage of the target face | |
| R, C_w | well resistance, wellbore storage | |
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
import sympy

from flatplan.flat.exact_terms import Terms
from flatplan.records import one_of
from flatplan.site import Medium

X = sympy.Symbol("x")
T_SYMBOL = sympy.Symbol("t")


class Parameter(sympy.Symbol):
    """A named constant of the medium: prints as its symbol, evaluates to its value.

    Parameters
    ----------
    name : str
        How it is printed.
    value : float
        What it evaluates to, SI.
    """

    def __new__(cls, name: str, value: float) -> Parameter:
        # not through the cache, which would hand one object to every medium with a symbol of this name
        made = sympy.Symbol.__xnew__(cls, name, positive=True)
        made.value = float(value)
        return made

    def _hashable_content(self) -> tuple:
        return (*super()._hashable_content(), self.value)

    def __getnewargs_ex__(self) -> tuple:
        return (self.name, self.value), {}

    def _eval_evalf(self, prec: int) -> sympy.Float:
        return sympy.Float(self.value, precision=prec)

    def _code(self, printer: Any, *args: Any, **kwargs: Any) -> str:
        return repr(self.value)

    # what sympy's code printers look for, so that lambdify works too
    _pythoncode = _numpycode = _scipycode = _lambdacode = _mpmathcode = _code


@dataclass(frozen=True)
class _Zone:
    """Symbols of one segment; start and end are places: x in linear flow, r otherwise."""

    alpha: Parameter
    conductance: Parameter
    leak: sympy.Expr
    power: int
    start: sympy.Expr
    end: sympy.Expr


class _Symbols:
    """Every symbol of a medium, made once."""

    def __init__(self, medium: Medium) -> None:
        self.medium = medium
        first = medium.segments[0]
        self.origin = Parameter("r_0", first.origin) if first.power else sympy.Integer(0)
        self.direction = int(first.direction) if first.power else 1
        self.length = Parameter("L", medium.length)
        # path coordinate of the sandface; in terms of the well's radius where flow is not linear
        self.sandface: sympy.Expr = self.length
        if first.power:
            well = Parameter("r_w", float(medium.segments[-1].radius(medium.length)))
            self.sandface = self.direction * (well - self.origin)
        many = len(medium.segments) > 1
        self.zones = []
        start: sympy.Expr = self.origin
        for i, s in enumerate(medium.segments, 1):
            tag = f"_{i}" if many else ""
            if i == len(medium.segments):
                end = self.place(self.length)
            else:
                end = Parameter(f"r_{i}", float(s.radius(s.end))) if s.power else Parameter(f"l_{i}", s.end)
            leak = Parameter(f"lambda{tag}", s.leakage / s.capacity) if s.leakage else sympy.Integer(0)
            conductance = s.mobility * s.area_factor
            self.zones.append(_Zone(Parameter(f"alpha{tag}", s.diffusivity), Parameter(f"T{tag}", conductance), leak, s.power, start, end))
            start = end
        face = medium.face
        self.kappa = Parameter("kappa", face.leak) if face.leak else sympy.Integer(0)
        self.store = Parameter("C_f", face.storage) if face.storage else sympy.Integer(0)
        self.resistance = Parameter("R", medium.well_resistance) if medium.well_resistance else sympy.Integer(0)
        self.wellbore = Parameter("C_w", medium.well.storage) if medium.well.storage else sympy.Integer(0)

    def place(self, x: sympy.Expr) -> sympy.Expr:
        """Radius at path coordinate ``x`` (linear flow: x itself)."""
        return self.origin + self.direction * x

    def log(self, place: sympy.Expr) -> sympy.Expr:
        """ln(r/r_0) at a place; not asked for in linear flow."""
        return sympy.log(place / self.origin) if self.origin != 0 else sympy.Integer(0)


def generating_function(medium: Medium, k: int, kind: str = "pressure") -> sympy.Expr:
    """``φ_k(x)`` (kind "pressure") or ``F_k(x)`` (kind "rate"), exact; a Piecewise where there are several zones.

    Without leakage by exact integration of the recurrence. With it, as the k-th Taylor coefficient in s of the
    Laplace-domain field (cosh and sinh, modified Bessel functions, sinh z/z) taken at s + λ
    [CarslawJaeger1959]_.
    """
    if isinstance(k, bool) or not isinstance(k, (int, np.integer)) or k < 0:
        raise ValueError(f"k: got {k!r}; it takes a whole number, 0 or more.")
    one_of(kind, ("pressure", "rate"), "kind")
    pieces = _pieces(medium, int(k), kind)
    if len(pieces) == 1:
        return pieces[0][0]
    # where a zone ends is put in as a number, so that the right piece is chosen as soon as x is one
    conditions = [sympy.Float(segment.end) >= X for segment in medium.segments[:-1]] + [sympy.true]
    return sympy.Piecewise(*((expression, condition) for (expression, _), condition in zip(pieces, conditions, strict=True)))


def at_sandface(medium: Medium, k: int, kind: str) -> sympy.Expr:
    """``φ_k(L)`` or ``F_k(L)``."""
    symbols = _symbols(medium)
    return _pieces(medium, k, kind)[-1][0].subs(X, symbols.sandface)


def series(medium: Medium, channel: str, terms: int, *, numbers: bool = False) -> sympy.Expr:
    """A channel as ``Σ c_k y^(k)(t)``, to the derivative ``terms``.

    Parameters
    ----------
    medium : Medium
    channel : str
        "target_pressure", "sandface_pressure", "sandface_rate", "bottomhole_pressure" or "injection_rate".
    terms : int
        Highest derivative.
    numbers : bool
        Put in the values of the parameters.

    Returns
    -------
    sympy.Expr
        In ``y(t)`` and its derivatives; pressures as the change from the start.

    Raises
    ------
    ValueError
        Unknown channel, terms not a whole number from 0.
    """
    one_of(channel, ("target_pressure", "sandface_pressure", "sandface_rate", "bottomhole_pressure", "injection_rate"), "channel")
    if isinstance(terms, bool) or not isinstance(terms, (int, np.integer)) or terms < 0:
        raise ValueError(f"terms: got {terms!r}; it takes a whole number, 0 or more.")
    symbols = _symbols(medium)
    y = sympy.Function("y")(T_SYMBOL)

    def bottomhole(k: int) -> sympy.Expr:
        return at_sandface(medium, k, "pressure") + symbols.resistance * at_sandface(medium, k, "rate")

    def coefficient(k: int) -> sympy.Expr:
        if channel == "target_pressure":
            return sympy.Integer(1 if k == 0 else 0)
        if channel == "sandface_pressure":
            return at_sandface(medium, k, "pressure")
        if channel == "sandface_rate":
            return at_sandface(medium, k, "rate")
        if channel == "bottomhole_pressure":
            return bottomhole(k)
        extra = symbols.wellbore * bottomhole(k - 1) if k and symbols.wellbore else sympy.Integer(0)
        return at_sandface(medium, k, "rate") + extra

    total = sympy.Integer(0)
    for k in range(int(terms) + 1):
        value = coefficient(k)
        total += (value.evalf(17) if numbers else value) * (sympy.Derivative(y, (T_SYMBOL, k)) if k else y)
    return total


def _symbols(medium: Medium) -> _Symbols:
    if not medium.uniform:
        raise ValueError("generating_function: a rock that varies along the path has no closed form; use coefficients() for numbers.")
    if "exact symbols" not in medium.memory:
        medium.memory["exact symbols"] = _Symbols(medium)
    return medium.memory["exact symbols"]


def _pieces(medium: Medium, k: int, kind: str) -> list[tuple[sympy.Expr, Any]]:
    """The expression in ``x`` for each zone; made once per order."""
    memory = medium.memory.setdefault("exact pieces", {})
    if (k, kind) not in memory:
        symbols = _symbols(medium)
        if any(zone.leak != 0 for zone in symbols.zones):
            memory[k, kind] = _by_laplace(symbols, k, kind)
        else:
            rates, pressures = _by_integration(symbols, k)
            chosen = pressures if kind == "pressure" else rates
            memory[k, kind] = [(terms.expression(symbols.place(X), symbols.log(symbols.place(X))), None) for terms in chosen]
    return memory[k, kind]


def _by_integration(symbols: _Symbols, k: int) -> tuple[list[Terms], list[Terms]]:
    """F_k and φ_k of every zone from those of k - 1 by the recurrence of the method."""
    memory = symbols.medium.memory.setdefault("exact terms", {})
    if k in memory:
        return memory[k]
    before = _by_integration(symbols, k - 1)[1] if k else None
    level, rate = _at_face(symbols, k)
    rates, pressures = [], []
    for i, zone in enumerate(symbols.zones):
        f, phi = _integrated(symbols, zone, before[i] if before else None, level, rate)
        rates.append(f)
        pressures.append(phi)
        end_log = symbols.log(zone.end)
        rate, level = f.expression(zone.end, end_log), phi.expression(zone.end, end_log)
    memory[k] = rates, pressures
    return memory[k]


def _at_face(symbols: _Symbols, k: int) -> tuple[sympy.Expr, sympy.Expr]:
    """(φ_k, F_k) at the target face."""
    zero, one = sympy.Integer(0), sympy.Integer(1)
    if symbols.medium.face.held:
        return zero, one if k == 0 else zero
    return one if k == 0 else zero, {0: symbols.kappa, 1: symbols.store}.get(k, zero)


def _integrated(symbols: _Symbols, zone: _Zone, before: Terms | None, level: sympy.Expr, rate: sympy.Expr) -> tuple[Terms, Terms]:
    """F_k and φ_k in a zone without leakage from φ_(k-1) and the values at its start."""
    place, log = zone.start, symbols.log(zone.start)
    # F' = S φ_(k-1) along x; along r the derivative carries the direction
    source = before.times(symbols.direction * zone.conductance / zone.alpha, zone.power) if before else Terms()
    f = source.from_place(place, log, rate)
    return f, f.times(symbols.direction / zone.conductance, -zone.power).from_place(place, log, level)


def _by_laplace(symbols: _Symbols, k: int, kind: str) -> list[tuple[sympy.Expr, Any]]:
    """The k-th Taylor coefficient in s of the Laplace-domain field, zone by zone.

    Each zone has its own transfer matrix ``Σ M_j s^j``; the field is their product order by order, so that a zone without
    leakage, whose closed form has a removable singularity at s = 0, brings its polynomials instead of limits.
    """
    row = 0 if kind == "pressure" else 1
    states = [_at_face(symbols, j) for j in range(k + 1)]
    out = []
    for i in range(len(symbols.zones)):
        inside = [_transfer(symbols, i, j)[0] for j in range(k + 1)]
        across = [_transfer(symbols, i, j)[1] for j in range(k + 1)]
        out.append((_product(inside, states, k)[row], None))
        states = [_product(across, states, j) for j in range(k + 1)]
    return out


def _product(matrices: list, states: list, k: int) -> tuple[sympy.Expr, sympy.Expr]:
    """Order k of ``Σ M_j s^j`` times ``Σ (φ_j, F_j) s^j``."""
    pairs = [(matrices[j], states[k - j]) for j in range(k + 1)]
    return tuple(sympy.Add(*(m[row][0] * level + m[row][1] * rate for m, (level, rate) in pairs)) for row in (0, 1))


def _transfer(symbols: _Symbols, i: int, j: int) -> tuple[tuple, tuple]:
    """M_j of zone i, from its start to the place ``x`` and to its end."""
    memory = symbols.medium.memory.setdefault("exact transfer", {})
    if (i, j) in memory:
        return memory[i, j]
    zone = symbols.zones[i]
    places = symbols.place(X), zone.end
    if zone.leak != 0:
        s = sympy.Symbol("s_", nonnegative=True)
        q = sympy.sqrt((s + zone.leak) / zone.alpha)
        memory[i, j] = tuple(
            tuple(tuple((sympy.diff(entry, s, j) / math.factorial(j)).subs(s, 0) for entry in row) for row in matrix)
            for matrix in (_zone_fields(symbols, zone, q, place) for place in places)
        )
        return memory[i, j]
    columns = symbols.medium.memory.setdefault("exact columns", {})
    zero, one = sympy.Integer(0), sympy.Integer(int(j == 0))
    if j:
        _transfer(symbols, i, j - 1)
    before = columns[i, j - 1] if j else ((None, None), (None, None))
    by_level = _integrated(symbols, zone, before[0][1], one, zero)
    by_rate = _integrated(symbols, zone, before[1][1], zero, one)
    columns[i, j] = by_level, by_rate
    memory[i, j] = tuple(
        tuple(tuple(column[kind].expression(place, symbols.log(place)) for column in (by_level, by_rate)) for kind in (1, 0))
        for place in places
    )
    return memory[i, j]


def _zone_fields(symbols: _Symbols, zone: _Zone, q: sympy.Expr, r: sympy.Expr) -> tuple:
    """2×2 transfer matrix of (p, T p_x) from the start of the zone to the place ``r``."""
    a = zone.start
    if zone.power == 0:
        d = r - a
        t_q = zone.conductance * q
        return (sympy.cosh(q * d), sympy.sinh(q * d) / t_q), (t_q * sympy.sinh(q * d), sympy.cosh(q * d))
    sign = symbols.direction
    if zone.power == 2:
        d = r - a
        c, h = sympy.cosh(q * d), sympy.sinh(q * d)
        # p = u/r with u'' = q² u; (p, r² p_r) from a to r
        p_p = (a * c + h / q) / r
        p_f = h / (q * a * r)
        f_p = r * (a * q * h + c) - (a * c + h / q)
        f_f = r * c / a - h / (q * a)
    else:
        i0, i1, k0, k1 = (
            (lambda z: sympy.besseli(0, z)),
            (lambda z: sympy.besseli(1, z)),
            (lambda z: sympy.besselk(0, z)),
            (lambda z: sympy.besselk(1, z)),
        )
        p_p = q * a * (k1(q * a) * i0(q * r) + i1(q * a) * k0(q * r))
        p_f = k0(q * a) * i0(q * r) - i0(q * a) * k0(q * r)
        f_p = q * r * q * a * (k1(q * a) * i1(q * r) - i1(q * a) * k1(q * r))
        f_f = q * r * (k0(q * a) * i1(q * r) + i0(q * a) * k1(q * r))
    scale = sign * zone.conductance
    return (p_p, p_f / scale), (f_p * scale, f_f)

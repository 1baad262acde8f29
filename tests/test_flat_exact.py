"""Exact generating functions of every uniform medium: the recurrence they solve, the joins, the values, what can be done with them.

Slab, radial and spherical paths by exact integration; with leakage cosh, sinh and modified Bessel functions [CarslawJaeger1959].
"""

from __future__ import annotations

import media
import mpmath
import numpy as np
import pytest
import series_reference as series
import sympy

import flatplan as fp

X = sympy.Symbol("x")
TIGHT = [name for name in media.GEOMETRIES if name != "varying rock"]
LEAKING = ["slab", "radial inward", "radial outward", "spherical"]
PLACES = {"first": 0.03, "middle": 0.55, "last": 0.98}


def two_zones(flow, leakages=(0.0, 0.0), **rest):
    if flow == "linear":
        ends = [{"length": 40.0, "area": 5000.0}, {"length": 30.0, "area": 3500.0}]
    else:
        ends, rest = [{"to_radius": 40.0}, {"to_radius": 2.0}], {"target_radius": 90.0, **rest}
        if flow == "radial":
            rest["height"] = 20.0
    rocks = (media.ROCK, media.TIGHT)
    zones = [fp.Zone(rock=r, fluid=media.WATER, leakage=k, **e) for r, k, e in zip(rocks, leakages, ends, strict=True)]
    return fp.zoned(zones, flow=flow, **rest)


def pieces(expression):
    return [e for e, _ in expression.args] if isinstance(expression, sympy.Piecewise) else [expression]


def symbols_of(expressions):
    return {s.name: s for e in expressions for s in e.free_symbols if s.name != "x"}


def number(expression, x):
    """Its value at ``x`` in 80 digits, the parameters taken as exact."""
    exact = expression.xreplace({s: sympy.Rational(s.value) for s in expression.free_symbols if s.name != "x"})
    with mpmath.workdps(80):
        return mpmath.mpf(sympy.lambdify(X, exact, "mpmath")(mpmath.mpf(x)))


def zero(terms, radius):
    """Whether their sum is 0: as powers of r and its logarithm, or for Bessel and hyperbolic functions at a place in 40 digits."""
    total = sympy.Add(*terms)
    if total.has(sympy.besseli, sympy.besselk, sympy.sinh, sympy.cosh):
        return abs(number(total, 1.7)) <= 1e-40 * max(abs(number(term, 1.7)) for term in terms)
    r = sympy.Symbol("r", positive=True)
    in_r = total.subs(X, sympy.solve(radius - r, X)[0]) if radius != X else total
    return sympy.expand(sympy.expand_log(sympy.expand(in_r))) == 0


def assert_recurrence(medium, most):
    """F_k' = S φ_(k-1) + Λ φ_k and φ_k' = F_k/T in each zone; the conditions at the face; nothing jumps at a join."""
    phis = [medium.generating_function(k) for k in range(most + 1)]
    rates = [medium.generating_function(k, "rate") for k in range(most + 1)]
    named = symbols_of([*phis, *rates])
    count = len(medium.segments)
    if count > 1:
        assert all(isinstance(e, sympy.Piecewise) and len(e.args) == count for e in (*phis[1:], *rates[1:]))
    direction = int(medium.segments[0].direction) if medium.segments[0].power else 1
    radius = named.get("r_0", sympy.Integer(0)) + direction * X
    for i, segment in enumerate(medium.segments):
        tag = f"_{i + 1}" if count > 1 else ""
        radius = radius if segment.power else X
        area = radius**segment.power
        trans, alpha = named[f"T{tag}"], named[f"alpha{tag}"]
        lam = named[f"lambda{tag}"] if segment.leakage else sympy.Integer(0)
        for k in range(most + 1):
            phi, rate = pieces(phis[k])[min(i, len(pieces(phis[k])) - 1)], pieces(rates[k])[min(i, len(pieces(rates[k])) - 1)]
            before = pieces(phis[k - 1])[min(i, len(pieces(phis[k - 1])) - 1)] if k else sympy.Integer(0)
            assert zero((sympy.diff(rate, X), -area * trans / alpha * before, -area * trans / alpha * lam * phi), radius), (i, k)
            assert zero((sympy.diff(phi, X), -rate / (trans * area)), radius), (i, k)
    held = medium.face.held
    kappa, store = named.get("kappa", 0), named.get("C_f", 0)
    for k in range(most + 1):
        wanted = (0, int(k == 0)) if held else (int(k == 0), {0: kappa, 1: store}.get(k, 0))
        for expression, value in zip((phis[k], rates[k]), wanted, strict=True):
            assert abs(number(pieces(expression)[0] - value, 0.0)) <= 1e-30 * (value.value if isinstance(value, sympy.Symbol) else 1), k
    for i, segment in enumerate(medium.segments[:-1]):
        for expression in (*phis[1:], *rates[1:]):
            left, right = (number(p, segment.end) for p in pieces(expression)[i : i + 2])
            # the join is a float radius, its symbol another one with the same value: what is left is their rounding
            assert abs(left / right - 1) < 1e-13, i


@pytest.mark.parametrize("face", ["sealed", "leaky and storing", "held"])
def test_two_zones_solve_the_recurrence(face):
    assert_recurrence(two_zones("linear", face=media.FACES[face]), 2)


@pytest.mark.parametrize("geometry", ["radial outward", "spherical"])
@pytest.mark.parametrize("face", ["sealed", "leaky and storing", "held"])
def test_round_paths_solve_the_recurrence(geometry, face):
    assert_recurrence(media.medium(geometry, face), 2)


def test_a_leaky_slab_solves_the_recurrence():
    assert_recurrence(media.medium("slab", leakage="leaking"), 1)


def test_two_zones_of_which_one_leaks_solve_the_recurrence():
    assert_recurrence(two_zones("linear", (2e-15, 0.0)), 1)


def assert_values(medium, most):
    for k in range(most + 1):
        phi, rate = medium.generating_function(k), medium.generating_function(k, "rate")
        for place in PLACES.values():
            x = place * medium.length
            exact = series.coefficients(medium, most, scaled=False, x=x)
            for expression, name in ((phi, "sandface_pressure"), (rate, "sandface_rate")):
                value = float(number(expression, x))
                assert value == pytest.approx(float(exact[name][k]), rel=1e-12, abs=0.0), (k, x)
            got = medium.coefficients("pressure", most, x=x)[k]
            value = float(number(phi, x))
            whole = medium.coefficients("sandface_pressure", most)[k]
            assert got == pytest.approx(value, rel=1e-12, abs=1e-16 * whole), (k, x)


@pytest.mark.parametrize("geometry", TIGHT)
@pytest.mark.parametrize("face", ["leaky and storing", "held"])
def test_values_are_the_coefficients(geometry, face):
    assert_values(media.medium(geometry, face), 1 if geometry.startswith("zoned") else 2)


@pytest.mark.parametrize("geometry", LEAKING)
def test_values_are_the_coefficients_with_leakage(geometry):
    assert_values(media.medium(geometry, "leaky and storing", leakage="leaking"), 1)


@pytest.mark.parametrize("flow", ["linear", "spherical"])
@pytest.mark.parametrize("leakages", [(2e-15, 1e-15), (2e-15, 0.0), (0.0, 2e-15)])
def test_values_are_the_coefficients_in_two_zones_that_leak(flow, leakages):
    assert_values(two_zones(flow, leakages), 1)


@pytest.mark.parametrize(("geometry", "leakage"), [*((g, "tight") for g in TIGHT), ("slab", "leaking"), ("radial inward", "leaking")])
def test_a_channel_as_a_series(geometry, leakage):
    """Coefficients of y, y', y'' with numbers put in; LaTeX of the formula with symbols."""
    medium = media.medium(geometry, "leaky and storing", "skin and storage", leakage)
    terms = 2 if leakage == "tight" and not geometry.startswith("zoned") else 1
    t = sympy.Symbol("t")
    y = sympy.Function("y")(t)
    for channel in ("target_pressure", "sandface_pressure", "sandface_rate", "bottomhole_pressure", "injection_rate"):
        made = medium.series(channel, terms, numbers=True)
        expected = medium.coefficients(channel, terms)
        for k in range(terms + 1):
            got = made.coeff(sympy.Derivative(y, (t, k)) if k else y)
            assert not got.free_symbols
            assert float(got) == pytest.approx(expected[k], rel=1e-12, abs=0.0), (channel, k)
    words = sympy.latex(medium.series("injection_rate", 1))
    assert "frac{d}{d t} y" in words and "C_{w}" in words
    assert sympy.latex(medium.generating_function(1))


@pytest.mark.parametrize("geometry", ["slab", "radial outward", "spherical", "zoned radial", "zoned linear"])
def test_an_expression_becomes_a_function_of_arrays(geometry):
    medium = media.medium(geometry, "leaky")
    x = np.array(list(PLACES.values())) * medium.length
    got = sympy.lambdify(X, medium.generating_function(1), "numpy")(x)
    expected = [medium.coefficients("pressure", 1, x=float(v))[1] for v in x]
    # double precision of the formula itself: near the face its terms cancel
    np.testing.assert_allclose(got, expected, rtol=1e-9, atol=1e-12 * max(expected))


def test_parameters_print_as_their_names_and_know_their_values():
    medium = media.medium("spherical")
    named = symbols_of([medium.generating_function(1)])
    (segment,) = medium.segments
    assert float(named["alpha"]) == pytest.approx(segment.mobility / segment.capacity, rel=1e-14)
    assert float(named["r_0"]) == 90.0
    assert "alpha" in str(medium.generating_function(1))


def test_the_slab_is_known_by_heart():
    medium = media.medium("slab")
    phi = medium.generating_function(3)
    alpha = symbols_of([phi])["alpha"]
    assert sympy.simplify(phi - X**6 / (720 * alpha**3)) == 0


def test_a_rock_that_varies_has_no_closed_form():
    made = media.medium("varying rock")
    sentence = "^generating_function: a rock that varies along the path has no closed form; use coefficients\\(\\) for numbers.$"
    for ask in (lambda: made.generating_function(1), lambda: made.series("injection_rate", 1)):
        with pytest.raises(ValueError, match=sentence):
            ask()


@pytest.mark.parametrize("value", [-1, 1.0, True, "2", None])
def test_what_is_no_whole_number_is_refused(value):
    made = media.medium("radial inward")
    with pytest.raises(ValueError, match=f"^k: got {value!r}; it takes a whole number, 0 or more.$"):
        made.generating_function(value)
    with pytest.raises(ValueError, match=f"^terms: got {value!r}; it takes a whole number, 0 or more.$"):
        made.series("injection_rate", value)


def test_an_unknown_kind_or_channel_is_refused():
    made = media.medium("radial inward")
    with pytest.raises(ValueError, match="^kind: got 'flow'; it takes one of 'pressure', 'rate'"):
        made.generating_function(1, "flow")
    with pytest.raises(ValueError, match="^channel: got 'pressure'; .*'injection_rate'"):
        made.series("pressure", 1)

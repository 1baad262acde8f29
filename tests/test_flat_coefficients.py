"""Channel coefficients and generating functions of any medium, and the proven bounds on them.

Outside references: Taylor coefficients of Laplace-domain fields made of cosh, sinh and modified Bessel functions
[CarslawJaeger1959], by Cauchy's integral in ball arithmetic (`ball_reference.path_taylor`) or by mpmath's binomial
re-expansion; heat polynomials [RosenbloomWidder1959].
"""

from __future__ import annotations

import math

import ball_reference as balls
import mpmath
import numpy as np
import pytest
import sympy
from hypothesis import given, settings
from hypothesis import strategies as st

import flatplan as fp
from flatplan.flat.coefficient_bounds import admittance_variation, scaled_bounds
from flatplan.flat.generating import scaled_coefficients, steady_state
from flatplan.site.medium import Medium
from flatplan.site.segment import Segment

CHANNELS = ("sandface_pressure", "sandface_rate", "bottomhole_pressure", "injection_rate")
FACES = {
    "sealed": fp.Face(),
    "leaky": fp.Face(leak=3e-10),
    "storing": fp.Face(storage=4e-6),
    "leaky and storing": fp.Face(leak=5e-11, storage=2e-5),
    "held": fp.Face(held=True),
}
WELLS = {"open": fp.Well(), "stored": fp.Well(storage=2e-7, resistance=3e8)}


def slab(rock, fluid, **rest):
    return fp.slab(length="140 m", area="6000 m^2", rock=rock, fluid=fluid, **rest)


def path(power, cuts, mobility, capacity=None, leakage=None, *, inner=0.1, outer=1000.0, outward=True, factor=100.0, **rest):
    """A hand-built chain of zones: ``cuts`` are the shares of the path at which zones end, the last one 1."""
    length = (outer - inner) if power else outer
    origin = (inner if outward else outer) if power else 0.0
    ends = [0.0, *(c * length for c in cuts)]
    n = len(cuts)
    capacity = capacity or [1e-10] * n
    leakage = leakage or [0.0] * n
    segments = tuple(
        Segment(a, b, m, c, factor, leak, power, origin, 1.0 if outward else -1.0)
        for a, b, m, c, leak in zip(ends[:-1], ends[1:], mobility, capacity, leakage, strict=True)
    )
    return Medium(("linear", "radial", "spherical")[power], segments, **rest)


HAND_BUILT = {
    "radial outward, ratio 1e4": path(1, [1.0], [8e-11]),
    "radial inward, ratio 1e4": path(1, [1.0], [8e-11], outward=False),
    "radial, thin ring": path(1, [1.0], [8e-11], inner=400.0, outer=500.0, outward=False),
    "spherical outward": path(2, [1.0], [2e-11], inner=0.5, outer=80.0),
    "spherical inward": path(2, [1.0], [2e-11], inner=0.5, outer=300.0, outward=False),
    "two linear zones, contrast 1000": path(0, [0.3, 1.0], [1e-12, 1e-9], [2e-10, 1e-10], outer=100.0),
    "three linear zones, leaking": path(0, [0.2, 0.5, 1.0], [1e-10, 3e-12, 4e-10], [1e-10, 3e-10, 1e-10], [2e-16, 0.0, 1e-15], outer=90.0),
    "three radial zones inward": path(
        1, [0.6, 0.99, 1.0], [8e-11, 8e-9, 8e-12], [1e-10, 1e-10, 3e-10], [0.0, 1e-16, 0.0], outer=500.0, outward=False
    ),
    "three radial zones outward": path(1, [0.001, 0.3, 1.0], [8e-12, 8e-9, 8e-11], [3e-10, 1e-10, 1e-10], outer=700.0),
    "two spherical zones": path(2, [0.4, 1.0], [2e-11, 6e-13], [1e-10, 3e-10], [1e-17, 0.0], inner=1.0, outer=120.0, outward=False),
}
FACED = {
    "radial with everything": path(
        1,
        [0.5, 1.0],
        [8e-11, 8e-10],
        outward=False,
        outer=300.0,
        face=fp.Face(leak=2e-10, storage=3e-6),
        well=fp.Well(storage=1e-6),
        well_resistance=2e8,
    ),
    "held radial": path(1, [1.0], [8e-11], outer=300.0, face=fp.Face(held=True), well=fp.Well(storage=1e-6), well_resistance=2e8),
    "held spherical, leaking": path(2, [1.0], [2e-11], [1e-10], [3e-16], inner=2.0, outer=60.0, outward=False, face=fp.Face(held=True)),
}


def relative(got, exact):
    """Largest relative error; where the exact value is 0 to rounding, the value itself must be."""
    exact = np.array([float(v) for v in exact])
    tiny = np.abs(exact) < 1e-40 * np.max(np.abs(exact))
    assert np.all(np.abs(got[tiny]) < 1e-40 * np.max(np.abs(exact)))
    return float(np.max(np.abs(got[~tiny] / exact[~tiny] - 1.0)))


# --- values ------------------------------------------------------------------------------------


@pytest.mark.parametrize("leakage", (0.0, 3e-15))
@pytest.mark.parametrize(
    ("face", "well"),
    [
        ("sealed", "open"),
        ("sealed", "stored"),
        ("leaky", "stored"),
        ("storing", "open"),
        ("leaky and storing", "stored"),
        ("held", "stored"),
    ],
)
def test_slab_coefficients_to_order_150_are_those_of_cosh_and_sinh(rock, fluid, face, well, leakage):
    """p(L; s) = cosh qL + (κ + C_f s) sinh(qL)/(T q), q = sqrt((s + λ)/α), re-expanded by mpmath in 60 digits."""
    medium = slab(rock, fluid, face=FACES[face], well=WELLS[well], leakage=leakage)
    (segment,) = medium.segments
    n = 150
    with mpmath.workdps(60):
        alpha = mpmath.mpf(segment.mobility) / mpmath.mpf(segment.capacity)
        lam, length = mpmath.mpf(segment.leakage) / mpmath.mpf(segment.capacity), mpmath.mpf(segment.end)
        trans = mpmath.mpf(segment.mobility) * mpmath.mpf(segment.area_factor)

        def shifted(at_zero):
            """Coefficients in s of Σ a_j (s + λ)^j."""
            if lam == 0:
                return [at_zero(k) for k in range(n + 1)]
            return [mpmath.fsum(mpmath.binomial(j, k) * lam ** (j - k) * at_zero(j) for j in range(k, k + 18)) for k in range(n + 1)]

        cosh = shifted(lambda k: length ** (2 * k) / alpha**k / mpmath.factorial(2 * k))
        sinh = shifted(lambda k: length ** (2 * k + 1) / alpha**k / mpmath.factorial(2 * k + 1) / trans)
        q_sinh = shifted(lambda k: trans * length ** (2 * k - 1) / alpha**k / mpmath.factorial(2 * k - 1) if k else mpmath.mpf(0))
        if medium.face.held:
            pressure, rate = sinh, cosh
        else:
            kappa, store = mpmath.mpf(medium.face.leak), mpmath.mpf(medium.face.storage)
            pressure = [c + kappa * h + (store * sinh[k - 1] if k else 0) for k, (c, h) in enumerate(zip(cosh, sinh, strict=True))]
            rate = [c + kappa * h + (store * cosh[k - 1] if k else 0) for k, (c, h) in enumerate(zip(q_sinh, cosh, strict=True))]
        resistance, storage = mpmath.mpf(medium.well_resistance), mpmath.mpf(medium.well.storage)
        bottomhole = [p + resistance * f for p, f in zip(pressure, rate, strict=True)]
        injection = [f + (storage * bottomhole[k - 1] if k else 0) for k, f in enumerate(rate)]
        t_d = length**2 / alpha
        scale = [mpmath.factorial(2 * k) / t_d**k for k in range(n + 1)]
        for channel, exact in zip(CHANNELS, (pressure, rate, bottomhole, injection), strict=True):
            assert relative(scaled_coefficients(medium, channel, n), [c * f for c, f in zip(exact, scale, strict=True)]) <= 1e-12, channel
            plain = medium.coefficients(channel, 20)
            assert relative(plain, exact[:21]) <= 1e-12, channel


@pytest.mark.parametrize("name", [*HAND_BUILT, *FACED])
def test_coefficients_of_hand_built_paths_are_those_of_bessel_and_hyperbolic_functions(name):
    medium = {**HAND_BUILT, **FACED}[name]
    exact = balls.path_taylor(medium, 36, bits=1500 if "thin" in name else None)  # I and K nearly cancel there
    for channel in CHANNELS:
        assert relative(scaled_coefficients(medium, channel, 36), exact[channel]) <= 1e-12, channel


def test_spherical_path_to_order_100_against_sinh():
    medium = HAND_BUILT["spherical outward"]
    exact = balls.path_taylor(medium, 100)
    for channel in CHANNELS:
        assert relative(scaled_coefficients(medium, channel, 100), exact[channel]) <= 1e-12, channel


@pytest.mark.parametrize("leakage", (0.0, 3e-15))
def test_pressure_inside_the_slab(rock, fluid, leakage):
    """A shorter slab of the same rock has its sandface where the longer one has a place x."""
    medium = slab(rock, fluid, leakage=leakage)
    for x in (0.0, 0.3, 17.0, 70.0, 139.9, 140.0):
        got = medium.coefficients("pressure", 30, x=x)
        if x == 0.0:
            whole = medium.coefficients("sandface_pressure", 30)
            assert got[0] == pytest.approx(1.0, rel=1e-14) and np.all(np.abs(got[1:]) < 1e-14 * whole[1:])
            continue
        short = fp.slab(length=x, area="6000 m^2", rock=rock, fluid=fluid, leakage=leakage)
        exact, whole = short.coefficients("sandface_pressure", 30), medium.coefficients("sandface_pressure", 30)
        assert np.all(np.abs(got - exact) <= 1e-12 * np.maximum(exact, 1e-12 * whole))


TIGHT = {
    name: medium for name, medium in {**HAND_BUILT, **FACED}.items() if not any(s.leakage for s in medium.segments) and not medium.face.held
}


@pytest.mark.parametrize("name", TIGHT)
def test_what_is_stored_is_what_came_in_less_what_leaked(name):
    """∫S φ_(k-1) = F_k(L) - F_k(0) where the path itself does not leak: the divergence theorem."""
    medium = TIGHT[name]
    stored = medium.coefficients("stored_volume", 12)
    through = medium.coefficients("sandface_rate", 13)
    at_face = np.zeros(14)
    at_face[:2] = medium.face.leak, medium.face.storage
    assert stored == pytest.approx((through - at_face)[1:], rel=1e-11)
    volume = sum(s.volume * s.capacity for s in medium.segments)
    if not medium.face.leak:
        assert stored[0] == pytest.approx(volume, rel=1e-12)


def test_steady_state_of_a_sealed_medium_stores_its_whole_volume(rock, fluid):
    medium = slab(rock, fluid, well=fp.Well(storage=2e-7, resistance=3e8))
    steady = steady_state(medium)
    (segment,) = medium.segments
    assert steady.injection_rate == 0.0 and steady.bottomhole_pressure == 1.0
    assert steady.stored_volume == pytest.approx(segment.volume * segment.capacity + 2e-7, rel=1e-13)


def test_the_quasi_steady_field_of_a_constant_flux(rock, fluid):
    """Constant flux into an insulated slab [CarslawJaeger1959], section 3.8: v K/(F l) = τ + (3ξ² - 1)/6 for large τ.

    The pressure at the far face then grows at the rate F/(S l), and the heated face is F l/(2K) ahead of it.
    """
    medium = slab(rock, fluid)
    (segment,) = medium.segments
    capacity, trans = segment.capacity * segment.area_factor, segment.mobility * segment.area_factor
    assert medium.coefficients("sandface_rate", 1)[1] == pytest.approx(capacity * segment.length, rel=1e-13)
    ahead = medium.coefficients("sandface_pressure", 1)[1] / medium.coefficients("sandface_rate", 1)[1]
    assert ahead == pytest.approx(segment.length / (2.0 * trans), rel=1e-13)
    middle = medium.coefficients("pressure", 1, x=70.0)[1] / medium.coefficients("sandface_rate", 1)[1]
    assert middle == pytest.approx((3 * 0.25 - 1 + 1) / 6.0 * segment.length / trans, rel=1e-12)


@pytest.mark.parametrize(
    ("power", "y", "field"),
    [
        (0, lambda t: (2 * t, 2.0, 0.0, 0.0), lambda x, t: x**2 + 2 * t),
        (0, lambda t: (12 * t**2, 24 * t, 24.0, 0.0), lambda x, t: x**4 + 12 * x**2 * t + 12 * t**2),
        (0, lambda t: (120 * t**3, 360 * t**2, 720 * t, 720.0), lambda x, t: x**6 + 30 * x**4 * t + 180 * x**2 * t**2 + 120 * t**3),
        (1, lambda t: (4 * t, 4.0, 0.0, 0.0), lambda r, t: r**2 + 4 * t),
        (1, lambda t: (32 * t**2, 64 * t, 64.0, 0.0), lambda r, t: r**4 + 16 * r**2 * t + 32 * t**2),
        (2, lambda t: (6 * t, 6.0, 0.0, 0.0), lambda r, t: r**2 + 6 * t),
        (2, lambda t: (60 * t**2, 120 * t, 120.0, 0.0), lambda r, t: r**4 + 20 * r**2 * t + 60 * t**2),
    ],
)
def test_heat_polynomials_are_exact_after_two_to_four_terms(power, y, field):
    """A polynomial flat output ends the series [RosenbloomWidder1959]; shared check values, section 7.3, α = 1.

    Radial and spherical polynomials are about r = 0: the path starts at 1e-6 of its length, which is felt as r_0² ln r_0.
    """
    inner = 2e-6 if power else 0.0
    medium = path(power, [1.0], [1e-10], inner=inner, outer=2.0)
    for t in (0.0, 0.4, 3.0):
        for x in (0.5, 1.1, 1.9):
            series = sum(c * d for c, d in zip(medium.coefficients("pressure", 3, x=x), y(t), strict=True))
            assert series == pytest.approx(field(inner + x, t), rel=1e-8 if power else 1e-12), (x, t)
    # the flux is the gradient of the polynomial times the conductance
    (segment,) = medium.segments
    h = 1e-4
    slope = (field(2.0 + h, 0.7) - field(2.0 - h, 0.7)) / (2 * h)
    flux = sum(c * d for c, d in zip(medium.coefficients("sandface_rate", 3), y(0.7), strict=True))
    assert flux == pytest.approx(slope * float(segment.conductance(segment.end)), rel=1e-7)


# --- exact forms -------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("face", "leakage"), [*((face, 0.0) for face in FACES), ("sealed", 3e-15), ("leaky and storing", 3e-15), ("held", 3e-15)]
)
def test_generating_functions_solve_the_recurrence_symbolically(rock, fluid, face, leakage):
    """α φ_k'' = φ_(k-1) + λ φ_k, F_k = T φ_k', and the conditions at the face."""
    medium = slab(rock, fluid, face=FACES[face], leakage=leakage)
    x = sympy.Symbol("x")
    held = medium.face.held
    most = 2 if leakage else 6
    phis = [medium.generating_function(k) for k in range(most)]
    rates = [medium.generating_function(k, kind="rate") for k in range(most)]
    symbols = {s.name: s for expression in (*phis, *rates) for s in expression.free_symbols if s.name != "x"}
    alpha, trans = symbols["alpha"], symbols.get("T")
    lam = symbols.get("lambda", sympy.Integer(0))
    kappa, store = symbols.get("kappa", sympy.Integer(0)), symbols.get("C_f", sympy.Integer(0))
    for k, (phi, rate) in enumerate(zip(phis, rates, strict=True)):
        before = phis[k - 1] if k else sympy.Integer(0)
        assert sympy.simplify(sympy.diff(phi, x, 2) - (before + lam * phi) / alpha) == 0
        if trans is not None:
            assert sympy.simplify(rate - trans * sympy.diff(phi, x)) == 0
        wanted = (0, 1 if k == 0 else 0) if held else (1 if k == 0 else 0, {0: kappa, 1: store}.get(k, 0))
        assert sympy.simplify(phi.subs(x, 0) - wanted[0]) == 0
        assert sympy.simplify(rate.subs(x, 0) - wanted[1]) == 0


@pytest.mark.parametrize(("face", "leakage"), [*((face, 0.0) for face in FACES), ("leaky and storing", 3e-15), ("held", 3e-15)])
def test_the_value_of_an_exact_form_is_the_coefficient(rock, fluid, face, leakage):
    medium = slab(rock, fluid, face=FACES[face], leakage=leakage)
    for k in (0, 1, 2) if leakage else (0, 1, 2, 5):
        for kind, channel in (("pressure", "sandface_pressure"), ("rate", "sandface_rate")):
            value = float(medium.generating_function(k, kind=kind).subs("x", sympy.Integer(140)).evalf(40))
            assert medium.coefficients(channel, k)[k] == pytest.approx(value, rel=2e-13, abs=1e-300), (k, kind)


@pytest.mark.parametrize("k", (-1, 1.0, True, "2", None))
def test_a_generating_function_of_no_whole_number_is_refused(medium, k):
    with pytest.raises(ValueError, match=rf"k: got {k!r}; it takes a whole number, 0 or more"):
        medium.generating_function(k)


# --- bounds ------------------------------------------------------------------------------------


@pytest.mark.parametrize("face", FACES)
@pytest.mark.parametrize("well", WELLS)
@pytest.mark.parametrize("leakage", (0.0, 3e-15, 4e-13))
def test_bounds_hold_for_the_slab(rock, fluid, face, well, leakage):
    medium = slab(rock, fluid, face=FACES[face], well=WELLS[well], leakage=leakage)
    k = np.arange(2, 121)
    for channel in CHANNELS:
        truth, bound = scaled_coefficients(medium, channel, 120)[2:], scaled_bounds(medium, channel, k)
        assert np.all(truth <= bound), channel
        if not leakage:  # equality but for the slack
            assert np.all(truth >= bound * (1.0 - 3e-9)), channel


@pytest.mark.parametrize("name", [*HAND_BUILT, *FACED])
def test_bounds_hold_for_hand_built_paths(name):
    medium = {**HAND_BUILT, **FACED}[name]
    k = np.arange(2, 121)
    for channel in CHANNELS:
        truth, bound = scaled_coefficients(medium, channel, 120)[2:], scaled_bounds(medium, channel, k)
        assert np.all(truth <= bound), channel


def logs(low, high):
    return st.floats(math.log(low), math.log(high)).map(math.exp)


@st.composite
def media(draw):
    """Chains of one to four zones of any flow, face, well and leakage."""
    power = draw(st.integers(0, 2))
    n = draw(st.integers(1, 4))
    cuts = sorted({draw(st.floats(0.02, 0.98)) for _ in range(n - 1)} | {1.0})
    n = len(cuts)
    outer = 0.1 * draw(logs(1.2, 1e4 if power == 1 else 300.0))
    if power == 1:  # spread zones over the logarithm of the radius
        ratio = outer / 0.1
        cuts = [(ratio**c - 1.0) / (ratio - 1.0) for c in cuts[:-1]] + [1.0]
    contrast = draw(logs(1.0, 1e3))
    spread = st.floats(-1.0, 1.0)
    leaking = draw(st.booleans())
    made = path(
        power,
        cuts,
        [1e-10 * contrast ** draw(spread) for _ in range(n)],
        [1e-10 * contrast ** (0.5 * draw(spread)) for _ in range(n)],
        [1e-15 * contrast ** draw(spread) if leaking and draw(st.booleans()) else 0.0 for _ in range(n)],
        inner=0.1,
        outer=outer,
        outward=draw(st.booleans()),
    )
    volume = sum(s.volume * s.capacity for s in made.segments)
    scale = volume / made.travel_time
    face = draw(st.sampled_from(["sealed", "held", "leaky", "storing"]))
    faces = {
        "sealed": fp.Face(),
        "held": fp.Face(held=True),
        "leaky": fp.Face(leak=scale * draw(logs(1e-2, 1e2)), storage=volume * draw(logs(1e-3, 1e2))),
        "storing": fp.Face(storage=volume * draw(logs(1e-3, 1e2))),
    }
    well = fp.Well(storage=draw(st.sampled_from([0.0, 1.0])) * volume * draw(logs(1e-4, 10.0)))
    resistance = draw(st.sampled_from([0.0, 1.0, -0.3])) * draw(logs(1e-2, 1.0)) / scale
    return Medium(made.flow, made.segments, face=faces[face], well=well, well_resistance=resistance)


@given(medium=media())
@settings(max_examples=60)
def test_no_coefficient_of_a_random_path_is_above_its_bound(medium):
    if max(s.leakage / s.capacity for s in medium.segments) * medium.travel_time > 1e4:
        return
    k = np.arange(2, 121)
    for channel in CHANNELS:
        assert np.all(np.abs(scaled_coefficients(medium, channel, 120)[2:]) <= scaled_bounds(medium, channel, k)), channel


@given(medium=media())
@settings(max_examples=30)
def test_scaled_bounds_grow_no_faster_than_the_tail_allows(medium):
    """The sum to infinity takes C_(k+1)/C_k ≤ (1 + 2/k)⁴."""
    k = np.arange(3.0, 700.0)
    for channel in CHANNELS:
        bound = scaled_bounds(medium, channel, k)
        assert np.all(bound[1:] / bound[:-1] <= (1.0 + 2.0 / k[:-1]) ** 4 * (1.0 + 1e-12)), channel


def test_leakage_lemma():
    """C(j+i, i) ≤ C(2j+2i-1, 2i) for j ≥ 1 and C(j+i, i) ≤ C(2j+2i, 2i): what turns a shift of s into cosh √(λ t_D)."""
    for j in range(40):
        for i in range(40):
            assert math.comb(j + i, i) <= math.comb(2 * j + 2 * i, 2 * i) <= math.comb(2 * j + 2 * i + 1, 2 * i)
            if j:
                assert math.comb(j + i, i) <= math.comb(2 * j + 2 * i - 1, 2 * i)


def test_admittance_variation_counts_jumps_and_slopes():
    medium = path(1, [0.5, 1.0], [1e-10, 1e-12], inner=1.0, outer=3.0)
    first, last, total, down = admittance_variation(medium)
    # ln Y grows by ln 3 along the radius and falls by ln 10 at the join
    assert total == pytest.approx(math.log(3.0) + math.log(10.0), rel=1e-12)
    assert down == pytest.approx(math.log(10.0), rel=1e-12)
    assert math.log(last / first) == pytest.approx(math.log(3.0) - math.log(10.0), rel=1e-12)


# --- bad input ---------------------------------------------------------------------------------


@pytest.mark.parametrize("terms", (-1, 2.0, True, "3", None))
def test_terms_that_are_no_whole_number_are_refused(medium, terms):
    with pytest.raises(ValueError, match=rf"terms: got {terms!r}; it takes a whole number, 0 or more"):
        medium.coefficients("injection_rate", terms)


def test_an_unknown_channel_is_refused_with_those_that_exist(medium):
    with pytest.raises(ValueError, match=r"channel: got 'flow'; .*'injection_rate'"):
        medium.coefficients("flow", 3)


def test_a_pressure_without_a_place_is_refused(medium):
    with pytest.raises(ValueError, match=r'x: the channel "pressure" needs x=, a place on the path'):
        medium.coefficients("pressure", 3)


@pytest.mark.parametrize("x", (-1.0, "141 m"))
def test_a_place_off_the_path_is_refused(medium, x):
    with pytest.raises(ValueError, match=r"x: got (-1|141) m; the path runs from 0 \(target face\) to 140 m \(sandface\)"):
        medium.coefficients("pressure", 3, x=x)


def test_coefficients_outside_the_range_of_a_float_are_refused(medium):
    with pytest.raises(ValueError, match=r"terms: got 4000; in SI units the coefficients leave the range of a float after k = \d+"):
        fp.slab(length="900 km", area=1.0, rock=medium.inputs["rock"], fluid=medium.inputs["fluid"]).coefficients("injection_rate", 4000)

"""Plans: what a feedforward must do whatever the job, and known members of the family.

Outside references: constant flux into an insulated slab [CarslawJaeger1959], section 3.8, by Duhamel's integral; the
table of best members of the method (an independent script). Hypothesis runs derandomised (conftest.py).
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.special import erfc

import flatplan as fp
from flatplan.channels import CHANNELS

ROCK = fp.Rock(permeability="40 mD", porosity=0.12, compressibility="5e-10 1/Pa")
WATER = fp.Fluid(viscosity="0.5 cP", compressibility="4.5e-10 1/Pa")
SMALL = settings(max_examples=15)


def slab(length=140.0, **rest):
    return fp.slab(length=length, area="6000 m^2", rock=ROCK, fluid=WATER, **rest)


def mixed(medium):
    """Up, hold, down, a small overlapping move."""
    t_d = medium.travel_time
    return (
        fp.Target(start="21 MPa")
        .move(to="22.5 MPa", over=2.0 * t_d, order=1.8, easing=0.4)
        .hold(0.7 * t_d)
        .move(to="20.6 MPa", over=3.0 * t_d, order=1.6)
        .move(by="0.2 MPa", over=1.5 * t_d, order=1.9, easing=0.8, at=3.0 * t_d)
    )


# --- known members -----------------------------------------------------------------------------

# X, one bump of γ = 1.05: peak and least; eased ramp: peak, least, γ, e. Multiples of the mean rate, two decimals.
BEST = [
    (0.05, 2.74, 0.00, 1.13, -0.02, 1.5, 0.10),
    (0.1, 2.74, 0.00, 1.21, -0.03, 1.25, 0.15),
    (0.25, 2.77, -0.01, 1.38, -0.13, 1.1, 0.20),
    (0.5, 2.87, -0.09, 1.71, -0.28, 1.1, 0.30),
    (1.0, 3.23, -0.49, 2.41, -0.74, 1.1, 0.40),
    (2.0, 4.50, -1.82, 4.93, -2.93, 1.25, 0.50),
]


def extremes(x, gamma, easing):
    medium = slab()
    duration = medium.travel_time / x
    target = fp.Target(start=0.0).move(by=1e6, over=duration, order=1.0 + 1.0 / gamma, easing=easing)
    rate = fp.feedforward(medium, target).rate(np.linspace(0.0, duration, 4001))
    mean = medium.stored_volume(1e6) / duration
    return rate.max() / mean, rate.min() / mean


@pytest.mark.parametrize(("x", "peak", "least"), [row[:3] for row in BEST])
def test_one_bump_of_the_table_of_best_members(x, peak, least):
    most, fewest = extremes(x, 1.05, 1.0)
    assert most == pytest.approx(peak, abs=0.005) and fewest == pytest.approx(least, abs=0.005)


@pytest.mark.parametrize(("x", "peak", "least", "gamma", "easing"), [(row[0], *row[3:]) for row in BEST])
def test_eased_ramps_of_the_table_of_best_members(x, peak, least, gamma, easing):
    most, fewest = extremes(x, gamma, easing)
    assert most == pytest.approx(peak, abs=0.005) and fewest == pytest.approx(least, abs=0.005)


def ierfc(z):
    return np.exp(-(z**2)) / math.sqrt(math.pi) - z * erfc(z)


def flux_response(tau, xi):
    """v K/(F l) of an insulated slab with constant flux at ξ = 1 from τ = 0 on, at ξ = 0 or 1 [CarslawJaeger1959].

    Images for small τ, the series of section 3.8, equation 3, for large.
    """
    tau = np.maximum(np.asarray(tau, dtype=float), 1e-300)
    root = 2.0 * np.sqrt(tau)
    images = root * sum(ierfc((2 * n + 1 - xi) / root) + ierfc((2 * n + 1 + xi) / root) for n in range(4))
    series = tau + (3.0 * xi**2 - 1.0) / 6.0
    for n in range(1, 8):
        series = series - 2.0 / math.pi**2 * (-1) ** n / n**2 * np.exp(-((n * math.pi) ** 2) * tau) * math.cos(n * math.pi * xi)
    return np.where(tau < 0.3, images, series)


# the shared check values, section 4.2
FLUX_ROWS = [
    (0.02, 1, 0.159576912),
    (0.05, 1, 0.252313252),
    (0.1, 1, 0.356826246),
    (0.2, 1, 0.505165189),
    (0.5, 1, 0.831875953),
    (1.0, 1, 1.33332285),
]
FLUX_ROWS += [(0.05, 0, 0.000269342125), (0.1, 0, 0.0078852929), (0.2, 0, 0.0614637513), (0.5, 0, 0.334790713), (1.0, 0, 0.833343815)]


@pytest.mark.parametrize(("tau", "xi", "value"), FLUX_ROWS)
def test_the_response_to_constant_flux_is_the_tabulated_one(tau, xi, value):
    assert float(flux_response(tau, xi)) == pytest.approx(value, rel=3e-9)


@pytest.mark.parametrize(("x", "order", "easing"), [(0.3, 1.8, 0.3), (1.0, 1.5, 1.0), (2.0, 1.9, 1.0), (4.0, 1.6, 1.0)])
def test_the_rate_makes_the_target_face_follow_by_duhamels_integral(x, order, easing):
    """p(t) = ∫ Q'(t') U(t - t') dt' with U the response to constant flux: target face and sandface, to 1e-9.

    t' = t - u² makes the integrand smooth at the sandface too; Gauss-Legendre between the knots.
    """
    medium = slab()
    (segment,) = medium.segments
    target = (
        fp.Target(start="21 MPa")
        .move(to="22.5 MPa", over=medium.travel_time / x, order=order, easing=easing)
        .hold(0.5 * medium.travel_time)
    )
    plan = fp.feedforward(medium, target)
    unit = segment.length / (segment.mobility * segment.area_factor)  # l/K of the whole face
    nodes, weights = np.polynomial.legendre.leggauss(24)
    for t in np.linspace(0.15, 1.0, 6) * target.end:
        edges = np.sqrt(t - np.clip(np.concatenate([plan.knots, np.linspace(0.0, t, 60)]), 0.0, t))
        edges = np.unique(np.concatenate([edges, np.linspace(0.0, math.sqrt(t), 40)]))
        half = 0.5 * np.diff(edges)[:, None]
        u = (edges[:-1, None] + half * (nodes + 1.0)).ravel()
        w = (half * weights).ravel()
        rate_of_rate = plan.evaluate("injection_rate", t - u**2, derivative=1)
        for xi, channel in ((0, "target_pressure"), (1, "sandface_pressure")):
            change = unit * float(np.sum(w * 2.0 * u * rate_of_rate * flux_response(u**2 / medium.travel_time, xi)))
            wanted = float(plan.evaluate(channel, [t])[0])
            assert abs(change - wanted) <= 1e-9 * plan.certificate.peak[channel], (t, channel)


def test_the_middle_of_a_slow_ramp_is_the_quasi_steady_state():
    """Constant flux, the far face rising at F/(S l), the heated face F l/(2K) ahead [CarslawJaeger1959]."""
    medium = slab()
    (segment,) = medium.segments
    target = fp.Target(start=0.0).move(by=1e6, over=20.0 * medium.travel_time, order=1.5, easing=0.2)
    plan = fp.feedforward(medium, target)
    times = np.linspace(0.25, 0.75, 5) * target.end
    flux = medium.stored_volume(1e6) / (0.8 * target.end)
    assert plan.rate(times) == pytest.approx(np.full(5, flux), rel=1e-12)
    ahead = plan.evaluate("sandface_pressure", times) - plan.evaluate("target_pressure", times)
    assert ahead == pytest.approx(np.full(5, flux * segment.length / (2.0 * segment.mobility * segment.area_factor)), rel=1e-9)


# --- properties --------------------------------------------------------------------------------

ORDERS = st.sampled_from([1.25, 1.4, 1.55, 1.7, 1.8, 1.9, 1.95])  # a few, as bounds on each are made once
JOBS = {"order": ORDERS, "easing": st.one_of(st.just(1.0), st.floats(0.2, 0.95)), "slowness": st.floats(0.0, 1.5)}


def plan_of(medium, order, easing, slowness, change=1e6, at=0.0):
    width = medium.travel_time * 10.0**slowness
    return fp.feedforward(medium, fp.Target(start="21 MPa").move(by=change, over=width / easing, order=order, easing=easing, at=at))


@given(**JOBS, factor=st.floats(-20.0, 20.0).filter(lambda f: abs(f) > 1e-3))
@SMALL
def test_a_plan_is_linear_in_the_change(order, easing, slowness, factor):
    medium = slab(well=fp.Well(storage=2e-7, resistance=3e8))
    one, other = (plan_of(medium, order, easing, slowness, change) for change in (1e6, factor * 1e6))
    times = np.linspace(0.0, one.end, 60)
    for channel in CHANNELS:
        a, b = one.evaluate(channel, times), other.evaluate(channel, times)
        assert np.max(np.abs(b - factor * a)) <= 2e-9 * abs(factor) * np.max(np.abs(a)), channel


@given(**JOBS, shift=st.floats(1.0, 1e8))
@SMALL
def test_a_later_move_gives_the_same_plan_later(order, easing, slowness, shift):
    medium = slab()
    shift = float(np.round(shift))
    one, other = plan_of(medium, order, easing, slowness), plan_of(medium, order, easing, slowness, at=shift)
    times = np.round(np.linspace(0.0, one.end, 50))
    for channel in CHANNELS:
        a, b = one.evaluate(channel, times), other.evaluate(channel, times + shift)
        assert np.max(np.abs(b - a)) <= 2e-9 * np.max(np.abs(a)), channel
    assert np.all(other.rate(np.linspace(0.0, shift, 5)) == 0.0)


@given(**JOBS, stretch=st.floats(0.2, 40.0))
@SMALL
def test_a_longer_slab_in_longer_time(order, easing, slowness, stretch):
    """Length times a and time times a²: pressures the same, rates 1/a, volumes a times as large."""
    one = plan_of(slab(), order, easing, slowness)
    other = plan_of(slab(140.0 * stretch), order, easing, slowness)
    times = np.linspace(0.0, 1.0, 41)
    for channel, factor in (("injection_rate", 1.0 / stretch), ("sandface_pressure", 1.0), ("injected_volume", stretch)):
        a, b = one.evaluate(channel, times * one.end), other.evaluate(channel, times * other.end)
        assert np.max(np.abs(b / factor - a)) <= 2e-9 * np.max(np.abs(a)), channel


@given(**JOBS)
@SMALL
def test_what_was_injected_is_what_is_stored(order, easing, slowness):
    medium = slab(well=fp.Well(storage=2e-7, resistance=3e8))
    plan = plan_of(medium, order, easing, slowness, change=-7e5)
    stored = medium.stored_volume(-7e5)
    assert plan.evaluate("injected_volume", [plan.end, 3.0 * plan.end]) == pytest.approx([stored, stored], rel=1e-12)


@pytest.mark.parametrize("face", [fp.Face(), fp.Face(storage=4e-6)])
def test_mass_balance_of_several_moves(face):
    medium = slab(face=face, well=fp.Well(storage=2e-7, resistance=3e8))
    target = mixed(medium)
    volume = fp.feedforward(medium, target).evaluate("injected_volume", [target.end])[0]
    assert volume == pytest.approx(medium.stored_volume(target.level - target.start), rel=1e-12)


def test_the_rate_is_the_derivative_of_the_volume():
    medium = slab(well=fp.Well(storage=2e-7, resistance=3e8))
    plan = fp.feedforward(medium, mixed(medium))
    times = np.linspace(0.01, 0.99, 80) * plan.end
    assert np.array_equal(plan.evaluate("injected_volume", times, derivative=1), plan.rate(times))
    h = 1e-4 * medium.travel_time
    volume = plan.evaluate("injected_volume", np.concatenate([times - h, times + h])).reshape(2, -1)
    assert np.max(np.abs((volume[1] - volume[0]) / (2.0 * h) - plan.rate(times))) <= 1e-6 * plan.certificate.peak["injection_rate"]


@pytest.mark.parametrize("channel", CHANNELS)
def test_derivatives_of_channels_agree_with_differences(channel):
    medium = slab(well=fp.Well(storage=2e-7, resistance=3e8))
    plan = fp.feedforward(medium, mixed(medium))
    times = np.linspace(0.01, 0.99, 80) * plan.end
    h = 1e-4 * medium.travel_time
    for derivative in (0, 1):
        near = plan.evaluate(channel, np.concatenate([times - h, times + h]), derivative).reshape(2, -1)
        exact = plan.evaluate(channel, times, derivative + 1)
        assert np.max(np.abs((near[1] - near[0]) / (2.0 * h) - exact)) <= 3e-6 * np.max(np.abs(exact)), derivative


def test_well_equations():
    """p_w = p(L) + R Q_s and Q = Q_s + C_w dp_w/dt."""
    medium = slab(well=fp.Well(storage=2e-7, resistance=3e8))
    plan = fp.feedforward(medium, mixed(medium))
    t = np.linspace(0.0, plan.end, 300)
    through, bottom = plan.evaluate("sandface_rate", t), plan.evaluate("bottomhole_pressure", t)
    assert np.max(np.abs(plan.evaluate("sandface_pressure", t) + 3e8 * through - bottom)) <= 1e-12 * np.max(np.abs(bottom))
    stored = 2e-7 * plan.evaluate("bottomhole_pressure", t, derivative=1)
    rate = plan.rate(t)
    assert np.max(np.abs(through + stored - rate)) <= 3e-9 * np.max(np.abs(rate))


def test_pressure_at_the_ends_of_the_path():
    medium = slab()
    target = mixed(medium)
    plan = fp.feedforward(medium, target)
    t = np.linspace(0.0, 1.2 * plan.end, 150)
    face, sandface = plan.pressure([0.0, medium.length], t)
    assert np.max(np.abs(face - target.pressure(t))) <= 1e-8  # 21 MPa is rounded to 4e-9 Pa
    assert np.max(np.abs(sandface - plan.at(t).sandface_pressure)) <= 1e-12 * 2.25e7
    assert np.max(np.abs(plan.at(t).target_pressure - target.pressure(t))) <= 1e-8


def test_the_field_solves_the_diffusion_equation():
    """p_t = α p_xx and T p_x = the sandface rate, by differences of the field."""
    medium = slab()
    (segment,) = medium.segments
    plan = fp.feedforward(medium, mixed(medium))
    t = np.linspace(0.05, 0.95, 30) * plan.end
    h, dt = 0.7, 2e-4 * medium.travel_time
    for x in (30.0, 75.0, 120.0):
        before, here, after = plan.pressure([x - h, x, x + h], t) - plan.target.start
        early, late = (plan.pressure([x], t + shift)[0] - plan.target.start for shift in (-dt, dt))
        slope, curved = (late - early) / (2.0 * dt), segment.diffusivity * (before - 2.0 * here + after) / h**2
        assert np.max(np.abs(slope - curved)) <= 2e-4 * np.max(np.abs(slope))
    ends = plan.pressure([140.0 - 2.0 * h, 140.0 - h, 140.0], t) - plan.target.start
    gradient = (3.0 * ends[2] - 4.0 * ends[1] + ends[0]) / (2.0 * h)
    rate = plan.evaluate("sandface_rate", t)
    assert np.max(np.abs(segment.mobility * segment.area_factor * gradient - rate)) <= 2e-4 * np.max(np.abs(rate))


def test_rest_at_the_start_and_settled_after_the_end():
    medium = slab(well=fp.Well(storage=2e-7, resistance=3e8))
    target = mixed(medium)
    plan = fp.feedforward(medium, target)
    level = target.level - target.start
    for channel in CHANNELS:
        assert plan.evaluate(channel, [0.0])[0] == 0.0
        values = plan.evaluate(channel, np.array([1.0, 1.001, 2.0, 100.0]) * plan.end)
        settled = {"injection_rate": 0.0, "sandface_rate": 0.0, "injected_volume": medium.stored_volume(level)}.get(channel, level)
        assert values == pytest.approx(np.full(4, settled), rel=1e-12, abs=1e-300), channel
        assert np.all(plan.evaluate(channel, [plan.end, 5.0 * plan.end], derivative=1) == 0.0)


def test_a_leaky_medium_needs_its_steady_rate_after_the_end():
    medium = slab(leakage=3e-15, face=fp.Face(leak=2e-10))
    target = fp.Target(start="21 MPa").move(to="22 MPa", over=2.0 * medium.travel_time)
    plan = fp.feedforward(medium, target)
    steady = medium.equilibrium(1e6)
    assert steady.rate > 0.0
    assert plan.rate([plan.end, 4.0 * plan.end]) == pytest.approx([steady.rate, steady.rate], rel=1e-12)
    assert plan.evaluate("bottomhole_pressure", [2.0 * plan.end])[0] == pytest.approx(steady.bottomhole_change, rel=1e-12)


def test_a_channel_is_the_same_by_every_way_in():
    medium = slab(well=fp.Well(storage=2e-7, resistance=3e8))
    plan = fp.feedforward(medium, mixed(medium))
    t = np.linspace(0.0, plan.end, 40)
    channels = plan.at(t)
    assert np.array_equal(channels.times, t)
    for name, (kind, _) in CHANNELS.items():
        offset = plan.target.start if kind == "pressure" else 0.0
        allowed = 1e-14 * plan.certificate.peak[name] + 1e-15 * offset
        assert np.max(np.abs(getattr(channels, name) - offset - plan.evaluate(name, t))) <= allowed
        one_by_one = np.array([plan.evaluate(name, [v])[0] for v in t])
        assert np.max(np.abs(one_by_one - plan.evaluate(name, t))) <= 1e-14 * plan.certificate.peak[name]


def test_times_of_any_order_and_as_text():
    medium = slab()
    plan = fp.feedforward(medium, mixed(medium))
    t = np.linspace(0.0, plan.end, 30)
    shuffled = np.random.default_rng(8).permutation(30)
    assert np.max(np.abs(plan.rate(t[shuffled]) - plan.rate(t)[shuffled])) <= 1e-14 * plan.certificate.peak["injection_rate"]
    assert plan.rate(["12 h", "1 d"]) == pytest.approx(plan.rate([43200.0, 86400.0]), rel=1e-15)


def test_a_certificate_says_what_was_done():
    medium = slab(well=fp.Well(storage=2e-7, resistance=3e8))
    target = mixed(medium)
    plan = fp.feedforward(medium, target, tolerance=1e-8)
    c = plan.certificate
    assert c.order == pytest.approx(1.9) and c.tolerance == 1e-8 and c.digits == 16 and c.met
    shortest = min(m.easing * m.duration for m in target.moves)
    assert 0.3 * shortest < c.radius < shortest
    assert set(c.tail) == set(c.rounding) == set(c.peak) == set(c.cancellation) == set(CHANNELS)
    dense = np.linspace(0.0, plan.end, 20001)
    for channel in CHANNELS:
        largest = np.max(np.abs(plan.evaluate(channel, dense)))
        assert 0.999 * largest <= c.peak[channel] <= largest * (1.0 + 1e-5), channel
        assert c.tail[channel] + c.rounding[channel] <= 1e-8 * c.peak[channel]
        assert c.cancellation[channel] >= 1.0 - 1e-12
    assert "within tolerance" in repr(c)


# --- bad input ---------------------------------------------------------------------------------


def test_an_empty_target_is_refused():
    with pytest.raises(ValueError, match=r'target: has no move; add at least one, such as .move\(to="22.5 MPa", over="3 d"\)'):
        fp.feedforward(slab(), fp.Target(start="21 MPa"))
    with pytest.raises(ValueError, match="target: has no move"):
        fp.feedforward(slab(), fp.Target(start="21 MPa").hold("3 d"))


def test_a_medium_that_leaks_beyond_the_range_of_a_float_is_refused():
    medium = slab(leakage=1e-8)
    with pytest.raises(ValueError, match=r"medium: leaks too much, with sqrt\(Λ/S · travel time\) = 1.58e\+03 where 600 is held"):
        fp.feedforward(medium, mixed(medium))
    lossy = slab(leakage=1e-9)  # e^498 from the well to the target face
    target = fp.Target(start="21 MPa").move(by="1 Pa", over=2.0 * lossy.travel_time)
    assert fp.feedforward(lossy, target).certificate.met


def test_moves_that_cancel_are_refused():
    target = fp.Target(start="21 MPa").move(by="1 MPa", over="1 d").move(by="-1 MPa", over="1 d", at=0.0)
    with pytest.raises(ValueError, match="target: its moves cancel and nothing ever changes; there is nothing to plan"):
        fp.feedforward(slab(), target)


@pytest.mark.parametrize("tolerance", (0.0, -1e-9, math.nan, math.inf, "1e-9 d"))
def test_tolerances_that_are_no_share_are_refused(tolerance):
    with pytest.raises(ValueError, match="^tolerance: got "):
        fp.feedforward(slab(), mixed(slab()), tolerance=tolerance)


@pytest.mark.parametrize("tolerance", (1e-15, 0.2))
def test_tolerances_out_of_range_are_refused(tolerance):
    with pytest.raises(ValueError, match=rf"tolerance: got {tolerance}; it takes a share of the peak from 1e-13 to 0.1"):
        fp.feedforward(slab(), mixed(slab()), tolerance=tolerance)


@pytest.mark.parametrize(("medium", "target", "name"), [("slab", None, "medium"), (None, "target", "target")])
def test_other_types_are_refused(medium, target, name):
    with pytest.raises(TypeError, match=f"^{name}: got .*; it takes "):
        fp.feedforward(medium or slab(), target or mixed(slab()))


def test_a_held_face_takes_a_rate_and_others_a_pressure():
    rates = fp.Target(start="0 L/s").move(to="1 L/s", over="30 h")
    with pytest.raises(ValueError, match=r'target: its start is a rate, but for this target face it takes a pressure \(start="21 MPa"\)'):
        fp.feedforward(slab(), rates)
    with pytest.raises(ValueError, match=r'target: its start is a pressure, but for this target face it takes a rate \(start="0 L/s"\)'):
        fp.feedforward(slab(face=fp.Face(held=True)), mixed(slab()))


def test_a_move_too_fast_for_its_order_is_refused_with_the_way_out():
    medium = slab()
    target = fp.Target(start="21 MPa").move(to="22 MPa", over=medium.travel_time / 30.0, order=1.9)
    ways = r"a duration of .* or more at this order, or an order of .* would do\."
    with pytest.raises(ValueError, match=rf"target: at order 1.9 .* more than \d+ terms; {ways}"):
        fp.feedforward(medium, target)


@pytest.fixture(scope="module")
def plan():
    medium = slab()
    return fp.feedforward(medium, mixed(medium))


def test_an_unknown_channel_is_refused(plan):
    with pytest.raises(ValueError, match=r"channel: got 'flow'; .*'injection_rate'"):
        plan.evaluate("flow", [1.0])


@pytest.mark.parametrize("derivative", (-1, -2, 1.0, True, "1", None))
def test_derivatives_that_are_no_whole_number_are_refused(plan, derivative):
    with pytest.raises(ValueError, match=rf"derivative: got {derivative!r}; it takes a whole number, 0 or more"):
        plan.evaluate("injection_rate", [1.0], derivative)


@pytest.mark.parametrize("x", (-0.1, 140.1, "141 m"))
def test_places_off_the_path_are_refused(plan, x):
    with pytest.raises(ValueError, match=r"x: got (-0.1|140.1|141) m; the path runs from 0 \(target face\) to 140 m \(sandface\)"):
        plan.pressure([x], [1.0])


@pytest.mark.parametrize("x", (math.nan, "3 bar"))
def test_places_that_are_no_lengths_are_refused(plan, x):
    with pytest.raises(ValueError, match="^x: "):
        plan.pressure([x], [1.0])


@pytest.mark.parametrize("times", ([], [math.nan], [math.inf], ["3 bar"], ["soon"], None))
def test_times_that_are_no_times_are_refused(plan, times):
    for call in (plan.rate, plan.at, lambda t: plan.evaluate("injected_volume", t), lambda t: plan.pressure([0.0], t)):
        with pytest.raises(ValueError, match="^times: "):
            call(times)

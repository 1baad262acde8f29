"""simulate and run: laws that hold for every medium and history, going on from a state, and the sentences."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
from helpers_numeric import linear, round_medium
from hypothesis import given, settings
from hypothesis import strategies as st

from flatplan.numeric import Steps, run, simulate, simulation
from flatplan.numeric.simulation import MOST_REFINEMENTS
from flatplan.site import Face, Well

MEDIA = [
    linear(),
    linear(((60.0, 1.0, 1.0, 2e-15), (80.0, 0.2, 3.0, 0.0)), face=Face(leak=5e-10, storage=1e-5), well=Well(storage=1e-6), resistance=1e8),
    linear(face=Face(held=True), well=Well(storage=1e-6)),
    round_medium("radial", (100.0, 3.0, 0.1), ((1.0, 1.0, 1e-15), (0.1, 1.0, 0.0)), well=Well(storage=1e-7)),
    round_medium("radial", (1.0, 80.0), resistance=-1e6),
    round_medium("spherical", (60.0, 1.0), face=Face(storage=1e-5)),
]
PRESSURES = ("target_pressure", "sandface_pressure", "bottomhole_pressure")
EVERYTHING = (*PRESSURES, "sandface_rate", "injection_rate", "injected_volume")

media = st.sampled_from(MEDIA)
rates = st.lists(st.floats(-5e-3, 5e-3, allow_subnormal=False).map(lambda v: round(v, 9)), min_size=1, max_size=6)


@st.composite
def histories(draw, medium):
    """Up to six steps within one and a half travel times, and output times to three."""
    values = draw(rates)
    shares = draw(st.lists(st.floats(0.02, 0.25), min_size=len(values), max_size=len(values)))
    return Steps(edges=np.concatenate([[0.0], np.cumsum(shares)]) * medium.travel_time, rates=values)


def output_times(medium):
    return np.linspace(0.0, 3.0, 40) * medium.travel_time


def agree(one, other, medium, tolerance=1e-7, shift=0.0):
    """Channels agree, relative to the largest pressure change (for a held face, and for rates, to the channel's own largest)."""
    scale = max(np.abs(getattr(one, n)).max() for n in PRESSURES if not (medium.face.held and n == "target_pressure"))
    for name in EVERYTHING:
        a, b = getattr(one, name), getattr(other, name)
        pressure = name in PRESSURES and not (medium.face.held and name == "target_pressure")
        size = scale if pressure else max(np.abs(a).max(), np.abs(b).max())
        assert np.abs(a - b).max() <= tolerance * size, name


@settings(max_examples=25)
@given(media, st.data())
def test_mass_is_conserved(medium, data):
    """Injected = stored + leaked, to rounding; what is stored is found again from the pressure field."""
    history = data.draw(histories(medium))
    result = run(medium, history, output_times(medium))
    assert result.converged
    assert result.mass_balance <= 1e-12
    x, w = np.polynomial.legendre.leggauss(40)
    stored = medium.well.storage * result.channels.bottomhole_pressure
    if not medium.face.held:
        stored = stored + medium.face.storage * result.channels.target_pressure
    graded = medium.length * (1.0 - 4.0 ** -np.arange(1.0, 9.0))
    ends = np.unique(np.concatenate([graded, *([s.start, s.end] for s in medium.segments)]))
    for a, b in pairwise(ends):
        at = a + (b - a) * (x + 1.0) / 2.0
        stored = stored + (w * (b - a) / 2.0 * medium.segment_at(0.5 * (a + b)).storage(at)) @ result.pressure(at)
    assert np.abs(stored - result.stored_volume).max() <= 1e-9 * np.abs(result.stored_volume).max() + 1e-18


@settings(max_examples=25)
@given(media, st.data(), st.floats(-3.0, 3.0))
def test_linearity(medium, data, factor):
    """The sum of two histories, one of them scaled, gives the sum of the answers."""
    one, other = data.draw(histories(medium)), data.draw(histories(medium))
    times = output_times(medium)
    edges = np.unique(np.concatenate([one.edges, other.edges]))
    both = Steps(edges=edges, rates=one.rate(edges[:-1]) + factor * other.rate(edges[:-1]))
    a, b, c = (simulate(medium, h, times, tolerance=1e-9) for h in (one, other, both))
    scale = {}
    for name in EVERYTHING:
        terms = [np.abs(getattr(a, name)).max(), abs(factor) * np.abs(getattr(b, name)).max()]
        scale[name] = max(terms)
    pressure = max(scale[n] for n in PRESSURES if not (medium.face.held and n == "target_pressure"))
    for name in EVERYTHING:
        size = pressure if name in PRESSURES and not (medium.face.held and name == "target_pressure") else scale[name]
        assert np.abs(getattr(a, name) + factor * getattr(b, name) - getattr(c, name)).max() <= 1e-7 * size, name


@settings(max_examples=25)
@given(media, st.data(), st.floats(0.01, 2.0))
def test_a_later_start_gives_the_same_later(medium, data, share):
    history = data.draw(histories(medium))
    later = share * medium.travel_time
    times = output_times(medium)[1:]
    one = simulate(medium, history, times)
    other = simulate(medium, Steps(edges=history.edges + later, rates=history.rates), times + later)
    agree(one, other, medium)


@settings(max_examples=20)
@given(st.sampled_from(["linear", "radial", "spherical"]), st.floats(0.1, 10.0), st.floats(0.1, 10.0))
def test_a_medium_of_another_size_scales(flow, mobility, capacity):
    """k/μ times m and φ c_t times c: with time times c/m, pressures are 1/m of before."""

    def made(m, c):
        if flow == "linear":
            return linear(((50.0, m, c, 0.0), (90.0, 3.0 * m, 0.5 * c, 0.0)))
        return round_medium(flow, (80.0, 0.5), ((m, c, 0.0),))

    one, other = made(1.0, 1.0), made(mobility, capacity)
    edges, times = np.array([0.0, 0.4, 1.0]), np.linspace(0.1, 2.0, 12)
    a = simulate(one, Steps(edges=edges * one.travel_time, rates=[1e-3, -1e-3]), times * one.travel_time)
    b = simulate(other, Steps(edges=edges * other.travel_time, rates=[1e-3, -1e-3]), times * other.travel_time)
    for name in PRESSURES:
        np.testing.assert_allclose(getattr(b, name) * mobility, getattr(a, name), rtol=0.0, atol=1e-7 * np.abs(a.sandface_pressure).max())


@pytest.mark.parametrize("index", range(len(MEDIA)))
def test_pressure_along_the_path_joins_its_ends(index):
    medium = MEDIA[index]
    result = run(medium, lambda t: 1e-3 * np.sin(t / medium.travel_time), output_times(medium)[1:], start="12 MPa")
    along = result.pressure([0.0, medium.length])
    np.testing.assert_allclose(along[1], result.channels.sandface_pressure, rtol=1e-14)
    np.testing.assert_allclose(along[0], 12e6 if medium.face.held else result.channels.target_pressure, rtol=1e-14)


def test_a_function_and_the_steps_it_is_made_of():
    """The same history said twice: as steps, and as a function with its jumps as knots."""
    medium = MEDIA[3]
    steps = Steps(edges=np.array([0.0, 0.2, 0.7]) * medium.travel_time, rates=[2e-3, -1e-3])
    times = output_times(medium)
    agree(simulate(medium, steps, times), simulate(medium, steps.rate, times, knots=steps.edges), medium)


def test_steps_that_begin_before_zero_count():
    """Rest before the first edge; the volume counts from there."""
    medium = MEDIA[0]
    early = Steps(edges=np.array([-0.5, 0.0, 0.4]) * medium.travel_time, rates=[1e-3, 2e-3])
    late = Steps(edges=early.edges + 0.5 * medium.travel_time, rates=early.rates)
    times = np.linspace(0.0, 2.0, 9) * medium.travel_time
    agree(simulate(medium, early, times), simulate(medium, late, times + 0.5 * medium.travel_time), medium)


@pytest.mark.parametrize("index", [1, 2, 3])
def test_what_cannot_jump_does_not_jump(index):
    """With wellbore storage the sandface rate, and the rate through a held face, go on from before when the injection rate jumps."""
    medium = MEDIA[index]
    steps = Steps(edges=np.array([0.0, 0.3, 0.8]) * medium.travel_time, rates=[2e-3, -1e-3])
    jump = 0.3 * medium.travel_time
    out = simulate(medium, steps, [0.0, jump * (1.0 - 1e-9), jump])
    channels = ("sandface_rate", "target_pressure") if medium.face.held else ("sandface_rate",)
    for channel in channels:
        start, before, at = getattr(out, channel)
        assert start == 0.0
        assert at == pytest.approx(before, rel=1e-6)
    np.testing.assert_array_equal(out.injection_rate, [2e-3, 2e-3, -1e-3])


# --- going on from a state --------------------------------------------------------------------------


@pytest.mark.parametrize("index", range(len(MEDIA)))
def test_going_on_is_the_same_as_going_through(index):
    medium = MEDIA[index]
    t_d = medium.travel_time
    whole = Steps(edges=np.array([0.0, 0.3, 0.8, 1.5]) * t_d, rates=[2e-3, -1e-3, 1.5e-3])
    times = np.linspace(0.9, 3.0, 22) * t_d
    through = simulate(medium, whole, times, start=1e7)
    first = run(medium, whole, [0.45 * t_d, 0.9 * t_d], start=1e7)
    on = run(medium, whole, times, start=1e7, initial=first.state)
    assert first.state.time == 0.9 * t_d
    assert on.mass_balance < 1e-9
    scale = np.abs(through.bottomhole_pressure - 1e7).max()
    for name in (*PRESSURES, "sandface_rate"):
        rate = name == "sandface_rate" or (medium.face.held and name == "target_pressure")
        size = np.abs(getattr(through, name)).max() if rate else scale
        np.testing.assert_allclose(getattr(on.channels, name), getattr(through, name), rtol=0.0, atol=2e-8 * size)
    np.testing.assert_allclose(on.channels.injected_volume, through.injected_volume, rtol=1e-12, atol=1e-15)
    assert "State at" in repr(first.state)


@pytest.mark.parametrize("index", [0, 1, 2, 3])
def test_many_stops_at_once(index):
    """What the modes say of stopping at any of 500 moments is what simulating the stop says."""
    medium = MEDIA[index]
    t_d = medium.travel_time

    def rate(t):
        return 2e-3 * np.sin(2.0 * t / t_d) ** 2

    moments = np.linspace(0.0, 2.0, 500) * t_d
    after = np.linspace(0.0, 2.0, 21)[1:] * t_d
    result = run(medium, rate, moments)
    for channel in ("target_pressure", "sandface_pressure"):
        answers = result.model.free(channel, result.amplitudes(), after)
        assert answers.shape == (500, 20)
        stopped = simulate(medium, lambda t: np.where(t < moments[317], rate(t), 0.0), moments[317] + after, knots=[moments[317]])
        exact = getattr(stopped, channel)
        np.testing.assert_allclose(answers[317], exact, rtol=0.0, atol=1e-7 * np.abs(exact).max())


# --- accuracy that is asked for -----------------------------------------------------------------------


@pytest.mark.parametrize("tolerance", [1e-3, 1e-6, 1e-9, 1e-11])
@pytest.mark.parametrize("index", range(len(MEDIA)))
def test_the_error_estimate_is_no_smaller_than_the_error(index, tolerance):
    """Against a mesh far finer, outputs shortly after a jump included; rounding is allowed for as `simulate` states it."""
    medium = MEDIA[index]
    steps = Steps(edges=np.array([0.0, 0.3, 0.8]) * medium.travel_time, rates=[2e-3, -1e-3])
    times = np.unique(np.concatenate([output_times(medium), (0.3 + np.array([1e-6, 1e-4])) * medium.travel_time]))
    result = run(medium, steps, times, tolerance=tolerance)
    best = run(medium, steps, times, tolerance=1e-12)
    assert result.converged
    assert result.relative_error <= tolerance
    for name, error in result.errors.items():
        assert np.abs(getattr(result.channels, name) - getattr(best.channels, name)).max() <= error + 3e-12 * best.largest_change, name


def test_rounding_right_after_a_jump():
    """A small well, 1e-9 travel times after a jump: two meshes that resolve it differ by rounding, below 1e-10 of the largest change."""
    medium = MEDIA[5]
    steps = Steps(edges=np.array([0.0, 0.3, 0.8]) * medium.travel_time, rates=[2e-3, -1e-3])
    times = (0.3 + np.array([0.0, 1e-9, 1e-8])) * medium.travel_time
    one, other = (run(medium, steps, times, tolerance=t) for t in (1e-9, 1e-3))
    assert one.modes != other.modes
    assert np.abs(one.channels.sandface_pressure - other.channels.sandface_pressure).max() < 1e-10 * one.largest_change


def test_a_tolerance_that_is_not_reached_is_said(monkeypatch):
    """The refinement is starved; run says so, simulate refuses."""
    monkeypatch.setattr(simulation, "MOST_REFINEMENTS", 1)
    monkeypatch.setattr(simulation, "first_mesh", lambda *_: simulation.Mesh(4, 1))
    medium = MEDIA[0]
    steps = Steps(edges=[0.0, medium.travel_time], rates=[1e-3])
    result = run(medium, steps, output_times(medium))
    assert not result.converged
    assert result.refinements == 1
    assert result.relative_error > 1e-8
    sentence = (
        r"^tolerance: got 1e-08, but the error estimate stayed at \S+ of the largest pressure change after 1 refinements;"
        r" it takes a larger one\.$"
    )
    with pytest.raises(ValueError, match=sentence):
        simulate(medium, steps, output_times(medium))


def test_a_noisy_rate_is_said():
    rng = np.random.default_rng(3)
    medium = MEDIA[0]
    sentence = (
        r"^tolerance: got 1e-08, but the error estimate stayed at \S+ of the largest pressure change after 1 refinements"
        r" \(the rate has noise of its own\); it takes a larger one\.$"
    )
    with pytest.raises(ValueError, match=sentence):
        simulate(medium, lambda t: 1e-3 * (1.0 + 1e-7 * rng.standard_normal(len(t))), output_times(medium))
    assert MOST_REFINEMENTS > 1


def test_a_noisy_rate_does_not_stop_the_mesh_before_its_own_error(monkeypatch):
    """The tolerance is out of reach, but what the mesh adds is brought below what the noise does."""
    monkeypatch.setattr(simulation, "first_mesh", lambda *_: simulation.Mesh(4, 1))
    rng = np.random.default_rng(4)
    noisy = run(MEDIA[0], lambda t: 1e-3 * (1.0 + 1e-10 * rng.standard_normal(len(t))), output_times(MEDIA[0])[1:], tolerance=1e-12)
    assert not noisy.converged
    assert 1e-12 < noisy.following_error < 1e-8
    assert noisy.refinements > 1
    assert noisy.relative_error <= 2.0 * noisy.following_error


def test_scales_of_the_errors():
    """Without a scale the largest pressure change counts for all; with one, the target's is judged by it, the well's by its own swing."""
    history = Steps(edges=[0.0, 1e4], rates=[1e-3])
    free = run(MEDIA[0], history, [1e4])
    scaled = run(MEDIA[0], history, [1e4], scale=1e-3 * free.largest_change)
    for result, target in ((free, free.largest_change), (scaled, 1e-3 * free.largest_change)):
        assert result.relative_errors["target_pressure"] == pytest.approx(result.errors["target_pressure"] / target)
        assert result.relative_errors["sandface_pressure"] == pytest.approx(result.errors["sandface_pressure"] / free.largest_change)
        assert result.relative_error == max(result.relative_errors.values())


def test_nothing_happens_without_a_rate():
    result = run(MEDIA[1], lambda t: 0.0, [0.0, 1e5], start="3 MPa")
    assert result.converged
    for name in PRESSURES:
        np.testing.assert_array_equal(getattr(result.channels, name), 3e6)
    assert result.mass_balance == 0.0
    at_once = run(MEDIA[1], lambda t: 1e-3, [0.0])
    assert at_once.channels.injection_rate[0] == pytest.approx(1e-3, rel=1e-13)
    assert at_once.channels.target_pressure[0] == 0.0


@pytest.mark.parametrize(
    ("change", "error", "sentence"),
    [
        ({"medium": "slab"}, TypeError, r"medium: got str; it takes a flatplan medium\."),
        ({"times": [0.0, 1.0, 1.0]}, ValueError, r"times: got 1 s followed by 1 s at position 2; it takes times that strictly increase\."),
        ({"times": [3.0, 1.0]}, ValueError, r"times: got 3 s followed by 1 s at position 1; it takes times that strictly increase\."),
        ({"times": [-1.0, 1.0]}, ValueError, r"times: got -1 s; output times are zero or more\."),
        ({"times": [np.nan]}, ValueError, r"times: got nan at position 0; every time must be finite\."),
        ({"times": []}, ValueError, r"times: got an empty list; it takes at least one time\."),
        ({"start": "3 m"}, ValueError, r"start: got '3 m', which is not a pressure; it takes a pressure such as .*"),
        ({"tolerance": 1e-20}, ValueError, r"tolerance: got 1e-20; it takes a share of the largest pressure change from 1e-13 to 0\.1\."),
        ({"tolerance": 0.0}, ValueError, r"tolerance: got 0\.0; it must be above zero\."),
        ({"history": 1e-3}, TypeError, r"history: got float; it takes flatplan\.Steps, a plan, or a function .*"),
        ({"initial": 3}, TypeError, r"initial: got int; it takes a State, as Simulation\.state gives it\."),
    ],
)
def test_inputs_are_refused_with_a_sentence(change, error, sentence):
    call = {"medium": MEDIA[0], "history": Steps(edges=[0.0, 1.0], rates=[1.0]), "times": [1.0], **change}
    with pytest.raises(error, match=f"^{sentence}$"):
        simulate(**call)


def test_a_state_of_another_medium_or_time_is_refused():
    steps = Steps(edges=[0.0, 1e4], rates=[1e-3])
    state = run(MEDIA[0], steps, [5e3]).state
    with pytest.raises(ValueError, match=r"^initial: got the state of another medium; simulate the past on this medium first\.$"):
        simulate(MEDIA[1], steps, [1e4], initial=state)
    with pytest.raises(ValueError, match=r"^times: got 4000 s, before the initial state at 5000 s; it takes times from there on\.$"):
        simulate(MEDIA[0], steps, [4e3], initial=state)


def test_records_show_what_matters():
    result = run(MEDIA[0], Steps(edges=[0.0, 1e4], rates=[1e-3]), [5e3, 1e4])
    assert "mass balance" in repr(result)
    assert "converged" in repr(result)
    assert "<table>" in result._repr_html_()

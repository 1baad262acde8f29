"""Rate histories: steps, functions of time, and the sentences about those that cannot be used."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from flatplan.numeric import Steps
from flatplan.numeric.history import AIM, panels_of

DAY = 86400.0


# --- steps -----------------------------------------------------------------------------------------


def test_steps_convert_and_hold_their_rates():
    steps = Steps(edges=["0 h", "6 h", "1 d"], rates=["2 L/s", "0.5 L/s"])
    np.testing.assert_allclose(steps.edges, [0.0, 21600.0, 86400.0])
    np.testing.assert_allclose(steps.rate([-1.0, 0.0, 21599.0, 21600.0, 86399.0, 86400.0, 1e9]), [0, 0.002, 0.002, 0.0005, 0.0005, 0, 0])
    np.testing.assert_allclose(steps.volume(["-1 h", "0 h", "3 h", "1 d", "9 d"]), [0.0, 0.0, 21.6, 75.6, 75.6], rtol=1e-14)
    assert steps.end == 86400.0
    assert "2 steps" in repr(steps)


def test_steps_are_frozen():
    steps = Steps(edges=[0.0, 1.0], rates=[1.0])
    with pytest.raises(AttributeError):
        steps.rates = np.array([2.0])
    with pytest.raises(ValueError, match="read-only"):
        steps.rates[0] = 2.0


@pytest.mark.parametrize(
    ("edges", "rates", "sentence"),
    [
        ([0.0], [], r"rates: got an empty list; it takes at least one rate\."),
        ([0.0], [1.0], r"edges: got 1 time; it takes at least two, the start and the end of the first step\."),
        ([0.0, 2.0, 2.0], [1.0, 1.0], r"edges: got 2 s followed by 2 s at position 2; it takes times that strictly increase\."),
        ([0.0, 2.0, 1.0], [1.0, 1.0], r"edges: got 2 s followed by 1 s at position 2; it takes times that strictly increase\."),
        ([0.0, 1.0, 2.0], [1.0], r"rates: got 1 for 3 edges; it takes one rate per step, 2 here\."),
        ([0.0, 1.0], [np.nan], r"rates: got nan at position 0; every rate must be finite\."),
        ([0.0, np.inf], [1.0], r"edges: got inf at position 1; every time must be finite\."),
        (["0 m", "1 m"], [1.0], r"edges\[0\]: got '0 m', which is not a time; it takes a time such as \"3 d\", or a number in s\."),
    ],
)
def test_steps_refuse_with_a_sentence(edges, rates, sentence):
    with pytest.raises(ValueError, match=f"^{sentence}$"):
        Steps(edges=edges, rates=rates)


@given(st.lists(st.floats(0.01, 1e5), min_size=1, max_size=8), st.data())
def test_steps_cut_anywhere_keep_rate_and_volume(widths, data):
    """A part of a history holds the rate of the whole, and zero where nothing was said."""
    edges = np.concatenate([[0.0], np.cumsum(widths)])
    steps = Steps(edges=edges, rates=data.draw(st.lists(st.floats(-1.0, 1.0), min_size=len(widths), max_size=len(widths))))
    low, high = sorted(data.draw(st.lists(st.floats(-edges[-1], 2.0 * edges[-1]), min_size=2, max_size=2, unique=True)))
    part = steps.panels.between(low, high)
    assert part.edges[0] == low
    assert part.edges[-1] == high
    times = np.linspace(low, high, 23)[:-1]
    np.testing.assert_array_equal(part.rate(times), steps.rate(times))
    np.testing.assert_allclose(part.volume(times), steps.volume(times) - steps.volume(low), atol=1e-9 * edges[-1])


# --- functions -------------------------------------------------------------------------------------


def bump(times):
    """Smooth, not analytic at 0 and 1 day, with all derivatives 0 there."""
    inside = (times > 0.0) & (times < DAY)
    u = np.where(inside, times / DAY, 0.5)
    return np.where(inside, 1e-3 * np.exp(4.0 - 1.0 / (u * (1.0 - u))), 0.0)


FUNCTIONS = {
    "bump": (bump, [0.0, DAY]),
    "sine": (lambda t: 2e-3 * np.sin(40.0 * t / DAY), None),
    "polynomial": (lambda t: 1e-3 * (t / DAY) ** 5 - 1e-3, None),
    "corners without knots": (lambda t: np.interp(t, [0.0, 0.31 * DAY, 0.57 * DAY, 2 * DAY], [0.0, 1e-3, -1e-3, 0.0]), None),
    "jump at a knot": (lambda t: np.where(t < 0.7 * DAY, 1e-3, 2e-4), [0.7 * DAY]),
    "constant": (lambda t: 1e-3, None),
    "square root": (lambda t: 1e-3 * np.sqrt(t / DAY), None),
}


@pytest.mark.parametrize("name", FUNCTIONS)
def test_functions_are_followed(name):
    """What pressure feels of the departure, its size times the root of its duration, is below the aim everywhere."""
    function, knots = FUNCTIONS[name]
    panels = panels_of(function, 0.0, 2 * DAY, knots)
    rng = np.random.default_rng(5)
    times = np.sort(rng.uniform(0.0, 2 * DAY, 4000))
    off = np.abs(panels.rate(times) - function(times))
    width = np.diff(panels.edges)[panels.locate(times)]
    assert np.max(off * np.sqrt(width / (2 * DAY))) <= 4.0 * AIM * panels.peak
    # and the departure that the panels own up to is the true one, within a factor
    assert off.max() <= 4.0 * panels.error + AIM * panels.peak


def test_a_rate_is_followed_to_the_volume_that_is_asked_for():
    """1e-15 of peak times span in all; where nothing is asked for, panels stay as wide as the peak allows."""
    function, knots = FUNCTIONS["bump"]
    free = panels_of(function, 0.0, 2 * DAY, knots)
    asked = 1e-15 * 2 * DAY * free.peak
    near = panels_of(function, 0.0, 2 * DAY, knots, asked)
    off = [float(p.errors @ np.diff(p.edges)) for p in (free, near)]
    assert off[0] > 4.0 * asked
    assert off[1] <= 2.0 * asked
    assert len(free.edges) < len(near.edges) < 3 * len(free.edges)
    loose = panels_of(function, 0.0, 2 * DAY, knots, 1e6 * asked)
    np.testing.assert_array_equal(loose.edges, free.edges)


def test_the_volume_of_a_function_is_exact():
    """∫ of 2e-3 sin(40 t/d) over [0, t]."""
    panels = panels_of(FUNCTIONS["sine"][0], 0.0, 2 * DAY)
    times = np.linspace(0.0, 2 * DAY, 301)
    np.testing.assert_allclose(panels.volume(times), 2e-3 * DAY / 40.0 * (1.0 - np.cos(40.0 * times / DAY)), atol=1e-11)


def test_panels_are_a_history_too():
    """Cut to another stretch they keep the rate to rounding, and what they may be off."""
    panels = panels_of(FUNCTIONS["square root"][0], 0.0, 2 * DAY)
    part = panels_of(panels, 0.0, 1.3 * DAY)
    times = np.linspace(0.0, 1.3 * DAY, 501)[:-1]
    np.testing.assert_allclose(part.rate(times), panels.rate(times), rtol=0.0, atol=1e-17)
    assert part.error == panels.error > 0.0
    assert part.peak == panels.peak


def test_noise_of_the_function_is_owned_up_to():
    rng = np.random.default_rng(2)
    panels = panels_of(lambda t: 1e-3 * (1.0 + 1e-9 * rng.standard_normal(len(t))), 0.0, DAY)
    assert 1e-13 < panels.error < 1e-11
    assert len(panels.edges) < 1000


REMEDY = r" state the times where it jumps in knots=, or use flatplan\.Steps\."


@pytest.mark.parametrize(
    ("function", "sentence"),
    [
        (lambda t: np.where(t > 0.77 * DAY, np.nan, 1.0), r"history: the rate is nan at 6\d+\.?\d* s; every rate must be finite\."),
        (lambda t: t[:3], r"history: the function gave an array of shape \(3,\) for \d+ times; it must give one rate for each\."),
        (
            lambda t: np.where(t < 0.77 * DAY, 1e-3, 0.0),
            r"history: the rate changes too sharply near 66528 s to be followed;" + REMEDY,
        ),
        (
            lambda t: np.random.default_rng(int(t[0])).random(len(t)),
            r"history: the rate changes too sharply near \S+ s to be followed;" + REMEDY,
        ),
    ],
    ids=["not a number", "wrong shape", "jump without knot", "noise"],
)
def test_functions_that_cannot_be_used(function, sentence):
    with pytest.raises(ValueError, match=f"^{sentence}$"):
        panels_of(function, 0.0, DAY)


def test_what_is_no_history():
    takes = r"flatplan\.Steps, a plan, or a function that gives rates \[m³/s\] for an array of times \[s\]"
    with pytest.raises(TypeError, match=f"^history: got float; it takes {takes}\\.$"):
        panels_of(3.0, 0.0, 1.0)

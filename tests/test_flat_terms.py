"""The series term by term: sizes, bounds and tails against exact terms in ball arithmetic, and bounds that hold for every medium."""

from __future__ import annotations

import math
from functools import cache

import ball_reference as balls
import media
import numpy as np
import pytest
from benchmarks.jobs import one_bump
from flint import arb
from show_job import composite, held, layer, plain

import flatplan as fp
from flatplan.channels import CHANNELS
from flatplan.flat import terms as terms_module
from flatplan.flat.plan import SERIES_NAME

MOVES = (
    balls.Move(0.0, 2.0e5, 1.5e6, 1.8, 0.3),
    balls.Move(1.2e5, 1.0e5, -6e5, 1.6, 1.0),  # under way together with the first
    balls.Move(2.6e5, 0.4e5, 9e5, 1.8, 0.5),  # needs more terms than the others
)


@cache
def overlapping():
    """Three moves of unlike corners, two of them under way at once, with skin and wellbore storage."""
    target = fp.Target(start="21 MPa")
    for m in MOVES:
        target = target.move(by=m.change, over=m.duration, order=m.order, easing=m.easing, at=m.start)
    return fp.feedforward(layer(well=fp.Well(storage=2e-6, resistance=4e8)), target)


@cache
def derivatives(t, highest):
    return balls.target_derivatives(list(MOVES), t, -1, highest)


PLACES = (2.0e4, 3.3e4, 1.31e5, 1.6e5, 1.78e5, 2.1e5, 2.666e5, 2.71e5, 2.93e5, 3.0e5)


def exact_terms(channel, last, t):
    """Balls of ``c_k y^(k)(t)``, k = 0 … last."""
    shift = SERIES_NAME.get(channel, (channel, 0))[1]
    c = balls.Slab.of(overlapping().medium).coefficients(channel, last)
    y = derivatives(t, last)
    with balls.precision(balls.BITS):
        return [c[k] * y[k + shift] if c[k] != 0 else arb(0) for k in range(last + 1)]


# --- against ball arithmetic -----------------------------------------------------------------------


@pytest.mark.parametrize("places", [PLACES, (1.6e5,), (1.78e5,)], ids=["many", "two moves at once", "and later"])
@pytest.mark.parametrize("channel", CHANNELS)
def test_sizes_are_those_of_the_exact_terms(channel, places, monkeypatch):
    monkeypatch.setattr(terms_module, "term_times", lambda target, orders: np.array(places))
    found = overlapping().terms(channel)
    exact = np.zeros(found.order.size)
    for t in places:
        exact = np.maximum(exact, [float(abs(ball).mid()) for ball in exact_terms(channel, int(found.order[-1]), t)])
    np.testing.assert_allclose(found.size, exact, rtol=1e-9, atol=0.0)


@pytest.mark.parametrize("channel", CHANNELS)
def test_no_exact_term_or_tail_is_above_its_bound(channel):
    found = overlapping().terms(channel)
    last, beyond = int(found.order[-1]), int(found.order[-1]) + 40
    for t in PLACES:
        exact = exact_terms(channel, beyond, t)
        with balls.precision(balls.BITS):
            rest = sum(exact[last + 1 :], arb(0))
            for k in range(last, -1, -1):
                assert not abs(rest) > arb(found.tail[k]), f"what follows term {k} at {t} s is above the tail"
                assert not abs(exact[k]) > arb(found.bound[k]), f"term {k} at {t} s is above its bound"
                rest += exact[k]


@pytest.mark.parametrize("order", (1.18, 1.25, 1.5, 1.9, 1.97))
def test_the_times_find_the_largest_derivatives(order):
    """Of one bump the largest size of term k is that of derivative k - 1 of the bump, found again by a search of its own."""
    job = one_bump(1.0, order)
    found = job.plan.terms()
    orders = [k for k in (2, 5, 10, 20, 40) if k <= found.order[-1] - 1]
    sup = balls.log_bump_suprema(job.gamma, [k - 1 for k in orders])
    log_total = math.log(float(balls.bump_integral(job.gamma).mid()))
    for k in orders:
        exact = math.log(job.factor) + sup[k - 1] - log_total + k * math.log(job.travel_time / job.duration) - math.lgamma(2.0 * k)
        assert math.log(found.size[k]) == pytest.approx(exact, abs=0.1), k  # both searches may be a little low


# --- for every medium ------------------------------------------------------------------------------


def assert_consistent(plan, channel):
    found = plan.terms(channel)
    assert found.order.tolist() == list(range(found.order.size))
    assert found.size.shape == found.bound.shape == found.tail.shape == found.order.shape
    assert np.all(found.size <= found.bound), channel
    if len(plan.target.moves) == 1:  # the bounds of two lists of orders differ a little
        np.testing.assert_allclose(found.tail[:-1], found.tail[1:] + found.bound[1:], rtol=2e-3, err_msg=channel)
    assert np.all(np.diff(found.tail) <= 0.0) and np.all(np.isfinite(found.tail)), channel
    assert found.peak == plan.certificate.peak[channel]
    # all the sizes together are no less than the channel itself
    assert found.size[: found.cut + 1].sum() >= 0.999 * found.peak
    assert found.left_out <= found.tolerance * found.peak
    if channel == "target_pressure":
        assert found.cut == found.fewest == 0 and found.left_out == 0.0
        assert found.size[0] == pytest.approx(plan.target.largest_change, rel=1e-9) and not found.size[1:].any() and not found.tail.any()
        return
    assert (found.cut, found.fewest) == (max(plan.series.terms), min(plan.series.terms))
    assert found.order[-1] >= found.cut + 8
    assert found.tail[found.cut] <= found.left_out * (1.0 + 1e-5)
    if found.fewest == found.cut:
        assert found.tail[found.cut] == pytest.approx(found.left_out, rel=1e-5)


@pytest.mark.parametrize("geometry", media.GEOMETRIES)
@pytest.mark.parametrize("face", ["sealed", "leaky and storing", "held"])
def test_bounds_hold_for_every_medium(geometry, face):
    made = media.medium(geometry, face, "skin and storage", "leaking")
    plan = fp.feedforward(made, media.job(made))
    for channel in CHANNELS:
        assert_consistent(plan, channel)


@pytest.mark.parametrize("make", [overlapping, plain, held, composite, lambda: one_bump(8.0, 1.25).plan, lambda: one_bump(2.0, 1.9).plan])
def test_bounds_hold_for_every_kind_of_plan(make):
    for channel in CHANNELS:
        assert_consistent(make(), channel)


def test_large_terms_that_cancel_are_seen():
    """X = 8: terms millions of times the peak, in a plan of more digits than a double holds."""
    plan = one_bump(8.0, 1.25).plan
    found = plan.terms()
    assert plan.certificate.digits > 16
    assert found.size.max() > 1e6 * found.peak
    assert found.cancellation == plan.certificate.cancellation["injection_rate"]
    assert 10 < int(np.argmax(found.size)) < found.cut
    assert found.size[found.cut] < found.tolerance * found.peak


def test_moves_that_need_fewer_terms_are_told_apart():
    found = overlapping().terms()
    assert found.fewest < found.cut
    assert found.tail[found.cut] < found.left_out < found.tail[found.fewest]


def test_moves_under_way_at_once_add_up():
    """Two like moves an hour apart are nearly one of twice the height; a day later they are two of one height."""
    made = layer()
    target = fp.Target(start="21 MPa").move(by="1 MPa", over="20 h")
    one, at_once, apart = (
        fp.feedforward(made, t).terms("bottomhole_pressure")
        for t in (target, target.move(by="1 MPa", over="20 h", at="1 h"), target.move(by="1 MPa", over="20 h", at="24 h"))
    )
    few = slice(1, one.cut)
    np.testing.assert_allclose(at_once.bound[few], 2.0 * one.bound[few], rtol=2e-3)
    np.testing.assert_allclose(at_once.tail[few], 2.0 * one.tail[few], rtol=2e-3)
    np.testing.assert_allclose(apart.bound[few], one.bound[few], rtol=2e-3)
    np.testing.assert_allclose(apart.tail[few], one.tail[few], rtol=2e-3)
    assert apart.bound[0] == at_once.bound[0] == pytest.approx(2e6, rel=1e-6)


def test_levels_and_volumes_are_bounded_over_the_whole_plan():
    """A leaky face: the first terms go on after the moves are over."""
    medium = layer(face=fp.Face(leak=2e-10))
    rising = fp.feedforward(medium, fp.Target(start="21 MPa").move(by="1 MPa", over="2 d").hold("10 d").move(by="1 MPa", over="2 d"))
    rate, volume = rising.terms(), rising.terms("injected_volume")
    c_0 = medium.coefficients("injection_rate", 0)[0]
    assert rate.size[0] == pytest.approx(c_0 * 2e6, rel=1e-9) and rate.bound[0] == pytest.approx(c_0 * 2e6, rel=1e-6)
    # half of each move counts, and the hold between them in full
    assert volume.size[0] == pytest.approx(c_0 * 1e6 * 86400.0 * (1 + 10 + 3), rel=1e-9)
    assert volume.bound[0] == pytest.approx(c_0 * 1e6 * 86400.0 * (2 + 10 + 4), rel=1e-6)
    back = fp.feedforward(medium, fp.Target(start="21 MPa").move(by="1 MPa", over="2 d").move(by="-3 MPa", over="2 d", at="1 d"))
    assert back.terms().bound[0] == pytest.approx(c_0 * 3e6, rel=1e-6)


# --- as text ---------------------------------------------------------------------------------------


def test_text_form():
    found = plain().terms()
    rows = dict(found._rows())
    assert repr(found).startswith("Terms of the injection rate\n")
    assert rows["terms used"] == f"0 to {found.cut}"
    assert rows["largest term"].endswith("k = 1") and rows["peak"] == "2.858 m³/h"
    assert rows["left out"] == f"at most {found.left_out / found.peak:.1e} of the peak (tolerance 1.0e-09)"
    assert f"fewer in some moves (0 to {overlapping().terms().fewest})" in repr(overlapping().terms())
    assert repr(held().terms("target_pressure")).startswith("Terms of the rate through the target face\n")
    assert "<table>" in found._repr_html_()


def test_unknown_channels_are_refused():
    with pytest.raises(ValueError, match="^channel: got 'rate'; it takes one of 'injection_rate', 'sandface_rate', "):
        plain().terms("rate")
    with pytest.raises(ValueError, match="^channel: got 3; it takes one of"):
        plain().terms(3)

"""Order 2: below the threshold and above it; and requests whose series cannot be held, with what would do."""

from __future__ import annotations

import re

import ball_reference as balls
import numpy as np
import pytest

import flatplan as fp

ROCK = fp.Rock(permeability="40 mD", porosity=0.12, compressibility="5e-10 1/Pa")
WATER = fp.Fluid(viscosity="0.5 cP", compressibility="4.5e-10 1/Pa")


def slab(**rest):
    return fp.slab(length="140 m", area="6000 m^2", rock=ROCK, fluid=WATER, **rest)


def moved(medium, x, order, easing=1.0):
    return fp.Target(start=0.0).move(by=1e6, over=medium.travel_time / x / easing, order=order, easing=easing)


@pytest.mark.parametrize(("x", "easing"), [(0.4, 1.0), (1.0, 0.3), (1.6, 1.0)])
def test_order_two_below_its_threshold_agrees_with_balls(x, easing):
    """The series converges while X < 2 ([LarocheMartinRouchon2000]: radius 2√R); far below it few terms do."""
    medium = slab()
    target = moved(medium, x, 2.0, easing)
    plan = fp.feedforward(medium, target)
    assert plan.certificate.met and plan.certificate.share_of_threshold == pytest.approx(x / 2.0)
    assert "below 2 eased corners" in str(plan.certificate)
    (move,) = target.moves
    as_ball = [balls.Move(move.start, move.duration, move.change, move.order, move.easing)]
    reference = balls.Slab.of(medium)
    allowed = plan.certificate.tail["injection_rate"] + plan.certificate.rounding["injection_rate"]
    for t in np.array([0.2, 0.5, 0.7]) * easing * target.end:
        ball = reference.evaluate(["injection_rate"], as_ball, float(t), plan.certificate.terms + 150)["injection_rate"]
        assert balls.distance(float(plan.rate([t])[0]), ball) <= allowed
    assert fp.confirm(plan).confirmed


@pytest.mark.parametrize("x", [2.0, 2.5, 16.0])
def test_order_two_past_its_threshold_is_refused_with_the_threshold(x):
    medium = slab()
    sentence = r"^target: at order 2 the series converges only while .* below 2 eased corners, .* or an order below"
    with pytest.raises(ValueError, match=sentence):
        fp.feedforward(medium, moved(medium, x, 2.0))


def test_an_eased_ramp_counts_by_its_corner():
    """X of the duration is 1, but the corners are a fifth of it."""
    medium = slab()
    target = fp.Target(start=0.0).move(by=1e6, over=medium.travel_time, order=2.0, easing=0.2)
    with pytest.raises(ValueError, match="and here it is 5 of them"):
        fp.feedforward(medium, target)


def test_above_two_is_refused_with_the_reason():
    with pytest.raises(ValueError, match=r"^order: got 2\.01; .* the series diverges for every medium and duration\.$"):
        fp.Target(start=0.0).move(by=1e6, over=1e5, order=2.01)


@pytest.mark.parametrize(("x", "order"), [(16.0, 1.9), (3.0, 1.98), (1.95, 2.0)])
def test_what_needs_too_many_terms_says_what_would_do_and_that_does(x, order):
    medium = slab()
    with pytest.raises(ValueError, match=r"^target: at order .* the series needs more than 648 terms; a duration of ") as refused:
        fp.feedforward(medium, moved(medium, x, order))
    duration = re.search(r"a duration of ([\d.e-]+ \w+) or more", str(refused.value)).group(1)
    made = fp.feedforward(medium, fp.Target(start=0.0).move(by=1e6, over=duration, order=order))
    assert made.certificate.met
    lower = float(re.search(r"an order of ([\d.]+) or", str(refused.value)).group(1))
    assert lower < order
    if x < 16.0:  # at X = 16 hundreds of terms in many digits take a while
        assert fp.feedforward(medium, moved(medium, x, lower)).certificate.terms <= 648


@pytest.mark.parametrize("order", [1.2, 1.5, 1.8, 1.98])
@pytest.mark.parametrize("x", [0.01, 0.5, 1.5])
def test_orders_from_1_2_to_1_98_work(x, order):
    medium = slab()
    plan = fp.feedforward(medium, moved(medium, x, order))
    assert plan.certificate.met
    assert fp.confirm(plan).confirmed or plan.certificate.target_rounding > 1e-7 * plan.certificate.peak["target_pressure"]


def test_a_move_too_fast_for_a_rate_in_doubles_says_so():
    """X = 4 at order 1.2: the rate swings to 1e9 times its mean, and its own rounding moves the target."""
    medium = slab()
    certificate = fp.feedforward(medium, moved(medium, 4.0, 1.2)).certificate
    assert certificate.met  # every channel is within the tolerance of its own peak
    assert certificate.target_rounding > 1e-6 * certificate.peak["target_pressure"]
    assert "its own rounding may move the target by up to" in str(certificate)
    calm = fp.feedforward(medium, moved(medium, 0.5, 1.8)).certificate
    assert calm.target_rounding < 1e-9 * calm.peak["target_pressure"]
    assert "its own rounding" not in str(calm)

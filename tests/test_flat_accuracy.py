"""Plans against ball arithmetic: every channel within 1e-9 of its peak, and never farther off than the certificate says.

Reference: `ball_reference` (python-flint), summed well past the terms of the plan. Random places carry the seed of
the test; hypothesis runs derandomised (conftest.py).
"""

from __future__ import annotations

import math

import ball_reference as balls
import numpy as np
import pytest
from flint import arb
from hypothesis import given, settings
from hypothesis import strategies as st

import flatplan as fp
from flatplan.site.medium import Medium
from flatplan.site.segment import Segment

CHANNELS = ("injection_rate", "sandface_rate", "bottomhole_pressure", "sandface_pressure", "injected_volume")
ROCK = fp.Rock(permeability="40 mD", porosity=0.12, compressibility="5e-10 1/Pa")
WATER = fp.Fluid(viscosity="0.5 cP", compressibility="4.5e-10 1/Pa")
OPEN, STORED = fp.Well(), fp.Well(storage=2e-7, resistance=3e8)


def slab(**rest):
    return fp.slab(length="140 m", area="6000 m^2", rock=ROCK, fluid=WATER, **rest)


def moves_of(target):
    return [balls.Move(m.start, m.duration, m.change, m.order, m.easing) for m in target.moves]


def places(target, per_corner, seed):
    """Random times where the corners are alive, and two anywhere."""
    rng = np.random.default_rng(seed)
    parts = [rng.uniform(0.0, target.end, 2)]
    for rise in target.rises:
        live = 0.5 - math.sqrt(0.25 - (4.0**rise.gamma + 60.0) ** (-1.0 / rise.gamma))
        for start, _ in rise.corners:
            parts.append(start + rise.width * rng.uniform(live, 1.0 - live, per_corner))
    return np.sort(np.concatenate(parts))


def distances(plan, times, *, derivative=0, channels=CHANNELS):
    """Largest distance from the reference in each channel, as a share of the channel's peak."""
    reference = balls.Slab.of(plan.medium)
    moves, terms = moves_of(plan.target), int(1.4 * plan.certificate.terms) + 8
    exact = [reference.evaluate(channels, moves, float(t), terms, derivative) for t in times]
    out = {}
    for channel in channels:
        got = plan.evaluate(channel, times, derivative)
        out[channel] = max(balls.distance(value, e[channel]) for value, e in zip(got, exact, strict=True))
    return out


def assert_as_certified(plan, times, allowed=1e-9):
    certificate = plan.certificate
    assert certificate.met
    for channel, distance in distances(plan, times).items():
        assert distance <= certificate.tail[channel] + certificate.rounding[channel], f"{channel}: farther off than certified"
        assert distance <= allowed * certificate.peak[channel], f"{channel}: {distance / certificate.peak[channel]} of the peak"


# --- slabs -------------------------------------------------------------------------------------

JOBS = [
    (x, order, easing, "stored" if i % 2 else "open")
    for i, (x, easing, order) in enumerate(
        (x, easing, order)
        for x in (0.01, 0.1, 0.5, 1.0, 2.0)
        for easing in (1.0, 0.3)
        for order in (1.25, 1.5, 1.8, 1.95)
        if x / easing <= 4.0
    )
]


@pytest.mark.parametrize(("x", "order", "easing", "well"), [job for job in JOBS if (job[0], job[1], job[2]) != (1.0, 1.95, 0.3)])
def test_every_channel_is_within_1e_9_of_its_peak(x, order, easing, well):
    """X = t_D / duration from 0.01 to 2, orders 1.25 to 1.95, one bump and eased ramps."""
    medium = slab(well=STORED if well == "stored" else OPEN)
    target = fp.Target(start="21 MPa").move(to="22.5 MPa", over=medium.travel_time / x, order=order, easing=easing)
    assert_as_certified(fp.feedforward(medium, target), places(target, 4, seed=1))


def test_the_one_job_of_that_range_whose_terms_do_not_fall_is_refused():
    """X = 1, easing 0.3, order 1.95: X/(4ρ) times k^-0.05 is below 1 only after some 40,000 terms."""
    medium = slab()
    target = fp.Target(start=0.0).move(by=1e6, over=medium.travel_time, order=1.95, easing=0.3)
    with pytest.raises(
        ValueError,
        match=r"target: at order 1.95 and an eased corner of .* \(travel time over corner 3.33\) the series needs more than \d+ terms",
    ):
        fp.feedforward(medium, target)


@pytest.mark.parametrize(
    ("x", "order", "easing", "digits"),
    [(4.0, 1.5, 1.0, 16), (8.0, 1.5, 1.0, 16), (16.0, 1.5, 1.0, 20), (4.0, 1.2, 1.0, 20), (2.0, 1.2, 0.2, 20), (16.0, 1.25, 1.0, 20)],
)
def test_hard_jobs_take_more_digits_and_keep_the_accuracy(x, order, easing, digits):
    """Terms up to 1e15 times their sum: beyond double precision, in integers scaled by powers of two."""
    medium = slab(well=STORED)
    target = fp.Target(start="21 MPa").move(to="22.5 MPa", over=medium.travel_time / x, order=order, easing=easing)
    plan = fp.feedforward(medium, target)
    assert plan.certificate.digits >= digits
    assert_as_certified(plan, places(target, 4, seed=2))


def test_peaks_below_the_rounding_of_double_precision_are_seen_in_more_digits():
    """Terms 1e18 times their sum: in double precision the grid shows 40 times the peak, all of it rounding."""
    medium = slab()
    target = fp.Target(start=0.0).move(by=1e6, over=medium.travel_time / 4.0, order=1.2, easing=0.3)
    plan = fp.feedforward(medium, target)
    rise = target.rises[0]
    times = rise.width * np.linspace(0.35, 0.65, 601)
    for channel in CHANNELS:
        largest = np.max(np.abs(plan.evaluate(channel, times)))
        assert 0.3 * largest <= plan.certificate.peak[channel] <= 1.2 * largest, channel
    assert plan.certificate.cancellation["injection_rate"] > 1e17
    assert_as_certified(plan, times[::10])


@given(
    order=st.floats(1.2, 1.96),
    easing=st.one_of(st.just(1.0), st.floats(0.02, 0.99)),
    slowness=st.floats(-0.3, 2.0),
    storage=st.sampled_from([0.0, 1e-8, 2e-7, 5e-6]),
    resistance=st.sampled_from([0.0, 1e7, 3e8]),
    at=st.sampled_from([0.0, 1e5, 3.3e7, 1e9]),
    seed=st.integers(0, 2**16),
)
@settings(max_examples=20)
def test_no_plan_is_farther_off_than_its_certificate_says(order, easing, slowness, storage, resistance, at, seed):
    """Order, easing, travel time over corner (0.01 to 2), well and start at random."""
    medium = slab(well=fp.Well(storage=storage, resistance=resistance))
    width = medium.travel_time * 10.0**slowness
    target = fp.Target(start=0.0).move(by=-4e5, over=width / easing, order=order, easing=easing, at=at)
    plan = fp.feedforward(medium, target)
    times = places(target, 3, seed)
    assert_as_certified(plan, times[times >= at])


@given(
    order=st.floats(1.2, 1.96),
    easing=st.one_of(st.just(1.0), st.floats(0.02, 0.999)),
    slowness=st.floats(-0.3, 2.0),
    seed=st.integers(0, 2**16),
)
@settings(max_examples=12)
def test_rounding_alone_stays_within_its_estimate(order, easing, slowness, seed):
    """The reference is cut where the plan is cut: what is left is rounding."""
    medium = slab(well=STORED)
    width = medium.travel_time * 10.0**slowness
    target = fp.Target(start=0.0).move(by=1e6, over=width / easing, order=order, easing=easing)
    plan = fp.feedforward(medium, target)
    reference = balls.Slab.of(medium)
    times = places(target, 3, seed)
    exact = [reference.evaluate(CHANNELS, moves_of(target), float(t), plan.certificate.terms) for t in times]
    for channel in CHANNELS:
        for value, e in zip(plan.evaluate(channel, times), exact, strict=True):
            assert balls.distance(value, e[channel]) <= plan.certificate.rounding[channel], channel


@pytest.mark.parametrize("easing", (0.9, 0.97, 0.99, 0.999))
def test_a_ramp_much_shorter_than_its_bump_is_as_certified(easing):
    """A difference of two nearly equal bumps: what is lost is in the estimate."""
    medium = slab(well=STORED)
    target = fp.Target(start="21 MPa").move(to="22.5 MPa", over=30.0 * medium.travel_time, order=1.8, easing=easing)
    plan = fp.feedforward(medium, target)
    assert_as_certified(plan, np.concatenate([places(target, 8, seed=9), np.linspace(0.3, 0.7, 9) * target.end]))


@pytest.mark.parametrize("tolerance", (1e-3, 1e-6, 1e-12))
def test_the_tolerance_asked_for_is_the_one_met(tolerance):
    medium = slab(well=STORED)
    target = fp.Target(start=0.0).move(by=1e6, over=medium.travel_time, order=1.7, easing=0.6)
    plan = fp.feedforward(medium, target, tolerance=tolerance)
    assert_as_certified(plan, places(target, 5, seed=3), allowed=tolerance)
    assert plan.certificate.terms <= fp.feedforward(medium, target, tolerance=0.1 * tolerance).certificate.terms


def test_several_overlapping_moves_of_different_orders():
    medium = slab(well=STORED)
    t_d = medium.travel_time
    target = (
        fp.Target(start="21 MPa")
        .move(to="22.5 MPa", over=2.0 * t_d, order=1.8, easing=0.6)
        .hold(0.5 * t_d)
        .move(to="20 MPa", over=3.0 * t_d, order=1.5)
        .move(by="0.4 MPa", over=t_d, order=1.3, at=1.0 * t_d)
        .move(by="-0.4 MPa", over=t_d, order=1.9, at=1.7 * t_d)
    )
    assert_as_certified(fp.feedforward(medium, target), places(target, 3, seed=4))


@pytest.mark.parametrize("derivative", (1, 2))
def test_time_derivatives_of_channels_agree_with_balls(derivative):
    """The plan bounds the tail of the rate's first derivative; the others are checked here to 1e-6 of their peak."""
    medium = slab(well=STORED)
    target = fp.Target(start=0.0).move(by=1e6, over=1.5 * medium.travel_time, order=1.7, easing=0.5)
    plan = fp.feedforward(medium, target)
    times = places(target, 6, seed=5)
    dense = np.linspace(0.0, target.end, 400)
    for channel, distance in distances(plan, times, derivative=derivative).items():
        peak = np.max(np.abs(plan.evaluate(channel, dense, derivative)))
        assert distance <= (1e-9 if derivative == 1 else 1e-6) * peak, channel


@pytest.mark.parametrize(("x", "order"), [(0.5, 1.8), (16.0, 1.5)])
def test_pressure_along_the_path_agrees_with_balls(x, order):
    """Double precision and the extended path alike, from the target face to the sandface."""
    medium = slab()
    target = fp.Target(start="21 MPa").move(to="22.5 MPa", over=medium.travel_time / x, order=order)
    plan = fp.feedforward(medium, target)
    times = places(target, 4, seed=6)
    reference, terms = balls.Slab.of(medium), int(1.4 * plan.certificate.terms)
    spots = np.array([0.0, 12.0, 77.7, 140.0])
    got = plan.pressure(spots, times) - 21e6
    assert got.shape == (4, times.size)
    for spot, row in zip(spots, got, strict=True):
        for t, value in zip(times, row, strict=True):
            exact = reference.evaluate(["pressure"], moves_of(target), float(t), terms, x=float(spot))["pressure"]
            # what is subtracted, 21 MPa, is rounded to 4e-9 Pa
            assert balls.distance(value, exact) <= 1e-9 * plan.certificate.peak["sandface_pressure"] + 1e-8, (spot, t)


# --- other media -------------------------------------------------------------------------------

RADIAL = (Segment(0.0, 120.0, 8e-11, 1e-10, 900.0, 0.0, 1, 200.0, -1.0), Segment(120.0, 199.9, 4e-10, 2e-10, 900.0, 1e-16, 1, 200.0, -1.0))
MEDIA = {
    "leaky slab, leaky and storing face": slab(
        leakage=3e-15, face=fp.Face(leak=2e-10, storage=3e-6), well=fp.Well(storage=1e-6, resistance=3e8)
    ),
    "held slab": slab(face=fp.Face(held=True), well=fp.Well(storage=1e-6, resistance=3e8)),
    "two radial zones": Medium("radial", RADIAL, face=fp.Face(leak=1e-10), well=fp.Well(storage=1e-6), well_resistance=1e8),
    "sphere": Medium("spherical", (Segment(0.0, 60.0, 2e-11, 1e-10, 12.0, 0.0, 2, 2.0, 1.0),), well=STORED, well_resistance=3e8),
}


@pytest.mark.parametrize("name", MEDIA)
def test_plans_of_other_media_are_as_certified(name):
    """Coefficients by Cauchy's integral of the Laplace-domain field, derivatives of the move in ball arithmetic."""
    medium = MEDIA[name]
    start = "0 L/s" if medium.face.held else 0.0
    change = 1e-3 if medium.face.held else 1e6
    target = fp.Target(start=start).move(by=change, over=2.0 * medium.travel_time, order=1.7, easing=0.7)
    plan = fp.feedforward(medium, target)
    certificate = plan.certificate
    assert certificate.met
    terms = certificate.terms + 14
    exact = balls.path_taylor(medium, terms, bits=700, scaled=False)
    (move,) = moves_of(target)
    times = places(target, 6, seed=7)
    ys = [balls.move_derivatives(move, float(t), -1, terms) for t in times]
    for channel in CHANNELS:
        name_of, shift = ("injection_rate", -1) if channel == "injected_volume" else (channel, 0)
        got = plan.evaluate(channel, times)
        for value, y in zip(got, ys, strict=True):
            with balls.precision(balls.BITS):
                ball = sum((exact[name_of][k] * y[k + shift] for k in range(terms + 1)), arb(0))
            distance = balls.distance(value, ball)
            assert distance <= certificate.tail[channel] + certificate.rounding[channel], channel
            assert distance <= 1e-9 * certificate.peak[channel], channel

"""Plans of media of every kind: each channel within 1e-9 of its peak, and never farther off than the certificate says.

Reference: coefficients from `series_reference` (power series of the Laplace-domain functions, zone by zone) times the derivatives of the
target from `ball_reference`; both in ball arithmetic, sharing nothing with the package, summed well past the terms of the plan.
"""

from __future__ import annotations

import ball_reference as balls
import media
import numpy as np
import pytest
import series_reference as series
from flint import arb

import flatplan as fp

CHANNELS = ("injection_rate", "sandface_rate", "bottomhole_pressure", "sandface_pressure", "injected_volume")
MEDIA = {
    "radial inward, skin and storage": media.medium("radial inward", well="skin and storage"),
    "spherical, storing face": media.medium("spherical", "storing", "skin and storage"),
    "zones, leakage": media.medium("zoned linear", "sealed", "storage", "leaking"),
    "radial zones, leaking face": media.medium("zoned radial", "leaky and storing", "skin and storage", "leaking"),
    "radial outward, held": media.medium("radial outward", "held", "negative skin", "leaking"),
}
# X = travel time over duration, easing, order
JOBS = [
    *((0.01, 1.0, 1.8), (0.01, 0.5, 1.5), (0.1, 1.0, 1.9), (0.1, 0.5, 1.7)),
    *((1.0, 1.0, 1.8), (1.0, 0.5, 1.6), (2.0, 1.0, 1.7), (2.0, 0.5, 1.6)),
]


@pytest.mark.parametrize("name", MEDIA)
@pytest.mark.parametrize(("x", "easing", "order"), JOBS)
def test_every_channel_is_within_1e_9_of_its_peak(name, x, easing, order):
    medium = MEDIA[name]
    held = medium.face.held
    duration = medium.travel_time / x
    target = fp.Target(start="0 L/s" if held else "21 MPa").move(by=1e-3 if held else 1.5e6, over=duration, order=order, easing=easing)
    plan = fp.feedforward(medium, target)
    certificate = plan.certificate
    assert certificate.met
    terms = int(1.3 * certificate.terms) + 8
    exact = series.coefficients(medium, terms, scaled=False)
    (m,) = target.moves
    move = balls.Move(m.start, m.duration, m.change, m.order, m.easing)
    width = easing * duration
    times = np.array([0.31 * width, 0.47 * width, duration - 0.22 * width])
    ys = [balls.move_derivatives(move, float(t), -1, terms) for t in times]
    for channel in CHANNELS:
        series_of, shift = ("injection_rate", -1) if channel == "injected_volume" else (channel, 0)
        for value, y in zip(plan.evaluate(channel, times), ys, strict=True):
            with balls.precision(balls.BITS):
                ball = sum((c * y[k + shift] for k, c in enumerate(exact[series_of])), arb(0))
            distance = balls.distance(value, ball)
            assert distance <= certificate.tail[channel] + certificate.rounding[channel], f"{channel}: farther off than certified"
            assert distance <= 1e-9 * certificate.peak[channel], f"{channel}: {distance / certificate.peak[channel]} of the peak"


def test_pressure_along_the_path():
    medium = MEDIA["radial zones, leaking face"]
    target = fp.Target(start=0.0).move(by=1e6, over=2.0 * medium.travel_time, order=1.7, easing=0.6)
    plan = fp.feedforward(medium, target)
    terms = int(1.3 * plan.certificate.terms) + 8
    (m,) = target.moves
    move = balls.Move(m.start, m.duration, m.change, m.order, m.easing)
    times = np.array([0.2, 0.55, 0.8]) * target.end
    ys = [balls.move_derivatives(move, float(t), 0, terms) for t in times]
    spots = np.array([1.0, 90.0, 120.0, 149.0, medium.length])
    for spot, row in zip(spots, plan.pressure(spots, times), strict=True):
        exact = series.coefficients(medium, terms, scaled=False, x=float(spot))["sandface_pressure"]
        for value, y in zip(row, ys, strict=True):
            with balls.precision(balls.BITS):
                ball = sum((c * y[k] for k, c in enumerate(exact)), arb(0))
            assert balls.distance(value, ball) <= 1e-9 * plan.certificate.peak["sandface_pressure"], spot

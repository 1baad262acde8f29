"""The whole model against the Laplace-domain solution, inverted numerically: wells, faces, leakage, zones, every flow."""

from __future__ import annotations

import numpy as np
import pytest
from helpers_numeric import linear, round_medium, unit_rate_answers

from flatplan.numeric import Steps, run
from flatplan.site import Face, Well

CAPACITY_SLAB = 140.0 * 6000.0 * 1.1e-10  # m³/Pa
MEDIA = {
    "slab": linear(),
    "slab, wellbore storage": linear(well=Well(storage=0.05 * CAPACITY_SLAB)),
    "slab, storage and skin": linear(well=Well(storage=0.05 * CAPACITY_SLAB), resistance=1e8),
    "slab, storage and a thin skin": linear(well=Well(storage=0.05 * CAPACITY_SLAB), resistance=1.0),
    "slab, negative skin": linear(resistance=-2e7),
    "slab, leaking and storing face": linear(face=Face(leak=3e-9, storage=0.3 * CAPACITY_SLAB)),
    "slab, held": linear(face=Face(held=True)),
    "slab, strong leakage": linear(((140.0, 1.0, 1.0, 5e-13),)),
    "two zones, contrast 1e4": linear(((60.0, 1e-2, 1.0, 0.0), (80.0, 1e2, 1.0, 0.0))),
    "three zones, leaky middle": linear(
        ((30.0, 1.0, 2.0, 0.0), (50.0, 0.03, 1.0, 4e-15), (60.0, 10.0, 0.5, 0.0)), well=Well(storage=1e-6), resistance=3e7
    ),
    "radial, well inside": round_medium("radial", (300.0, 0.1), well=Well(storage=2e-7), resistance=5e8),
    "radial, ratio 1e4": round_medium("radial", (1000.0, 0.1), face=Face(storage=1e-3)),
    "radial, well outside": round_medium("radial", (0.5, 200.0), face=Face(leak=1e-10)),
    "radial, damaged zone, leaky": round_medium(
        "radial", (150.0, 2.0, 0.1), ((1.0, 1.0, 1e-14), (0.01, 1.0, 0.0)), well=Well(storage=1e-7)
    ),
    "radial, held, two zones": round_medium("radial", (150.0, 20.0, 0.1), ((0.1, 1.0, 0.0), (3.0, 2.0, 0.0)), face=Face(held=True)),
    "spherical, well inside": round_medium("spherical", (90.0, 0.5), well=Well(storage=1e-7), resistance=1e8),
    "spherical, well outside, leaky": round_medium(
        "spherical", (0.2, 5.0, 60.0), ((1.0, 1.0, 0.0), (1e-2, 10.0, 1e-15)), face=Face(storage=1e-6)
    ),
}
CHANNELS = ("target_pressure", "sandface_pressure", "bottomhole_pressure", "sandface_rate")


@pytest.mark.parametrize("name", MEDIA)
def test_constant_rate(name):
    """A constant rate from rest, at times from 1e-3 to 30 travel times; errors over the largest value of the channel."""
    medium = MEDIA[name]
    times = np.array([1e-3, 0.03, 0.2, 1.0, 30.0]) * medium.travel_time
    result = run(medium, Steps(edges=[0.0, 1e3 * medium.travel_time], rates=[1e-3]), times)
    assert result.converged
    assert result.mass_balance < 1e-12
    answers = [unit_rate_answers(medium, t) for t in times]
    answers[0]["target_pressure"] = 0.0  # before the front arrives it is below 1e-40, and an inversion has no digits left there
    for channel in CHANNELS:
        exact = np.array([answer[channel] for answer in answers])
        computed = getattr(result.channels, channel) / 1e-3
        largest = np.max(np.abs(exact))
        assert np.max(np.abs(computed - exact)) <= 2e-9 * largest, channel
        if channel != "sandface_rate":
            # the model's own estimate is no promise, but it is not blind
            assert np.max(np.abs(computed - exact)) <= 10.0 * result.errors[channel] / 1e-3 + 1e-11 * largest, channel


def test_steps_are_sums_of_constant_rates():
    """Superposition of the Laplace-domain answer, for a rate that changes four times."""
    medium = MEDIA["radial, well inside"]
    edges = np.array([0.0, 0.11, 0.5, 0.73, 1.4]) * medium.travel_time
    rates = np.array([1e-3, -5e-4, 2e-3, 3e-4])
    time = 1.9 * medium.travel_time
    answers = [unit_rate_answers(medium, time - t) for t in edges]
    out = run(medium, Steps(edges=edges, rates=rates), [time]).channels
    for channel in CHANNELS[:3]:
        exact = np.diff([0.0, *rates, 0.0]) @ [answer[channel] for answer in answers]
        assert getattr(out, channel)[0] == pytest.approx(exact, rel=1e-9), channel

"""What an error of the rate can do to the target: bounds against the modes of the independent model, and the plan's own claim."""

from __future__ import annotations

import math

import media
import numpy as np
import pytest

import flatplan as fp
from flatplan.flat.answer import TargetAnswer
from flatplan.numeric.simulation import run


@pytest.mark.parametrize("geometry", ["slab", "radial inward", "radial outward", "zoned linear", "spherical"])
@pytest.mark.parametrize("face", list(media.FACES))
def test_no_answer_of_the_model_is_above_the_bounds(geometry, face):
    """Random piecewise-constant rate errors: the target moves by no more than max|δQ|/c_0 and than its volume allows."""
    medium = media.medium(geometry, face)
    answer = TargetAnswer.of(medium)
    rng = np.random.default_rng(7)
    t_d = medium.travel_time
    edges = np.concatenate([[0.0], np.cumsum(rng.uniform(0.05, 0.4, 12))]) * t_d
    times = np.linspace(0.0, edges[-1] + t_d, 400)
    for _ in range(3):
        rates = rng.uniform(-1.0, 1.0, 12) * 1e-4
        found = run(medium, fp.Steps(edges=edges, rates=rates), times)
        moved = float(np.abs(found.channels.target_pressure).max())
        volume = float(np.abs(np.concatenate([[0.0], np.cumsum(rates * np.diff(edges))])).max())
        through = float(np.abs(rates * np.diff(edges)).sum())
        assert moved <= 1.0001 * answer.by_rate * np.abs(rates).max()
        assert moved <= 1.0001 * answer.by_volume * volume
        assert moved <= 1.0001 * answer.impulse * through


def test_a_sealed_medium_answers_volume_with_one_over_its_storage():
    medium = media.medium("slab", "sealed")
    answer = TargetAnswer.of(medium)
    store = sum(float(s.storage(s.start)) * s.length for s in medium.segments)
    assert answer.by_rate == math.inf
    assert answer.by_volume == pytest.approx(1.0 / store, rel=1e-12)


@pytest.mark.parametrize(("x", "order"), [(0.5, 1.8), (2.0, 1.6)])
def test_the_cut_rate_moves_the_target_by_no_more_than_is_claimed(x, order):
    """A loose tolerance, so that the cut can be seen on the independent model."""
    medium = media.medium("slab", "sealed")
    target = fp.Target(start=0.0).move(by=1e6, over=medium.travel_time / x, order=order)
    plan = fp.feedforward(medium, target, tolerance=1e-2)
    check = fp.confirm(plan, allowed=0.5)
    claimed = plan.certificate.tail["target_pressure"]
    assert check.target_error <= claimed + check.grid_error + 1e-9 * check.target_change
    assert claimed <= 1e-2 * check.target_change

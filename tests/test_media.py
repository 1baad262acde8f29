"""Every combination of geometry, face, well and leakage: from plan to confirmation."""

from __future__ import annotations

import numpy as np
import pytest
from media import COMBINATIONS, GEOMETRIES, job, medium

import flatplan as fp


@pytest.mark.parametrize(("geometry", "face", "well", "leakage"), COMBINATIONS, ids=lambda v: v)
def test_a_plan_is_confirmed_by_the_independent_model(geometry, face, well, leakage):
    """The series and the discretised model share nothing but the medium; they meet within 1e-6 of the change."""
    made = medium(geometry, face, well, leakage)
    target = job(made)
    plan = fp.feedforward(made, target)
    assert plan.certificate.met
    check = fp.confirm(plan)
    assert check.confirmed
    assert check.target_error <= 1e-6 * target.largest_change
    assert check.grid_error <= 1e-6 * target.largest_change
    assert check.mass_balance <= 1e-10
    # at rest before and settled after: the end is the equilibrium of the last level
    settled = made.equilibrium(target.level - target.start)
    at_end = plan.at([plan.end])
    peak = plan.certificate.peak
    assert at_end.injection_rate[0] == pytest.approx(settled.rate, abs=1e-9 * peak["injection_rate"])
    pressure_start = 0.0 if made.face.held else target.start
    assert at_end.bottomhole_pressure[0] - pressure_start == pytest.approx(
        settled.bottomhole_change, abs=1e-9 * peak["bottomhole_pressure"]
    )


@pytest.mark.parametrize("geometry", GEOMETRIES)
@pytest.mark.parametrize("leakage", ["tight", "leaking"])
def test_every_channel_of_the_plan_meets_the_simulation(geometry, leakage):
    """All channels, a well with skin and storage and a leaky face, at 200 times."""
    made = medium(geometry, "leaky and storing", "skin and storage", leakage)
    plan = fp.feedforward(made, job(made))
    times = np.linspace(0.0, plan.end, 201)
    ours = plan.at(times)
    theirs = fp.simulate(made, plan.rate, times, start=plan.target.start, knots=plan.knots)
    for name in ("sandface_rate", "bottomhole_pressure", "sandface_pressure", "target_pressure", "injected_volume"):
        scale = plan.certificate.peak[name]
        assert np.max(np.abs(getattr(ours, name) - getattr(theirs, name))) <= 1e-7 * scale, name

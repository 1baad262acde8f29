"""confirm: it finds the errors that are planted, and nothing where there is none."""

from __future__ import annotations

from dataclasses import dataclass, replace
from types import SimpleNamespace

import numpy as np
import pytest
from helpers_numeric import linear, round_medium

import flatplan as fp
from flatplan.numeric import Check, Steps, confirm, run, simulation
from flatplan.site import Face, Well

START = 21e6


@dataclass
class StandIn:
    """What `confirm` asks of a target: here the answer of the model itself to a known rate, plus a planted error."""

    medium: object
    end: float
    planted: object = staticmethod(lambda t: 0.0 * t)
    start: float = START

    def rate(self, times):
        """Smooth, from rest to a settled rate of 0."""
        u = np.clip(times / self.end, 1e-9, 1.0 - 1e-9)
        bump = np.exp(8.0 - 2.0 / (u * (1.0 - u)))
        return np.where((times > 0.0) & (times < self.end), 2e-3 * bump, 0.0)

    def pressure(self, times):
        times = np.asarray(times, dtype=float)
        return run(self.medium, self.rate, times, self.start, tolerance=1e-11, knots=[self.end]).channels.target_pressure + self.planted(
            times
        )

    @property
    def largest_change(self):
        times = np.linspace(0.0, 2.0 * self.end, 400)
        return float(np.max(np.abs(self.pressure(times) - self.start)))


def stand_in(medium, factor=1.0, **rest):
    target = StandIn(medium, 2.0 * medium.travel_time, **rest)
    return SimpleNamespace(
        medium=medium, target=target, end=target.end, knots=np.array([0.0, target.end]), rate=lambda t: factor * target.rate(np.asarray(t))
    )


@pytest.mark.parametrize(
    "medium", [linear(), round_medium("radial", (100.0, 0.1), well=Well(storage=1e-7), resistance=1e8, face=Face(leak=1e-10))]
)
def test_nothing_is_found_where_there_is_nothing(medium):
    check = confirm(stand_in(medium))
    assert check.confirmed
    assert check.subject == "plan"
    assert check.target_error <= 1e-9 * check.target_change
    assert check.settling_error <= 1e-9 * check.target_change
    assert check.grid_error <= 1e-8 * check.target_change
    assert check.other_error <= 1e-8
    assert check.mass_balance <= 1e-12
    assert check.modes > 30
    times = check.channels.times
    assert len(times) >= 1500
    assert times[0] == 0.0
    assert times[-1] >= 2.0 * medium.travel_time + min(medium.travel_time, 2.0 * medium.travel_time) * 0.999
    assert check.wanted.shape == times.shape
    assert "confirmed" in repr(check)
    assert "not confirmed" not in repr(check)


def test_a_target_that_is_missed_somewhere_is_found():
    """A dent of 300 Pa and 0.1 t_D around 1.3 t_D."""
    medium = linear()
    t_d = medium.travel_time
    check = confirm(stand_in(medium, planted=lambda t: 300.0 * np.exp(-(((t / t_d - 1.3) / 0.05) ** 2))))
    assert check.target_error == pytest.approx(300.0, rel=1e-3)
    assert check.when == pytest.approx(1.3 * t_d, rel=2e-3)
    assert check.settling_error < 1.0
    assert not check.confirmed
    assert "not confirmed" in repr(check)
    loose = confirm(stand_in(medium, planted=lambda t: 300.0 * np.exp(-(((t / t_d - 1.3) / 0.05) ** 2))), allowed=0.1)
    assert loose.confirmed


def test_a_rate_that_is_off_is_found():
    """One per mille too much: everything is off by one per mille, the end too."""
    check = confirm(stand_in(linear(), factor=1.001))
    assert check.target_error == pytest.approx(1e-3 * check.target_change, rel=1e-6)
    assert check.settling_error == pytest.approx(check.target_error, rel=0.02)
    assert not check.confirmed


def test_the_times_compared_can_be_chosen():
    check = confirm(stand_in(linear()), times=["1 h", "2 h", "5 h"])
    np.testing.assert_allclose(check.channels.times, [3600.0, 7200.0, 18000.0])


def test_each_condition_counts():
    check = confirm(stand_in(linear()))
    assert check.confirmed
    change = check.target_change
    for broken in ({"target_error": 1.1e-6 * change}, {"mass_balance": 1.1e-9}, {"grid_error": 1.1e-7 * change}, {"other_error": 1.1e-7}):
        assert not replace(check, **broken).confirmed, broken
    for bearable in ({"target_error": 0.9e-6 * change}, {"mass_balance": 0.9e-9}, {"grid_error": 0.9e-7 * change}, {"other_error": 0.9e-7}):
        assert replace(check, **bearable).confirmed, bearable
    assert replace(check, grid_error=0.9e-5 * change, other_error=0.9e-5, tolerance=1e-5).confirmed


def test_a_starved_model_confirms_nothing(monkeypatch):
    """On the coarsest mesh the stand-in's target and the confirming model agree, being both wrong; the grid error says so."""
    monkeypatch.setattr(simulation, "MOST_REFINEMENTS", 1)
    monkeypatch.setattr(simulation, "first_mesh", lambda *_: simulation.Mesh(3, 1))
    check = confirm(stand_in(linear()))
    assert check.target_error <= check.allowed * check.target_change
    assert check.grid_error > 1e-6 * check.target_change
    assert not check.confirmed


def test_steps_made_from_a_plan():
    """Steps keep the volume; half the length, a quarter of the error (second order)."""
    plan = stand_in(linear())

    def pumped(count):
        edges = np.linspace(0.0, plan.end, count + 1)
        x, w = np.polynomial.legendre.leggauss(20)
        at = edges[:-1, None] + np.diff(edges)[:, None] * (x + 1.0) / 2.0
        steps = Steps(edges=edges, rates=plan.rate(at.ravel()).reshape(at.shape) @ w / 2.0)
        object.__setattr__(steps, "plan", plan)
        return steps

    coarse, fine = confirm(pumped(16)), confirm(pumped(32))
    assert (coarse.subject, coarse.allowed) == ("steps", 1e-2)
    assert coarse.confirmed
    assert 3.0 < coarse.target_error / fine.target_error < 5.0
    assert fine.settling_error < fine.target_error
    assert "rate as pumped" in repr(fine)


def test_steps_in_a_medium_that_leaks_are_compared_to_their_end():
    plan = stand_in(linear(face=Face(leak=1e-9)))
    steps = Steps(edges=[0.0, plan.end], rates=[1e-4])
    object.__setattr__(steps, "plan", plan)
    assert confirm(steps).channels.times[-1] < plan.end


# --- plans made by the series -----------------------------------------------------------------------

ROCK = fp.Rock(permeability="40 mD", porosity=0.12, compressibility="5e-10 1/Pa")
WATER = fp.Fluid(viscosity="0.5 cP", compressibility="4.5e-10 1/Pa")


@pytest.mark.parametrize("easing", [0.3, 1.0])
@pytest.mark.parametrize("duration", ["2 d", "8 h"])
def test_series_and_model_meet(duration, easing):
    """They share the medium and nothing else, and agree to a few roundings: X = t_D/duration up to 1."""
    medium = fp.slab(length="140 m", area="6000 m^2", rock=ROCK, fluid=WATER)
    target = fp.Target(start="21 MPa").move(to="22.5 MPa", over=duration, order=1.8, easing=easing).hold("1 d")
    check = confirm(fp.feedforward(medium, target, tolerance=1e-11))
    assert check.confirmed
    assert check.target_error <= 1e-10 * check.target_change
    assert check.grid_error <= 1e-9 * check.target_change


@pytest.mark.parametrize("x", [4.0, 8.0])
def test_fast_moves_are_judged_by_what_their_pressures_must_serve(x):
    """The bottomhole pressure swings to 60 and 1600 times the change; the target pressure still has its digits."""
    medium = fp.slab(length="140 m", area="6000 m^2", rock=ROCK, fluid=WATER)
    target = fp.Target(start="21 MPa").move(to="22.5 MPa", over=medium.travel_time / x, order=1.5)
    check = confirm(fp.feedforward(medium, target, tolerance=1e-11))
    swing = np.abs(check.channels.bottomhole_pressure - 21e6).max()
    assert swing > 50.0 * check.target_change
    assert check.confirmed
    assert check.target_error <= 1e-10 * check.target_change
    assert check.grid_error <= 1e-8 * check.target_change
    assert check.other_error <= 1e-8


@pytest.mark.parametrize("tolerance", [1e-9, 1e-13])
def test_a_very_fast_move_is_confirmed(tolerance):
    """X = 16: rate and bottomhole pressure swing to about 2e5 times what the change itself takes."""
    medium = fp.slab(length="140 m", area="6000 m^2", rock=ROCK, fluid=WATER)
    target = fp.Target(start="21 MPa").move(to="22.5 MPa", over=medium.travel_time / 16.0, order=1.5)
    check = confirm(fp.feedforward(medium, target, tolerance=tolerance))
    assert np.abs(check.channels.bottomhole_pressure - 21e6).max() > 1e5 * check.target_change
    assert check.confirmed
    assert check.target_error <= 3e-9 * check.target_change
    assert check.grid_error <= 1e-8 * check.target_change


def test_a_held_face_is_compared_by_its_rate():
    medium = fp.slab(length="140 m", area="6000 m^2", rock=ROCK, fluid=WATER, face=fp.Face(held=True))
    target = fp.Target(start="0 L/s").move(to="1 L/s", over="2 d", order=1.7).hold("1 d")
    check = confirm(fp.feedforward(medium, target, tolerance=1e-10))
    assert check.confirmed
    assert check.target_change == pytest.approx(1e-3)
    assert check.target_error <= 1e-12
    assert "m³/s" in repr(check)


# --- sentences --------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("subject", "sentence"),
    [
        (3, r"subject: got int; it takes a plan, or the steps that flatplan\.steps makes of one\."),
        (
            Steps(edges=[0.0, 1.0], rates=[1.0]),
            r"subject: got Steps that belong to no plan; it takes a plan, or the steps that flatplan\.steps makes of one\.",
        ),
    ],
)
def test_subjects_are_refused_with_a_sentence(subject, sentence):
    with pytest.raises(TypeError, match=f"^{sentence}$"):
        confirm(subject)


def test_numbers_are_refused_with_a_sentence():
    plan = stand_in(linear())
    with pytest.raises(ValueError, match=r"^allowed: got 0; it must be above zero\.$"):
        confirm(plan, allowed=0)
    with pytest.raises(ValueError, match=r"^tolerance: got -1; it must be above zero\.$"):
        confirm(plan, tolerance=-1)
    with pytest.raises(ValueError, match=r"^times: got 2 s followed by 1 s at position 1; it takes times that strictly increase\.$"):
        confirm(plan, times=[2.0, 1.0])
    plan.target = SimpleNamespace(start=START, largest_change=0.0)
    with pytest.raises(ValueError, match=r"^subject: its target never changes; there is nothing to confirm\.$"):
        confirm(plan)
    assert issubclass(Check, fp.records.Record)

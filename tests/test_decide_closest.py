"""The closest realizable target: as near as the program allows, within every limit, and never worse than one eased ramp."""

from __future__ import annotations

from functools import cache

import numpy as np
import pandas as pd
import pytest
from helpers_decide import DAY, HELD, LEAKING, MEDIUM, slab

import flatplan as fp
from flatplan.decide.closest import _curve, _Program
from flatplan.decide.shifted import ORDER, ShiftedSteps, exceeding, limit_rows

LIMITS = fp.Limits(max_rate="3 m^3/h", min_rate="-1 m^3/h")
CORNERS = (np.array([0, 2, 4, 5, 8, 9]) * DAY, np.array([21, 21, 22.2, 21.9, 22.4, 22.4]) * 1e6)
FAST = (np.array([0, 2, 2.05, 5]) * DAY, np.array([21, 21, 22.0, 22.0]) * 1e6)
T_D = MEDIUM.travel_time


@cache
def near(which, measure="largest"):
    return fp.closest(MEDIUM, {"corners": CORNERS, "fast": FAST}[which], LIMITS, steps=20, measure=measure)


def best_eased_ramp(wanted, limits, change, count=14):
    """Least largest deviation of one eased ramp within the limits, by brute force over start and duration at the quickest's shape."""
    quick = fp.quickest(MEDIUM, fp.Target(start=wanted[1][0]).move(by=change, over="1 d"), limits)
    times = np.linspace(0.0, wanted[0][-1], 2000)
    curve = np.interp(times, *wanted)
    found = np.inf
    for duration in quick.duration * np.array([1.0, 1.1, 1.3, 1.6]):
        for start in np.linspace(0.0, max(wanted[0][-1] - 0.3 * duration, 0.0), 60):
            for share in np.linspace(0.5, 1.0, count):  # a lower level needs lower rates at the same duration
                move = fp.Target(start=wanted[1][0]).move(
                    by=share * change, over=duration, order=quick.order[0], easing=quick.easing[0], at=start
                )
                found = min(found, np.abs(move.pressure(times) - curve).max())
    return found


@pytest.mark.parametrize("which", ["corners", "fast"])
def test_a_corner_ridden_and_a_too_fast_curve_come_back_as_good_plans(which):
    best = near(which)
    assert best.verdict.realizable
    assert best.plan.certificate.met
    times = np.linspace(0.0, best.plan.end, 12_000)
    simulated = fp.simulate(MEDIUM, best.plan, times, start="21 MPa")
    top = LIMITS.max_rate
    assert simulated.injection_rate.max() <= top * (1.0 + 1e-6)
    assert simulated.injection_rate.min() >= LIMITS.min_rate - 1e-6 * top
    assert np.abs(simulated.target_pressure - best.target.pressure(times)).max() <= 1e-5 * 1e6
    # the deviation is what it says
    wanted = {"corners": CORNERS, "fast": FAST}[which]
    dense = np.linspace(0.0, wanted[0][-1], 50_000)
    assert np.abs(best.target.pressure(dense) - np.interp(dense, *wanted)).max() <= best.deviation * (1.0 + 1e-4)
    assert best.deviation < 6e5


def test_a_jump_is_missed_by_about_half_of_it():
    """A rise of 10 bar within an hour, with rates that need more than a day: half is out of reach on either side."""
    assert 4.5e5 < near("fast").deviation < 6e5


def test_never_worse_than_the_best_single_eased_ramp():
    assert near("fast").deviation <= best_eased_ramp(FAST, LIMITS, 1e6)
    assert near("corners").deviation <= best_eased_ramp(CORNERS, LIMITS, 1.4e6)


def test_the_total_deviation_is_smaller_where_it_is_the_measure():
    assert near("corners", "total").mean_deviation < near("corners").mean_deviation
    assert near("corners", "total").deviation > near("corners").deviation
    assert near("corners", "total").verdict.realizable


def test_a_curve_well_within_reach_is_followed_closely():
    times = np.linspace(0.0, 30 * DAY, 400)
    values = 21e6 + 5e5 * np.sin(np.pi * times / (30 * DAY)) ** 2
    best = fp.closest(MEDIUM, (times, values), LIMITS, steps=20)
    assert best.deviation < 0.02 * 5e5
    assert best.verdict.realizable


def test_looser_limits_come_no_less_close():
    loose = fp.closest(MEDIUM, FAST, fp.Limits(max_rate="6 m^3/h", min_rate="-3 m^3/h"), steps=20)
    assert loose.deviation < near("fast").deviation


def test_other_limits_and_media():
    limits = fp.Limits(
        max_bottomhole_pressure="22.05 MPa", max_pressure_change="40 kPa/h", max_volume="110 m^3", max_rate_change="1 m^3/h/h"
    )
    best = fp.closest(MEDIUM, FAST, limits, steps=16)
    assert best.verdict.realizable
    best = fp.closest(LEAKING, FAST, fp.Limits(max_rate="3 m^3/h", min_rate="-0.1 m^3/h", max_volume="150 m^3"), steps=16)
    assert best.verdict.realizable
    wanted = (np.array([0.0, 0.5, 0.6, 3.0]) * DAY, np.array([0.0, 0.0, 4e-4, 4e-4]))
    best = fp.closest(HELD, wanted, fp.Limits(max_rate="1 L/s", min_rate="-0.2 L/s"), steps=24)
    assert best.verdict.realizable
    assert best.deviation < 3e-4


def test_a_table_and_a_function_are_the_same_curve():
    table = pd.DataFrame({"time": [f"{t / DAY:.6f} d" for t in FAST[0]], "pressure": [f"{p / 1e6:.6f} MPa" for p in FAST[1]]})
    limits, more = LIMITS, dict(steps=12, widths=["1.2 d"])
    one = fp.closest(MEDIUM, FAST, limits, **more)
    assert fp.closest(MEDIUM, table, limits, **more).deviation == pytest.approx(one.deviation, rel=1e-6)
    smooth = fp.closest(MEDIUM, lambda t: np.interp(t, *FAST), limits, end="5 d", **more)
    assert smooth.deviation == pytest.approx(one.deviation, rel=1e-2)
    assert one.width == 1.2 * DAY


def test_text_and_progress(capsys):
    best = fp.closest(MEDIUM, FAST, LIMITS, steps=12, widths=["1.2 d"], progress=True)
    assert "widths" in capsys.readouterr().err
    said = repr(best)
    assert said.startswith("Closest: within ") and "largest deviation" in said and "Realizable" in said
    assert "<table>" in best._repr_html_()


# --- the program ---------------------------------------------------------------------------------------


@pytest.mark.parametrize("medium", [MEDIUM, LEAKING, slab(well=fp.Well(resistance="0.4 bar/(m^3/h)", storage="0.03 m^3/bar"))])
def test_rows_are_the_channels_of_the_plan(medium):
    steps = ShiftedSteps(medium, T_D, 5, 7)
    levels = 1e5 * np.random.default_rng(1).standard_normal(7)
    target = fp.Target(start=0.0)
    for move in steps.moves(levels):
        target = target.move(by=move.change, over=move.duration, order=ORDER, easing=1.0, at=move.start)
    plan = fp.feedforward(medium, target)
    for name, source, shift, derivative in (
        ("injection_rate", "injection_rate", 0, 0),
        ("injected_volume", "injection_rate", -1, 0),
        ("bottomhole_pressure", "bottomhole_pressure", 0, 0),
        ("injection_rate", "injection_rate", 1, 1),
    ):
        wanted = plan.evaluate(name, steps.times, derivative)
        np.testing.assert_allclose(steps.matrix(source, shift) @ levels, wanted, rtol=0, atol=1e-8 * np.abs(wanted).max())
    np.testing.assert_allclose(steps.target_matrix(steps.times) @ levels, target.pressure(steps.times), rtol=0, atol=1e-7)


def test_a_case_solved_by_hand():
    """One step, no limits that matter, a constant wanted from some time on: the level is midway between the extremes it must serve."""
    curve = _curve((np.array([2.0, 3.0, 3.5]) * T_D, np.array([1e5, 1e5, 3e5])), None, "pressure")
    rows = limit_rows(ShiftedSteps(MEDIUM, T_D, 2, 1), fp.Limits(max_rate=1.0), 0.0, 0.0, 0.0)
    program = _Program(ShiftedSteps(MEDIUM, T_D, 2, 1), rows, curve, fp.Target(start=0.0), "largest")
    assert program.solve()
    assert program.levels[0] == pytest.approx(2e5)
    assert program.value * program.scale == pytest.approx(1e5)


def test_another_solver_finds_the_same_optimum():
    """HiGHS' simplex against its interior point method, on the program's own rows and all the fine grid's limits."""
    from scipy.optimize import linprog

    steps = ShiftedSteps(MEDIUM, 2.0 * T_D, 5, 38)
    program = _Program.of(steps, LIMITS, _curve(FAST, None, "pressure"), fp.Target(start=21e6), "largest")
    assert program.solve()
    near_rows, n = program.matrix.toarray(), steps.count
    rows = [np.column_stack([near_rows, -np.ones(len(near_rows))]), np.column_stack([-near_rows, -np.ones(len(near_rows))])]
    right = [program.wanted, -program.wanted]
    for one in program.rows:
        rows.append(np.column_stack([one.matrix[::4].toarray() * program.scale, np.zeros(len(one.bound[::4]))]))
        right.append(one.bound[::4])
    found = linprog(
        np.append(np.zeros(n), 1.0), A_ub=np.concatenate(rows), b_ub=np.concatenate(right), bounds=(None, None), method="highs-ipm"
    )
    assert found.fun == pytest.approx(program.value, rel=2e-3)
    _, worst = exceeding(program.rows, program.levels, program.picked, 0.0)
    assert worst < 3e-3  # the plan's own extremes see the rest


def test_multipliers_prove_an_infeasible_case():
    """Farkas: non-negative multipliers y with y·A = 0 and y·b < 0 leave no levels that keep 'settle 15 bar' and 60 m³ at most."""
    from scipy.optimize import linprog

    steps = ShiftedSteps(MEDIUM, T_D, 2, 6)
    (rows,) = limit_rows(steps, fp.Limits(max_volume="60 m^3"), 0.0, 0.0, 0.0)
    settle = np.zeros((1, 6))
    settle[0, -1] = -1.0  # -u ≤ -15 bar
    matrix, right = np.concatenate([rows.matrix[::10].toarray() * 1e6, settle]), np.append(rows.bound[::10], -1.5)
    assert linprog(np.zeros(6), A_ub=matrix, b_ub=right, bounds=(None, None), method="highs").status == 2
    proof = linprog(right, A_eq=np.vstack([matrix.T, np.ones(len(right))]), b_eq=np.append(np.zeros(6), 1.0), method="highs")
    assert proof.status == 0 and proof.fun < 0.0
    assert proof.x.min() >= 0.0
    np.testing.assert_allclose(proof.x @ matrix, 0.0, atol=1e-9)


# --- refusals ------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("change", "said"),
    [
        (dict(wanted=3.0), r"^wanted: got 3\.0; it takes \(times, values\), a table with these two columns, or a function\.$"),
        (dict(wanted=([0.0, 1.0, 1.0], [0.0, 1.0, 2.0])), r"^wanted: its times must rise from 0 or later, without repeating\.$"),
        (dict(wanted=([0.0, 1.0], [0.0])), r"^wanted: got 2 times and 1 values; it takes as many of both, at least two\.$"),
        (dict(wanted=lambda t: t), r"^end: is missing; a wanted function takes end="),
        (dict(wanted=lambda t: 1.0, end="1 d"), r"^wanted: the function gave shape \(\) for 2001 times; .*$"),
        (dict(end="3 d"), r"^end: is for a wanted function; a table ends with its last time\.$"),
        (dict(start="20 MPa"), r"^wanted: begins at 210 bar at time 0, but every plan begins at start, 200 bar; .*$"),
        (dict(measure="mean"), r"^measure: got 'mean'; it takes one of 'largest', 'total'\.$"),
        (dict(steps=2), r"^steps: got 2; it takes a whole number from 4 to 400\.$"),
        (dict(widths=[-1.0]), r"^widths: take durations above zero\.$"),
        (dict(widths=["1 h"]), r"^widths: 12 steps of these widths do not reach the end of the curve; .*$"),
        (dict(limits=fp.Limits(max_rate="3 m^3/h", min_rate=0)), r"^min_rate: got 0 m³/h, but in a sealed medium .*$"),
        (dict(limits=fp.Limits(max_bottomhole_pressure="20 MPa")), r"^max_bottomhole_pressure: got 200 bar, but at rest at 210 bar .*$"),
        (dict(wanted=(FAST[0], np.full(4, 21e6))), r"^wanted: never leaves the start; there is nothing to plan\.$"),
    ],
)
def test_bad_input_is_named(change, said):
    given = dict(wanted=FAST, limits=LIMITS, steps=12) | change
    with pytest.raises(ValueError, match=said):
        fp.closest(MEDIUM, given.pop("wanted"), given.pop("limits"), **given)

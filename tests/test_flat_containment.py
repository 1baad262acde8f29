"""Random plans against balls: every channel ± its certificate contains the exact value, on media, moves and tolerances of every kind.

A fixed, small part of what ``python -m tests.containment --cases 2000 --seed 1`` checks with random cases.
"""

from __future__ import annotations

from dataclasses import replace

import pytest
from containment.cases import Case, Ground, Layer, Step, cases
from containment.check import check
from hypothesis import HealthCheck, Phase, given, reject, settings

SERIES = ("injection_rate", "sandface_rate", "bottomhole_pressure", "sandface_pressure", "injected_volume")
PLAIN = Ground(layers=(Layer(100.0, 1e-13, 0.1, 5e-10),))
LOOSE = Case(PLAIN, (Step(1.0, 1.5, 1.0, 1.0),), 1e-3, 1)
TIGHT = Case(PLAIN, (Step(0.5, 1.5, 0.5, 1.0),), 1e-12, 3)


@given(case=cases())
@settings(
    max_examples=32,
    derandomize=True,
    deadline=None,
    database=None,
    phases=[Phase.generate],  # `containment.run.shrunk` makes a case smaller; hypothesis could only draw another
    suppress_health_check=list(HealthCheck),
)
def test_no_channel_is_farther_off_than_certified(case):
    outcome = check(case)
    if outcome.kind != "checked":  # refused with a sentence, or too long for the reference
        reject()
    assert not outcome.violations


@pytest.mark.parametrize(
    "case",
    [
        # leakage: the coefficients carry an error of their own
        Case(Ground(layers=(Layer(130.0, 6.5e-15, 0.179, 1e-10, leakage=26.73),)), (Step(0.044, 1.7, 1.0, 1.0),), 1e-9, 0),
        # a ramp much shorter than its bump is a difference of large numbers
        Case(PLAIN, (Step(0.05, 2.0, 0.999, 1.0),), 1e-9, 1),
        # moves that cancel: the change is small beside each of them
        Case(PLAIN, (Step(0.05, 1.7, 1.0, 1.0), Step(0.05, 1.7, 1.0, -1.0, overlap=0.0001)), 1e-9, 6),
        # a steep step: the rounding of the time counts
        Case(PLAIN, (Step(0.05, 1.17, 1.0, 1.0),), 1e-9, 6),
    ],
    ids=["leakage", "short ramp", "moves that cancel", "steep step"],
)
def test_what_was_found_once_is_as_certified(case):
    assert not check(case).violations


def test_the_check_sees_a_tail_that_is_claimed_too_small():
    assert not check(LOOSE).violations
    broken = check(LOOSE, lambda c: replace(c, tail={name: 0.01 * value for name, value in c.tail.items()}))
    assert set(SERIES) <= set(broken.violations)


def test_the_check_sees_a_rounding_that_is_claimed_too_small():
    assert not check(TIGHT).violations
    broken = check(TIGHT, lambda c: replace(c, rounding={name: 1e-3 * value for name, value in c.rounding.items()}))
    # where the tail is the larger part, it covers for the rounding
    assert {"injected_volume", "target_pressure"} <= set(broken.violations)


def test_the_check_sees_a_target_that_is_claimed_without_a_number():
    with pytest.raises(AssertionError, match="the claim on the target is nan"):
        check(LOOSE, lambda c: replace(c, tail=c.tail | {"target_pressure": float("nan")}))


def test_a_refusal_says_what_of_the_target_it_is_about():
    outcome = check(Case(PLAIN, (Step(4.0, 2.0, 1.0, 1.0),), 1e-9, 0))
    assert outcome.kind == "refused" and outcome.words.startswith("target: at order 2 the series converges only while")

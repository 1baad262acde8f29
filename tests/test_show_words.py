"""Numbers for reading, the fixed texts, the sources, and the numbers a plan comes down to."""

from __future__ import annotations

import re
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from show_job import held, job, plain

from flatplan.decide import Limits, assess
from flatplan.numeric import simulate
from flatplan.show import cautions, numbers
from flatplan.show.job import Job
from flatplan.show.sources import SOURCES, sources_of

REFERENCES = (Path(__file__).resolve().parents[1] / "references.md").read_text(encoding="utf-8")
_DIGITS = str.maketrans("−⁻⁰¹²³⁴⁵⁶⁷⁸⁹", "--0123456789")


def read_back(text: str) -> float:
    return float(text.translate(_DIGITS).replace("×10", "e"))


# --- numbers ---------------------------------------------------------------------------------------


@given(st.floats(min_value=-1e30, max_value=1e30, allow_subnormal=False).filter(lambda v: abs(v) > 1e-30), st.integers(1, 9))
def test_significant_digits_read_back(value, digits):
    assert abs(read_back(numbers.significant(value, digits)) - value) <= 0.5000001 * 10.0 ** (1 - digits) * abs(value) * 1.0001


@given(st.floats(min_value=1e-12, max_value=1e12))
def test_decimals_resolve_a_thousandth_where_they_can(scale):
    places = numbers.decimals(scale)
    assert 10.0**-places <= 1.000001e-3 * scale or places == 12 or (places == 0 and scale >= 1e3)
    assert places == 0 or 10.0 ** -(places - 1) > 0.999e-3 * scale


@pytest.mark.parametrize(
    ("value", "places", "text"),
    [(-0.0004, 3, "0.000"), (-0.0006, 3, "−0.001"), (2.5, 0, "2"), (float("nan"), 2, "–"), (1234.5, 1, "1234.5"), (-0.0, 1, "0.0")],
)
def test_fixed_places(value, places, text):
    assert numbers.fixed(value, places) == text


@given(st.integers(0, 10**8))
def test_a_clock_reads_back(seconds):
    days, hours, minutes, left = re.fullmatch(r"(\d+) d (\d\d):(\d\d)(?::(\d\d))?", numbers.clock(seconds)).groups()
    assert ((int(days) * 24 + int(hours)) * 60 + int(minutes)) * 60 + int(left or 0) == seconds


def test_a_clock_carries_over():
    assert numbers.clock(86399.7) == "1 d 00:00"


@pytest.mark.parametrize(
    ("seconds", "text"),
    [(0.0, "0 s"), (86400.0, "1 d"), (93600.0, "26 h"), (1e6, "11.6 d"), (90.0, "90 s"), (5400.0, "90 min"), (7200.0, "2 h")],
)
def test_durations(seconds, text):
    assert numbers.duration(seconds) == text


def test_levels_show_the_change_and_not_the_start():
    assert numbers.level(21.0004e6, 1e3, "pressure", "metric") == "210.00400 bar"
    assert numbers.level(21.0e6, 1.5e6, "pressure", "field") == "3045.8 psi"
    assert numbers.level(21.0e6, 0.0, "pressure", "metric") == "210.0 bar"


def test_a_sentence_is_typeset_without_touching_names_and_ranges():
    assert numbers.typeset("NIST-811, 3-4 d, x-2 and -2, (-3), 1e-9, 2e+05.") == "NIST-811, 3-4 d, x-2 and −2, (−3), 1×10⁻⁹, 2×10⁵."


def test_shares():
    assert numbers.percent(0.0) == "0 %"
    assert numbers.percent(1e-6) == "0.0001 %"
    assert numbers.percent(9e-7) == "less than 0.0001 %"


# --- fixed texts -----------------------------------------------------------------------------------


def test_the_cautions_say_what_they_must():
    said = " ".join(cautions.CAUTIONS)
    for words in ("not a permit", "fracture pressure", "margin", "traffic-light protocol", "licensed engineers", "regulator", "shut-in"):
        assert words in said, words
    left_out = " ".join(cautions.LEFT_OUT).lower()
    for words in (
        "one fluid phase",
        "slightly compressible",
        "gravity",
        "temperature",
        "stress",
        "one path",
        "far boundary",
        "do not change",
    ):
        assert words in left_out, words
    for text in (*cautions.CAUTIONS, *cautions.LEFT_OUT, *cautions.IN_THE_FIELD):
        assert text[0].isupper() and text.endswith("."), text


def test_sources_agree_with_the_reference_list():
    """Each key stands in references.md, with the same first author's name and year."""
    for key, line in SOURCES.items():
        entry = REFERENCES.split(f"## [{key}]\n", 1)
        assert len(entry) == 2, key
        text = entry[1].split("\n## ", 1)[0]
        year = re.search(r"\b(1[89]\d\d|20\d\d)\b(?=:)", line)[1]
        assert year in text, key
        author = line.split(",")[0].split(" and ")[0]
        assert author in text, key


def test_sources_follow_the_plan():
    assert "Ramey1970" in sources_of(job().plan, True)
    assert not {"Ramey1970", "vanEverdingen1953", "Patera1984"} & set(sources_of(plain(), False))


# --- the numbers of a job --------------------------------------------------------------------------


def test_peaks_agree_with_the_verdict():
    verdict, found = assess(plain(), Limits()), Job(plain())
    assert found.highest_rate.value == pytest.approx(verdict["max_rate"].value, rel=1e-12)
    assert found.lowest_rate.value == pytest.approx(verdict["min_rate"].value, rel=1e-12)
    assert found.highest_bottomhole.value == pytest.approx(verdict["max_bottomhole_pressure"].value, rel=1e-12)


def test_volumes_of_plan_and_steps_balance():
    j = job()
    for found in (Job(j.plan), Job(j.plan, j.steps, j.steps_check)):
        injected, back = found.volumes
        assert injected > 0.0 and back > 0.0
        assert injected - back == pytest.approx(found.net_volume, rel=1e-9)
        # a sealed medium keeps what is left in it
        assert found.net_volume == pytest.approx(j.medium.stored_volume(j.target.level - j.target.start), rel=1e-9)


def test_steps_speak_for_themselves():
    j = job()
    found = Job(j.plan, j.steps, j.steps_check)
    assert found.highest_rate.value == j.steps.rates.max()
    assert found.highest_bottomhole.value == j.steps_check.channels.bottomhole_pressure.max()
    assert found.highest_bottomhole.value != pytest.approx(Job(j.plan).highest_bottomhole.value, rel=1e-6)


def test_what_a_stop_leads_to_is_what_the_independent_model_does():
    """Drive the model with the plan's rate until the stop, then with nothing, and wait for three travel times."""
    j = job()
    stop = Job(j.plan).stop
    after = stop.when + 3.0 * j.medium.travel_time

    def rate(times: np.ndarray) -> np.ndarray:
        return np.where(times <= stop.when, j.plan.rate(times), 0.0)

    knots = [*[t for t in j.plan.knots if t < stop.when], stop.when]
    found = simulate(j.medium, rate, [stop.when, after], start=j.target.start, knots=knots, tolerance=1e-7)
    assert found.target_pressure[1] == pytest.approx(stop.settled, abs=1e-5 * j.target.largest_change)
    assert found.target_pressure[1] - found.target_pressure[0] == pytest.approx(stop.rise, abs=1e-5 * j.target.largest_change)
    assert stop.highest >= stop.settled > j.target.start


def test_a_medium_that_loses_fluid_settles_nowhere():
    assert Job(held()).stop is None

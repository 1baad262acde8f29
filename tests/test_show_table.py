"""Tables: columns, units against published factors, full precision, and refusals."""

from __future__ import annotations

import csv
import re
import subprocess
import sys
from io import StringIO

import media
import numpy as np
import pandas as pd
import pytest
from show_job import held, job, layer, plain

import flatplan as fp
from flatplan.decide import LIMITS, Limits
from flatplan.flat import Target
from flatplan.numeric import Steps, simulate
from flatplan.show import table
from flatplan.show.times import even_times
from flatplan.units import KINDS, label

# NIST SP 811 (2008), appendix B.8, as printed there: seven digits [NISTSP811]
NIST = {"psi": 6.894757e3, "bbl": 1.589873e-1, "bar": 1.0e5, "ft": 3.048e-1, "cP": 1.0e-3, "d": 8.64e4, "h": 3.6e3, "mD": 9.869233e-16}
FACTORS = {
    "time [d]": NIST["d"],
    "injection rate [bbl/d]": NIST["bbl"] / NIST["d"],
    "injection rate [m³/h]": 1.0 / NIST["h"],
    "bottomhole pressure [psi]": NIST["psi"],
    "bottomhole pressure [bar]": NIST["bar"],
    "injected volume [bbl]": NIST["bbl"],
}


def things() -> dict[str, object]:
    j = job()
    return {
        "plan": j.plan,
        "pumped steps": j.steps,
        "steps": Steps(edges=["0 h", "1 h", "3 h"], rates=["1 L/s", "-1 L/s"]),
        "channels": j.check.channels,
        "verdict": j.verdict,
        "certificate": j.plan.certificate,
        "check": j.check,
        "check of steps": j.steps_check,
        "medium": j.medium,
        "target": j.target,
        "limits": j.limits,
        "plan of a held face": held(),
    }


NAMES = list(things())


# --- units -----------------------------------------------------------------------------------------


@pytest.mark.parametrize("column", FACTORS)
def test_units_against_published_factors(column):
    system = "metric" if column in table(plain(), units="metric") else "field"
    shown, si = table(plain(), units=system), table(plain())
    words = column.split(" [")[0]
    name = next(c for c in si.columns if c.startswith(f"{words} ["))
    np.testing.assert_allclose(shown[column] * FACTORS[column], si[name], rtol=2e-7, atol=0.0)


@pytest.mark.parametrize("name", NAMES)
@pytest.mark.parametrize("system", ["SI", "metric", "field"])
def test_every_number_has_a_unit(name, system):
    """In the column's name, or, where rows differ in kind, in a column of its own."""
    found = table(things()[name], units=system)
    assert isinstance(found, pd.DataFrame) and len(found) > 0
    assert found.columns.is_unique
    known = {label(kind, system) for kind in KINDS} | {"-"}
    for column in found.select_dtypes("number"):
        by_row = "unit" in found and column in ("value", "limit", "margin", "peak", "tail bound", "rounding estimate")
        unit = re.search(r" \[(.+)\]$", column)
        assert by_row or unit or column == "step", column
        assert unit is None or unit[1] in known
    if "unit" in found:
        assert found["unit"].str.len().min() > 0


@pytest.mark.parametrize("name", ["plan", "pumped steps", "steps", "channels", "target"])
@pytest.mark.parametrize("system", ["metric", "field"])
def test_values_come_back(name, system):
    """Shown, written as CSV, read and converted again: the SI value to rounding."""
    si, shown = table(things()[name]), table(things()[name], units=system)
    rows = list(csv.DictReader(StringIO(shown.to_csv(index=False))))
    for column in shown.select_dtypes("number"):
        read = np.array([float(row[column] or "nan") for row in rows])
        np.testing.assert_array_equal(read, shown[column].to_numpy(dtype=float), err_msg=column)
    for i, column in enumerate(si.select_dtypes("number").columns):
        unit = re.search(r" \[(.+)\]$", column)
        if unit is None:
            continue
        other = shown.select_dtypes("number").columns[i]
        factor = {"s": 86400.0, "Pa": {"metric": 1e5, "field": 6894.757293168361}[system], "-": 1.0}.get(unit[1])
        if factor is not None:
            np.testing.assert_allclose(shown[other] * factor, si[column], rtol=1e-14, atol=1e-300)


# --- each thing ------------------------------------------------------------------------------------


def test_a_plan_is_read_evenly_and_at_its_end():
    found = table(plain(), every="7 h")
    times = found["time [s]"].to_numpy()
    np.testing.assert_array_equal(times[:-1], np.arange(11) * 25200.0)
    assert times[-1] == plain().end
    at = plain().at(times)
    np.testing.assert_array_equal(found["injection rate [m³/s]"], at.injection_rate)
    np.testing.assert_array_equal(found["target pressure [Pa]"], at.target_pressure)
    assert list(found.columns) == [
        "time [s]", "target pressure [Pa]", "injection rate [m³/s]", "bottomhole pressure [Pa]",
        "sandface pressure [Pa]", "sandface rate [m³/s]", "injected volume [m³]",
    ]  # fmt: skip


@pytest.mark.parametrize(("every", "rows"), [("0.1 d", 31), ("3 d", 2), ("10 d", 2), ("2 d", 3), (None, 37)])
def test_the_end_is_there_once(every, rows):
    times = table(plain(), every=every)["time [s]"]
    assert len(times) == rows
    assert times.is_monotonic_increasing and times.is_unique and times.iloc[-1] == plain().end


@pytest.mark.parametrize("days", [0.001, 0.01, 0.3, 1, 3, 12, 45, 400, 3650, 1e5])
def test_default_tables_are_of_a_readable_length(days):
    plan = fp.feedforward(layer(), Target(start=2e7).move(to=2.1e7, over=days * 86400.0)) if days >= 0.3 else None
    times = even_times(days * 86400.0)
    assert 10 <= len(times) <= 62
    assert np.all(np.diff(times) > 0.0)
    if plan is not None:
        assert len(table(plan)) == len(times)


def test_the_rate_table_of_the_field():
    j = job()
    found = table(j.steps, units="metric")
    assert list(found.columns) == [
        "step", "step start [d]", "step end [d]", "injection rate [m³/h]", "volume [m³]", "cumulative volume [m³]",
        "expected bottomhole pressure at step end [bar]", "expected target pressure at step end [bar]",
        "wanted target pressure at step end [bar]",
    ]  # fmt: skip
    np.testing.assert_array_equal(found["step"], np.arange(1, 49))
    np.testing.assert_allclose(found["step end [d]"] * 86400.0, j.steps.edges[1:], rtol=1e-15)
    np.testing.assert_allclose(found["injection rate [m³/h]"] / 3600.0, j.steps.rates, rtol=1e-15)
    np.testing.assert_allclose(found["injection rate [m³/h]"] * 6.0, found["volume [m³]"], rtol=1e-12)
    planned = j.plan.at(j.steps.edges[1:])
    np.testing.assert_allclose(found["cumulative volume [m³]"], planned.injected_volume, rtol=1e-12, atol=1e-9)
    np.testing.assert_allclose(found["wanted target pressure at step end [bar]"] * 1e5, planned.target_pressure, rtol=1e-15)


def test_expected_pressures_are_those_of_the_steps_just_before_they_end():
    """Not those of the smooth plan, and not those after the next rate has begun."""
    j = job()
    found = table(j.steps)
    bottomhole = found["expected bottomhole pressure at step end [Pa]"].to_numpy()
    before = j.steps.edges[1:] - 1e-5 * np.diff(j.steps.edges)
    other = simulate(j.medium, j.steps, before, start=j.target.start)
    scale = j.target.largest_change
    np.testing.assert_allclose(bottomhole, other.bottomhole_pressure, rtol=0.0, atol=1e-4 * scale)
    np.testing.assert_allclose(found["expected target pressure at step end [Pa]"], other.target_pressure, rtol=0.0, atol=1e-4 * scale)
    assert np.max(np.abs(bottomhole - j.plan.at(j.steps.edges[1:]).bottomhole_pressure)) > 1e-3 * scale


def test_a_jump_of_the_rate_belongs_to_the_next_step():
    """With a resistance and no wellbore storage, bottomhole pressure jumps with the rate: R times its change."""
    resistance = 2.0e9
    plan = fp.feedforward(layer(well=fp.Well(resistance=resistance)), Target(start="21 MPa").move(to="22.5 MPa", over="3 d", easing=0.3))
    pumped = fp.steps(plan, every="6 h")
    expected = table(pumped)["expected bottomhole pressure at step end [Pa]"].to_numpy()
    at_edges = simulate(plan.medium, pumped, pumped.edges[1:], start=plan.target.start)
    np.testing.assert_allclose(
        expected, at_edges.sandface_pressure + resistance * pumped.rates, rtol=0.0, atol=1e-4 * plan.target.largest_change
    )


def test_plain_steps_have_no_pressures():
    found = table(things()["steps"], units="SI")
    assert list(found.columns) == [
        "step",
        "step start [s]",
        "step end [s]",
        "injection rate [m³/s]",
        "volume [m³]",
        "cumulative volume [m³]",
    ]
    np.testing.assert_allclose(found["cumulative volume [m³]"], [3.6, -3.6], rtol=1e-14)


def test_a_verdict_has_one_row_a_finding():
    j = job()
    found = table(j.verdict, units="metric").set_index("finding")
    assert len(found) == len(j.verdict.findings)
    row = found.loc["largest injection rate"]
    assert (row["result"], row["unit"], row["limit"]) == ("met", "m³/h", pytest.approx(3.0, rel=1e-14))
    assert row["value"] == pytest.approx(j.verdict["max_rate"].value * 3600.0, rel=1e-14)
    assert row["margin"] == pytest.approx(row["limit"] - row["value"], rel=1e-12)
    assert found.loc["smallest injection rate", "result"] == "not met"
    assert found.loc["largest net injected volume", "result"] == "for information"
    assert np.isnan(found.loc["largest net injected volume", "limit"])


def test_a_certificate_has_one_row_a_channel():
    certificate = job().plan.certificate
    found = table(certificate, units="metric").set_index("channel")
    assert len(found) == len(certificate.tail) == 6
    row = found.loc["injection rate"]
    assert row["peak"] == pytest.approx(certificate.peak["injection_rate"] * 3600.0, rel=1e-14)
    assert row["tail bound"] == pytest.approx(certificate.tail["injection_rate"] * 3600.0, rel=1e-14)
    assert row["rounding estimate"] == pytest.approx(certificate.rounding["injection_rate"] * 3600.0, rel=1e-14)
    assert row["unit"] == "m³/h"
    np.testing.assert_allclose(
        found["tail and rounding over peak [-]"] * found["peak"], found["tail bound"] + found["rounding estimate"], rtol=1e-12
    )


def test_a_check_states_errors_and_shares():
    check = job().steps_check
    found = table(check, units="field").set_index("quantity")
    row = found.loc["largest departure of the target"]
    assert (row["value"], row["unit"]) == (pytest.approx(check.target_error / 6894.757293168361, rel=1e-12), "psi")
    assert row["share of the change [-]"] == check.target_error / check.target_change
    assert found.loc["confirmed (1 yes, 0 no)", "value"] == float(check.confirmed)


def test_a_medium_states_what_was_given_and_what_follows():
    found = table(job().medium, units="field").set_index("quantity")["value"]
    assert found["length of path"] == pytest.approx(140.0 / NIST["ft"], rel=1e-6)
    assert found["permeability"] == pytest.approx(40.0, rel=1e-14)
    assert found["fluid viscosity"] == pytest.approx(0.5, rel=1e-14)
    assert found["diffusive travel time"] * NIST["d"] == pytest.approx(140.0**2 / job().medium.segments[0].diffusivity, rel=1e-12)


def test_a_target_lists_moves_and_holds():
    found = table(job().target, units="metric")
    assert found["what"].tolist() == ["move", "hold", "move"]
    np.testing.assert_allclose(found["duration [d]"], [3.0, 5.0, 4.0], rtol=1e-14)
    np.testing.assert_allclose(found["target pressure after [bar]"], [225.0, 225.0, 218.0], rtol=1e-14)
    assert table(Target(start=2e7).hold("2 d").move(by=1e5, over="1 d").hold("1 h"))["what"].tolist() == ["hold", "move", "hold"]
    assert len(table(Target(start=2e7))) == 0


def test_limits_that_are_not_stated_have_no_value():
    found = table(Limits(max_rate="3 L/s"), units="metric")
    assert len(found) == len(LIMITS)
    assert found["value"].notna().sum() == 1
    assert found["value"].max() == pytest.approx(10.8, rel=1e-14)


def test_a_held_face_has_a_rate_through_it():
    found = table(held(), units="metric")
    np.testing.assert_allclose(found["rate through the target face [m³/h]"].iloc[-1], 1.8, rtol=1e-12)
    assert "bottomhole pressure change [bar]" in found


# --- refusals --------------------------------------------------------------------------------------


def test_what_it_does_not_know():
    sentence = "^thing: got int; it takes a plan, channels, steps, a verdict, a certificate, a check, a medium, a target or limits.$"
    with pytest.raises(TypeError, match=sentence):
        table(3)
    with pytest.raises(ValueError, match="^units: got 'imperial'; it takes one of 'SI', 'metric', 'field'.$"):
        table(plain(), units="imperial")
    with pytest.raises(ValueError, match="^every: got '6 h' for PumpedSteps; only a plan is read at a spacing of one's own.$"):
        table(job().steps, every="6 h")
    with pytest.raises(ValueError, match="^every: got '1 ms', which makes 2.59e.08 rows; it takes at least"):
        table(plain(), every="1 ms")
    with pytest.raises(ValueError, match="^every: got 0; it must be above zero.$"):
        table(plain(), every=0)
    with pytest.raises(ValueError, match="^every: got '6 m', which is not a time"):
        table(plain(), every="6 m")


def test_nothing_heavy_loads_with_the_room():
    code = "import sys, flatplan.show; print([n for n in ('pandas', 'matplotlib', 'sympy', 'pint') if n in sys.modules])"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, timeout=120, check=True)
    assert done.stdout.strip() == "[]"


@pytest.mark.parametrize("geometry", media.GEOMETRIES)
@pytest.mark.parametrize("face", ["sealed", "leaky and storing", "held"])
def test_every_medium_has_its_table(geometry, face):
    medium = media.medium(geometry, face, "skin and storage", "leaking")
    found = table(medium, units="metric")
    assert found["quantity"].is_unique
    assert np.all(np.isfinite(found["value"]))
    values = found.set_index("quantity")["value"]
    assert values["diffusive travel time"] == pytest.approx(medium.travel_time / 86400.0, rel=1e-14)
    assert values["skin factor"] == 4.0
    assert sum("viscosity" in words for words in found["quantity"]) == len(medium.inputs.get("zones", [0]))
    assert ("volume stored per pressure change" in values) == (not medium.leaks)

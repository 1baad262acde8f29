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
from show_job import composite, held, held_stated, job, layer, plain

import flatplan as fp
from flatplan.decide import LIMITS, Limits
from flatplan.field import steps
from flatplan.flat import Target
from flatplan.numeric import Steps, simulate
from flatplan.show import table
from flatplan.show.quantities import joins, zones_of
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
        "terms": j.plan.terms(),
        "terms of a pressure": j.plan.terms("bottomhole_pressure"),
        "check": j.check,
        "check of steps": j.steps_check,
        "medium": j.medium,
        "target": j.target,
        "limits": j.limits,
        "plan of a held face": held(),
        "certificate of a held face": held().certificate,
        "volumes": composite().volumes(["6 d", "16 d"]),
        "composite medium": composite().medium,
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
        by_row = "unit" in found and column in ("value", "limit", "margin", "peak", "tail bound", "rounding bound")
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
    assert row["rounding bound"] == pytest.approx(certificate.rounding["injection_rate"] * 3600.0, rel=1e-14)
    assert row["unit"] == "m³/h"
    np.testing.assert_allclose(
        found["tail and rounding over peak [-]"] * found["peak"], found["tail bound"] + found["rounding bound"], rtol=1e-12
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


def test_a_held_face_is_called_a_rate_everywhere():
    plan = held_stated()
    names = table(plan.certificate)["channel"].tolist()
    assert "rate through the target face" in names and not any("target pressure" in name for name in names)
    row = table(plan.certificate, units="metric").set_index("channel").loc["rate through the target face"]
    assert (row["unit"], row["peak"]) == ("m³/h", pytest.approx(1.8))
    line = next(line for line in repr(plan.certificate).splitlines() if "rate through the target face" in line)
    assert line.endswith("of 1.8 m³/h") and "target pressure" not in repr(plan.certificate)
    assert "rate through the target face" in repr(plan.at(["1 d"])) and "target pressure" not in repr(plan.at(["1 d"]))
    pumped = steps(plan, every="6 h")
    assert plan.at([0.0]).target_kind == simulate(plan.medium, pumped, ["1 d"]).target_kind == "rate"
    assert plain().at([0.0]).target_kind == plain().certificate.target_kind == "pressure"
    found = table(pumped, units="metric")
    np.testing.assert_allclose(found["wanted rate through the target face at step end [m³/h]"].iloc[-1], 1.8, rtol=1e-12)
    np.testing.assert_allclose(found["expected rate through the target face at step end [m³/h]"].iloc[-1], 1.8, rtol=1e-3)
    assert found["expected bottomhole pressure at step end [bar]"].between(210.0, 215.0).all()
    assert "expected bottomhole pressure change at step end [bar]" in table(steps(held(), every="6 h"), units="metric")


def test_volumes_have_a_column_each():
    volumes = composite().volumes(["6 d", "16 d"])
    found = table(volumes, units="field")
    assert list(found.columns) == ["time [d]", "injected volume [bbl]", "stored volume [bbl]", "leaked volume [bbl]"]
    np.testing.assert_allclose(found["leaked volume [bbl]"] * NIST["bbl"], volumes.leaked, rtol=2e-7)
    np.testing.assert_allclose(found["injected volume [bbl]"], found["stored volume [bbl]"] + found["leaked volume [bbl]"], rtol=1e-12)
    assert volumes.leaked[1] > 10.0


def test_a_composite_medium_lists_its_zones_and_ends():
    found = table(composite().medium, units="metric").set_index("quantity")
    assert found["part"].unique().tolist() == ["path", "zone 1", "zone 2", "zone 3", "face", "well"]
    values = found["value"]
    assert [values[f"zone {i}: ends at radius"] for i in (1, 2, 3)] == pytest.approx([60.0, 4.0, 0.1])
    assert [values[f"zone {i}: permeability"] for i in (1, 2, 3)] == pytest.approx([40.0, 350.0, 6.0])
    assert values["zone 1: leakage"] == pytest.approx(0.002 * NIST["mD"] / (5e-4 * 4.0 * 20.0) * 1e5 * 86400.0, rel=1e-6)
    assert values["zone 3: leakage"] == 0.0
    assert table(held().medium).set_index("quantity")["value"]["target face held (1 yes, 0 no)"] == 1.0


def test_varying_rock_is_listed_as_it_was_stated():
    rows = table(media.medium("varying rock"), units="metric")
    rows = rows[rows["part"] == "profile"].set_index("quantity")["value"]
    assert len(rows) == 18
    for at, porosity in zip(media.PROFILE.at, media.PROFILE.porosity, strict=True):
        assert rows[f"porosity at {at:g} m"] == pytest.approx(porosity, rel=1e-12)
    np.testing.assert_allclose(rows[::2] * NIST["mD"], media.PROFILE.permeability, rtol=1e-6)


@pytest.mark.parametrize("flow", ["linear", "radial"])
def test_a_zone_of_varying_rock_keeps_its_places(flow):
    """Zones and the pieces that a varying rock is cut into are told apart, also by the sketch."""
    extents = [{"length": 40.0, "area": 5000.0}, {"length": 120.0, "area": 5000.0}]
    if flow == "radial":
        extents = [{"to_radius": 130.0}, {"to_radius": 10.0}]
    zones = [fp.Zone(rock=r, fluid=media.WATER, **e) for r, e in zip((media.ROCK, media.PROFILE), extents, strict=True)]
    medium = fp.zoned(zones, flow=flow, height=20.0, **({"target_radius": 170.0} if flow == "radial" else {}))
    first, second = zones_of(medium)
    assert (len(first.segments), len(second.segments)) == (1, 8)
    assert (first.varies, second.varies) == (False, True)
    assert joins(medium) == pytest.approx([40.0])
    np.testing.assert_allclose([x for x, _, _ in second.samples()], 40.0 + media.PROFILE.at, rtol=1e-12)
    np.testing.assert_allclose([k for _, k, _ in second.samples()], media.PROFILE.permeability, rtol=1e-12)
    assert table(medium)["quantity"].is_unique


# --- refusals --------------------------------------------------------------------------------------


def test_what_it_does_not_know():
    known = "a plan, channels, steps, a verdict, a certificate, terms, a check, a medium, a target, limits or volumes"
    with pytest.raises(TypeError, match=f"^thing: got int; it takes {known}.$"):
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

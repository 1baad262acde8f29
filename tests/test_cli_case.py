"""The case file: what it can say, and every kind of bad case refused in one sentence with file, line and key."""

from __future__ import annotations

import re

import numpy as np
import pytest

import flatplan as fp
from flatplan.cli.case import example_text, parse_case, read_case
from flatplan.cli.planning import run
from flatplan.cli.reading import CaseError
from flatplan.decide import LIMITS

CASE = """title = "A test"

[site]
flow = "linear"
length = "140 m"
area = "6000 m^2"

[site.rock]
permeability = "40 mD"
porosity = 0.12
compressibility = "5e-10 1/Pa"

[site.fluid]
viscosity = "0.5 cP"
compressibility = "4.5e-10 1/Pa"

[target]
start = "21 MPa"

[[target.stage]]
to = "22.5 MPa"
over = "3 d"

[[target.stage]]
hold = "1 d"

[limits]
max_rate = "9 m^3/h"
"""
ROCK = fp.Rock(permeability="40 mD", porosity=0.12, compressibility="5e-10 1/Pa")
WATER = fp.Fluid(viscosity="0.5 cP", compressibility="4.5e-10 1/Pa")
TABLES = """
[site.rock]
permeability = "40 mD"
porosity = 0.12
compressibility = "5e-10 1/Pa"

[site.fluid]
viscosity = "0.5 cP"
compressibility = "4.5e-10 1/Pa"
"""
MOVE = """
[target]
start = "21 MPa"

[[target.stage]]
to = "21.5 MPa"
over = "6 d"
"""


def changed(*pairs):
    text = CASE
    for old, new in pairs:
        assert text.count(old) >= 1, old
        text = text.replace(old, new, 1)
    return text


def line_of(text, start):
    return next(i for i, line in enumerate(text.splitlines(), 1) if line.startswith(start))


# --- good cases ------------------------------------------------------------------------------------


def test_a_case_is_what_the_library_would_be_told():
    case = parse_case(CASE, "case.toml")
    assert case.title == "A test" and case.scenario == "" and case.units == "metric" and case.every is None and case.tolerance == 1e-9
    assert case.medium == fp.slab(length="140 m", area="6000 m^2", rock=ROCK, fluid=WATER)
    assert case.target == fp.Target(start="21 MPa").move(to="22.5 MPa", over="3 d").hold("1 d")
    assert case.limits == fp.Limits(max_rate="9 m^3/h")


def test_the_shipped_example_says_everything_it_can_about_one_rock():
    case = parse_case(example_text(), "example.toml")
    assert case.every == 21600.0 and case.units == "metric" and case.tolerance == 1e-9
    assert len(case.target.moves) == 2 and case.target.end == 18 * 86400.0
    assert {"max_rate", "min_rate", "max_bottomhole_pressure"} <= set(case.limits.stated)
    assert case.scenario.startswith("A line of two injection wells")
    assert read_case("example").medium == case.medium


def test_every_limit_can_be_stated():
    values = {"max_rate": "9 m^3/h", "min_rate": "-9 m^3/h", "max_rate_change": "1 m^3/h/h", "max_bottomhole_pressure": "30 MPa"}
    values |= {"min_bottomhole_pressure": "10 MPa", "max_pressure_change": "1 bar/h", "max_volume": "900 m^3"}
    assert set(values) == set(LIMITS)
    table = "".join(f'{name} = "{value}"\n' for name, value in values.items())
    assert set(parse_case(changed(('max_rate = "9 m^3/h"\n', table)), "case.toml").limits.stated) == set(LIMITS)


GOOD = {
    "radial": (
        '[site]\nflow = "radial"\ntarget_radius = "150 m"\nwell_radius = "0.1 m"\nheight = "20 m"\n[site.well]\nskin = 3\n' + TABLES,
        MOVE,
    ),
    "spherical": ('[site]\nflow = "spherical"\ntarget_radius = "60 m"\nwell_radius = "2 m"\nshare = 0.5\n' + TABLES, MOVE),
    "confining bed": (
        '[site]\nlength = "140 m"\narea = "6000 m^2"\nheight = "20 m"\n'
        + 'leakage = { permeability = "0.0005 mD", thickness = "4 m", height = "20 m" }\n'
        + TABLES,
        MOVE,
    ),
    "leaky face": (
        '[site]\nlength = "140 m"\narea = "6000 m^2"\n[site.face]\nleak = "0.02 m^3/h/bar"\nstorage = "0.3 m^3/bar"\n' + TABLES,
        MOVE,
    ),
    "profile": (
        '[site]\nlength = "140 m"\narea = "6000 m^2"\n'
        + TABLES.replace('"40 mD"', '["40 mD", "60 mD", "30 mD"]').replace("0.12", '[0.12, 0.14, 0.11]\nat = ["0 m", "70 m", "140 m"]'),
        MOVE,
    ),
    "held face": (
        '[site]\nlength = "140 m"\narea = "6000 m^2"\n[site.face]\nheld = true\n' + TABLES,
        '[target]\nstart = "0 L/s"\n[[target.stage]]\nto = "0.2 L/s"\nover = "3 d"\n',
    ),
    "zones": (
        '[site]\nflow = "radial"\ntarget_radius = "150 m"\nheight = "20 m"\n'
        + TABLES[TABLES.index("[site.fluid]") :]
        + '\n[[site.zone]]\nto_radius = "40 m"\n'
        + TABLES[: TABLES.index("[site.fluid]")].replace("[site.rock]", "[site.zone.rock]")
        + '\n[[site.zone]]\nto_radius = "0.1 m"\nrock = { permeability = "200 mD", porosity = 0.2, compressibility = "5e-10 1/Pa" }\n',
        MOVE,
    ),
}


@pytest.mark.parametrize("name", GOOD)
def test_every_kind_of_site_is_planned_and_confirmed(name):
    site, target = GOOD[name]
    case = parse_case(site + target + '[pumping]\nevery = "12 h"\n[output]\nunits = "field"\n', "case.toml")
    steps = []
    outcome = run(case, steps.append)
    assert outcome.good and outcome.check.confirmed and outcome.check.subject == "plan"
    assert outcome.pumped is not None and outcome.pumped_check.subject == "steps"
    assert steps == ["planning", "judging", "confirming on the independent model", "making the pumped steps"]
    assert (case.medium.leaks, case.medium.face.held) == (name in ("confining bed", "leaky face", "held face"), name == "held face")
    assert case.medium.flow == {"radial": "radial", "spherical": "spherical", "zones": "radial"}.get(name, "linear")


def test_zones_are_the_ones_described():
    case = parse_case("".join(GOOD["zones"]), "case.toml")
    loose = fp.Rock(permeability="200 mD", porosity=0.2, compressibility="5e-10 1/Pa")
    zones = [fp.Zone(to_radius="40 m", rock=ROCK, fluid=WATER), fp.Zone(to_radius="0.1 m", rock=loose, fluid=WATER)]
    assert case.medium == fp.zoned(zones, flow="radial", target_radius="150 m", height="20 m")


def test_a_profile_is_the_one_described():
    segments = parse_case("".join(GOOD["profile"]), "case.toml").medium.segments
    assert [s.end for s in segments] == [70.0, 140.0]
    assert np.all([not s.uniform for s in segments])


def test_windows_line_ends_are_read(tmp_path):
    path = tmp_path / "case.toml"
    path.write_bytes(CASE.replace("\n", "\r\n").encode())
    assert read_case(path).target == parse_case(CASE, "case.toml").target


# --- bad cases -------------------------------------------------------------------------------------

BAD = {
    # unknown keys at every level
    "top": (
        ("title =", "titel ="),
        "titel =",
        "titel: is not a key here; there are title, scenario, site, target, limits, plan, pumping, output.",
    ),
    "site key": (("length =", "lenght ="), "lenght =", "[site] lenght: is not a key here; there are flow, length, area, height, "),
    "key of another flow": (("area =", "well_radius ="), "well_radius =", "[site] well_radius: is not a key here; there are "),
    "rock key": (
        ("porosity", "poro"),
        "poro =",
        "[site.rock] poro: is not a key here; there are permeability, porosity, compressibility, at.",
    ),
    "fluid key": (("viscosity", "mu"), "mu =", "[site.fluid] mu: is not a key here; there are viscosity, compressibility."),
    "well key": (
        ("[target]", "[site.well]\nskn = 2\n[target]"),
        "skn =",
        "[site.well] skn: is not a key here; there are skin, storage, resistance.",
    ),
    "face key": (
        ("[target]", "[site.face]\nleek = 2\n[target]"),
        "leek =",
        "[site.face] leek: is not a key here; there are leak, storage, held.",
    ),
    "target key": (("start =", "begin ="), "begin =", "[target] begin: is not a key here; there are start, stage."),
    "stage key": (
        ("over =", "during ="),
        "during =",
        "[target.stage] during: is not a key here; there are to, by, over, order, easing, hold.",
    ),
    "limits key": (("max_rate", "max_rates"), "max_rates =", "[limits] max_rates: is not a key here; there are max_rate, min_rate, "),
    "plan key": (("[limits]", "[plan]\ntol = 1e-9\n[limits]"), "tol =", "[plan] tol: is not a key here; there are tolerance."),
    "pumping key": (("[limits]", '[pumping]\nstep = "6 h"\n[limits]'), "step =", "[pumping] step: is not a key here; there are every."),
    "output key": (("[limits]", '[output]\nunit = "SI"\n[limits]'), "unit =", "[output] unit: is not a key here; there are units."),
    # missing
    "no length": (('length = "140 m"\n', ""), "[site]", "[site] length: is missing."),
    "no porosity": (("porosity = 0.12\n", ""), "[site.rock]", "[site.rock] porosity: is missing."),
    "no start": (('start = "21 MPa"\n', ""), "[target]", "[target] start: is missing."),
    "no over": (('over = "3 d"\n', ""), "[[target.stage]]", "[target.stage] over: is missing."),
    # values
    "dimension": (('"140 m"', '"140 d"'), "length =", "[site] length: got '140 d', which is not a length; "),
    "no unit": (('"140 m"', '"140"'), "length =", "[site] length: got '140', a text without a unit; "),
    "negative": (('"140 m"', '"-140 m"'), "length =", "[site] length: got '-140 m'; it must be above zero."),
    "NaN": (('"140 m"', "nan"), "length =", "[site] length: got nan, which is not finite; "),
    "porosity": (("0.12", "1.2"), "porosity =", "[site.rock] porosity: "),
    "viscosity": (('"0.5 cP"', '"0.5 bar"'), "viscosity =", "[site.fluid] viscosity: got '0.5 bar', which is not a "),
    "a list": (('"140 m"', "[1, 2]"), "length =", "[site] length: got [1, 2]; it takes a length"),
    "a date": (('"140 m"', "2024-01-01"), "length =", "[site] length: got "),
    "order": (
        ('over = "3 d"', 'over = "3 d"\norder = 2.5'),
        "order =",
        "[target.stage] order: got 2.5; it takes a Gevrey order above 1 and up to 2: ",
    ),
    "order 1": (
        ('over = "3 d"', 'over = "3 d"\norder = 1'),
        "order =",
        "[target.stage] order: got 1; it takes a Gevrey order above 1 and up to 2: ",
    ),
    "zero duration": (('"3 d"', '"0 d"'), "over =", "[target.stage] over: got '0 d'; it must be above zero."),
    "no change": (
        ('"22.5 MPa"', '"21 MPa"'),
        "to =",
        "[target.stage] to: got '21 MPa', which changes nothing; use hold() to stay at a level.",
    ),
    "hold with others": (('hold = "1 d"', 'hold = "1 d"\nto = "22 MPa"'), "hold =", "[target.stage] hold: stands alone in its stage; "),
    "hold below zero": (('hold = "1 d"', 'hold = "-1 d"'), "hold =", "[target.stage] hold: got '-1 d'; it must be above zero."),
    "limit": (('"9 m^3/h"', '"6 bar"'), "max_rate =", "[limits] max_rate: got '6 bar', which is not a "),
    "limits at odds": (
        ('"9 m^3/h"', '"9 m^3/h"\nmin_rate = "10 m^3/h"'),
        "min_rate =",
        "[limits] min_rate: got 10 m³/h, which is not below max_rate (9 m³/h);",
    ),
    "units": (
        ("[limits]", '[output]\nunits = "imperial"\n[limits]'),
        "units =",
        "[output] units: got 'imperial'; it takes one of 'SI', 'metric', 'field'.",
    ),
    "flow": (('"linear"', '"cubic"'), "flow =", "[site] flow: got 'cubic'; it takes one of 'linear', 'radial', 'spherical'."),
    "every": (("[limits]", '[pumping]\nevery = "0 h"\n[limits]'), "every =", "[pumping] every: got '0 h'; it must be above zero."),
    "title": (('"A test"', "3"), "title =", "title: got 3; it takes text."),
    "scenario": (("[site]", "scenario = 3\n[site]"), "scenario =", "scenario: got 3; it takes text."),
    # tables that are none
    "output is no table": (("title =", 'output = "field"\ntitle ='), "output =", "output: got 'field'; it takes a table."),
}


@pytest.mark.parametrize("name", BAD)
def test_a_bad_case_is_refused_with_its_line_and_key(name):
    """The line is the one the wrong key stands on, or the head of the table it is missing from."""
    change, start, said = BAD[name]
    text = changed(change)
    with pytest.raises(CaseError) as error:
        parse_case(text, "case.toml")
    message = str(error.value)
    assert message.startswith(f"case.toml, line {line_of(text, start)}: {said}"), message
    assert "\n" not in message and message.endswith(".")


WHOLE = {
    "no site": (CASE[CASE.index("[target]") :], "case.toml: site: is missing."),
    "no target": (CASE[: CASE.index("[target]")], "case.toml: target: is missing."),
    "empty": ("", "case.toml: site: is missing."),
    "no stages": (
        changed((CASE[CASE.index("[[target.stage]]") : CASE.index("[limits]")], "")),
        "stage: is missing; add at least one [[target.stage]]",
    ),
    "site is a number": ("site = 3\n", "case.toml, line 1: site: got 3; it takes a table."),
    "not TOML": (changed(("[site]", "[site")), r"case.toml: is not valid TOML: .*line 3"),
    "a key twice": (changed(("length =", 'length = "1 m"\nlength =')), "case.toml: is not valid TOML: "),
    "too deep": ("title = " + "[" * 100_000, "case.toml: is not valid TOML: "),
    "too many digits": ("title = " + "1" * 10_000, "case.toml: is not valid TOML: "),
    "one zone table": (
        '[site]\n[site.zone]\nlength = "3 m"\n' + MOVE,
        r"zone: is one table; zones are a list, each headed \[\[site.zone\]\]\.",
    ),
    "zone without fluid": (
        '[site]\n[[site.zone]]\nlength = "3 m"\narea = "3 m^2"\n' + MOVE,
        r"case.toml, line 2: \[site.zone\] fluid: is missing, here and in \[site\]\.",
    ),
}


@pytest.mark.parametrize("name", WHOLE)
def test_a_case_that_is_wrong_as_a_whole(name):
    text, said = WHOLE[name]
    said = said if "\\" in said or ".*" in said else re.escape(said)
    with pytest.raises(CaseError, match=said) as error:
        parse_case(text, "case.toml")
    assert str(error.value).endswith(".") and "\n" not in str(error.value)


def test_zone_radii_that_turn_back_are_refused():
    text = "".join(GOOD["zones"]).replace('"0.1 m"', '"60 m"')
    with pytest.raises(CaseError, match=r"^case\.toml, line \d+: \[site\] .*\.$") as error:
        parse_case(text, "case.toml")
    assert "radi" in str(error.value)


def test_the_second_of_two_zones_is_the_one_named():
    text = "".join(GOOD["zones"]).replace('to_radius = "0.1 m"', 'to_radius = "0.1 d"')
    with pytest.raises(
        CaseError, match=rf"^case\.toml, line {line_of(text, 'to_radius = ' + chr(34) + '0.1')}: \[site\.zone\] to_radius: got '0\.1 d'"
    ):
        parse_case(text, "case.toml")


def test_the_second_of_two_stages_is_the_one_named():
    text = CASE + '\n[[target.stage]]\nto = "20 MPa"\nover = "3 bar"\n'
    with pytest.raises(
        CaseError, match=rf"^case\.toml, line {line_of(text, 'over = ' + chr(34) + '3 bar')}: \[target\.stage\] over: got '3 bar'"
    ):
        parse_case(text, "case.toml")


def test_a_sample_of_a_profile_is_named_on_its_line():
    text = "".join(GOOD["profile"]).replace("[0.12, 0.14, 0.11]", '[0.12, "x", 0.11]')
    with pytest.raises(CaseError, match=rf"^case\.toml, line {line_of(text, 'porosity')}: \[site\.rock\] porosity\[1\]: got 'x'"):
        parse_case(text, "case.toml")


def test_a_key_in_an_inline_table_is_named_on_its_line():
    text = "".join(GOOD["confining bed"]).replace('"4 m"', '"4 d"')
    with pytest.raises(CaseError, match=rf"^case\.toml, line {line_of(text, 'leakage')}: \[site\.leakage\] confining thickness: got '4 d'"):
        parse_case(text, "case.toml")


def test_files_that_cannot_be_read(tmp_path):
    with pytest.raises(CaseError, match=r"nothing\.toml: cannot be read \(No such file or directory\)\.$"):
        read_case(tmp_path / "nothing.toml")
    with pytest.raises(CaseError, match=r": cannot be read \(Is a directory\)\.$"):
        read_case(tmp_path)
    path = tmp_path / "case.toml"
    path.write_bytes(b'title = "\xff\xfe"\n')
    with pytest.raises(CaseError, match=r"^case\.toml: is not UTF-8 text\.$"):
        read_case(path)
    path.write_text("#" * 1_000_001, encoding="utf-8")
    with pytest.raises(CaseError, match=r"^case\.toml: is larger than 1000 kB; a case is a page of text\.$"):
        read_case(path)
    path.write_text("#" * 1_000_000, encoding="utf-8")
    with pytest.raises(CaseError, match="site: is missing"):
        read_case(path)

"""Units: every number that enters or leaves the package."""

from __future__ import annotations

import math
import re
import string
from decimal import Decimal
from fractions import Fraction

import numpy as np
import pint
import pytest
from hypothesis import given
from hypothesis import strategies as st

from flatplan import units

# What each published factor is printed as, with how far the print was consulted (see references.md).
# (text, kind, printed in SI, relative half-width of the last printed digit, source)
NIST = "[NISTSP811] appendix B.8, read in a machine-readable copy"
PUBLISHED = [
    ("1 psi", "pressure", 6.894757e3, 1e-7, NIST),
    ("1 lbf/in^2", "pressure", 6.894757e3, 1e-7, NIST),
    ("1 bar", "pressure", 1.0e5, 0.0, NIST),
    ("1 atm", "pressure", 1.01325e5, 0.0, NIST),
    ("1 darcy", "permeability", 9.869233e-13, 1e-7, NIST + "; [SPEMetricStandard1984]"),
    ("1 D", "permeability", 9.869233e-13, 1e-7, NIST),
    ("1 mD", "permeability", 9.869233e-16, 1e-7, "[SPEMetricStandard1984]"),
    ("1 md", "permeability", 9.86923e-16, 1e-6, "[Chaudhry2004] table A-1, page scan"),
    ("1 bbl", "volume", 1.589873e-1, 1e-6, NIST),
    ("1 cP", "viscosity", 1.0e-3, 0.0, NIST),
    ("1 ft", "length", 3.048e-1, 0.0, "[NISTSP811], read in a course handout"),
    ("1 d", "time", 8.64e4, 0.0, NIST),
    ("1 bbl/day", "rate", 1.840131e-6, 2e-7, "[Chaudhry2004] table A-5, page scan"),
    ("5.6146 ft^3", "volume", 1.589873e-1, 1e-5, "a course handout: cubic feet to the barrel"),
]

# The same factors from their definitions, in exact arithmetic: pound 0.45359237 kg, inch 0.0254 m,
# standard gravity 9.80665 m/s², US gallon 231 cubic inches, darcy 1e-7/101325 m² (1 cP (cm/s)/(atm/cm)).
INCH, FOOT, DAY = Fraction("0.0254"), Fraction("0.3048"), Fraction(86400)
PSI = Fraction("0.45359237") * Fraction("9.80665") / INCH**2
BARREL = 42 * 231 * INCH**3
DARCY = Fraction(1, 10**7) / 101325
EXACT = [
    ("1 psi", "pressure", PSI, 6894.757293168),
    ("1 bbl", "volume", BARREL, 0.158987294928),
    ("1 bbl/day", "rate", BARREL / DAY, 1.84013072833e-06),
    ("1 D", "permeability", DARCY, 9.86923266716e-13),
    ("1 mD", "permeability", DARCY / 1000, 9.86923266716e-16),
    ("1 ft^3", "volume", FOOT**3, 0.158987294928 / 5.61458333333),
]


@pytest.mark.parametrize(("words", "kind", "printed", "half_width", "source"), PUBLISHED, ids=[row[0] for row in PUBLISHED])
def test_printed_conversion_factors(words, kind, printed, half_width, source):
    assert units.si(words, kind, "x") == pytest.approx(printed, rel=half_width, abs=0.0), source


@pytest.mark.parametrize(("words", "kind", "defined", "recomputed"), EXACT, ids=[row[0] for row in EXACT])
def test_factors_follow_from_their_definitions(words, kind, defined, recomputed):
    got = units.si(words, kind, "x")
    assert got == float(defined)  # rounded once
    assert got == pytest.approx(recomputed, rel=1e-11, abs=0.0)


# Constants of oilfield formulas, from the size of one unit of each kind: printed, and recomputed apart from the package.
OILFIELD = [
    ("dimensionless time", lambda k, mu, c, q, ft, psi: 3600 * k / (mu * c * ft**2), 0.0002637, 0.000263678638),
    ("pressure per rate", lambda k, mu, c, q, ft, psi: q * mu / (2 * math.pi * k * ft * psi), 141.2, 141.205455523),
    ("line source", lambda k, mu, c, q, ft, psi: q * mu / (4 * math.pi * k * ft * psi), 70.6, 70.602727761),
    ("slope per cycle", lambda k, mu, c, q, ft, psi: math.log(10) / 2 * q * mu / (2 * math.pi * k * ft * psi), 162.6, 162.568788473),
    ("rate per pressure", lambda k, mu, c, q, ft, psi: 2 * math.pi * k * ft * psi / (q * mu), 0.007082, 0.00708187935),
    ("argument of the line source", lambda k, mu, c, q, ft, psi: mu * c * ft**2 / (4 * k * 3600), 948.0, 948.123831),
    ("Darcy's law", lambda k, mu, c, q, ft, psi: k * ft**2 * (psi / ft) / mu / q, 1.127e-3, 0.00112711610540),
    ("wellbore storage", lambda k, mu, c, q, ft, psi: q * 86400 / (2 * math.pi * ft**3), 0.8936, 0.893588691),
    ("pseudo-steady slope", lambda k, mu, c, q, ft, psi: q * 3600 / ft**3, 0.2339, 0.233940972),
    ("cubic feet to the barrel", lambda k, mu, c, q, ft, psi: q * 86400 / ft**3, 5.615, 5.61458333333),
    ("water gradient", lambda k, mu, c, q, ft, psi: 1000 * 9.80665 * ft / psi, 0.433, 0.433527504),
    ("millidarcy foot", lambda k, mu, c, q, ft, psi: k * ft, 3.00814e-16, 3.00814211695e-16),
]


@pytest.mark.parametrize(("name", "formula", "printed", "recomputed"), OILFIELD, ids=[row[0] for row in OILFIELD])
def test_oilfield_constants(name, formula, printed, recomputed):
    """Printed in [Lee1982], [Earlougher1977] and [Dake1978] (from memory); recomputed apart from the package."""
    one_of_each = {"mD": "permeability", "cP": "viscosity", "1/psi": "compressibility", "bbl/d": "rate", "ft": "length", "psi": "pressure"}
    got = formula(*(units.si(f"1 {unit}", kind, "x") for unit, kind in one_of_each.items()))
    assert got == pytest.approx(recomputed, rel=2e-9, abs=0.0)
    assert got == pytest.approx(printed, rel=2e-3, abs=0.0)


@pytest.mark.parametrize(
    ("words", "kind", "expected"),
    [
        ("3 L/s", "rate", 0.003),
        ("1e3 m3/d", "rate", 1000 / 86400),
        ("5e-10 1/Pa", "compressibility", 5e-10),
        ("5e-10/Pa", "compressibility", 5e-10),
        ("5e-10 Pa^-1", "compressibility", 5e-10),
        ("12 %", "fraction", 0.12),
        ("0.12", "fraction", 0.12),
        ("5 ppm", "fraction", 5e-6),
        ("  40\u00a0mD ", "permeability", float(40 * DARCY / 1000)),
        ("1 µm²", "permeability", 1e-12),
        ("0.5 L/s/h", "rate change", 0.0005 / 3600),
        ("20 kPa/h", "pressure rate", 20000 / 3600),
        ("0.5 cp", "viscosity", 0.0005),
        ("1 Pa·s", "viscosity", 1.0),
        ("-.5e1 MPa", "pressure", -5e6),
        ("1_000 m", "length", 1000.0),
        ("2 m³ Pa⁻¹", "storage", 2.0),
        ("2 Pa**-1 m**3", "storage", 2.0),
        ("2 (m^3) / (Pa)", "storage", 2.0),
        ("0.1 bar/(m^3/h)", "resistance", 0.1e5 * 3600),
        ("1 m/s m^2", "rate", 1.0),
        ("100 STB/D", "rate", float(100 * BARREL / DAY)),
        ("2 barrels", "volume", float(2 * BARREL)),
        ("10 kgf/cm2", "pressure", 980665.0),
    ],
)
def test_ways_of_writing(words, kind, expected):
    assert units.si(words, kind, "x") == pytest.approx(expected, rel=1e-15, abs=0.0)


def test_the_example_of_every_kind_is_taken():
    for kind in units.KINDS.values():
        assert math.isfinite(units.si(kind.example, kind.name, "x")), kind.name


# --- what is refused -------------------------------------------------------------------------------

TAKES = 'it takes a length such as "140 m", or a number in m'
NOT_A_NUMBER = [None, True, False, np.True_, [1.0], (1.0,), {"a": 1}, b"1 m", 1j, object(), np.array([1.0, 2.0]), np.array(["1 m"]), len]


@pytest.mark.parametrize("value", NOT_A_NUMBER, ids=lambda value: type(value).__name__)
def test_what_is_not_a_number_is_refused(value):
    with pytest.raises(ValueError, match=r"^reach: got .+; it takes a length such as \"140 m\", or a number in m\.$") as caught:
        units.si(value, "length", "reach")
    assert "\n" not in str(caught.value)


@pytest.mark.parametrize(
    ("value", "why"),
    [
        ("3 kg", "which is not a length"),
        ("3 s", "which is not a length"),
        ("3 m^2", "which is not a length"),
        ("3 mD", "which is not a length"),
        ("3 m/m", "which is not a length"),
        ("3 degC", "which is not a length"),
        ("3 °C", "which is not a length"),
        ("3 dB", "which is not a length"),
        ("3 furlongz", "whose unit is not known"),
        ("3 Mpa", "whose unit is not known"),
        ("3 psig", "whose unit is not known"),
        ("3", "a text without a unit"),
        ("-1.5e3 ", "a text without a unit"),
        ("1e999 m", "which is not finite"),
        ("9" * 50 + "e300 m", "which is not finite"),
        ("-1e999 km", "which is not finite"),
        (float("nan"), "which is not finite"),
        (float("inf"), "which is not finite"),
        (-np.inf, "which is not finite"),
        (Decimal("sNaN"), "which is not finite"),
        (10**400, "which is not finite"),
    ],
)
def test_the_reason_is_given(value, why):
    with pytest.raises(ValueError, match=f"^reach: got .+, {why}; {re.escape(TAKES)}\\.$"):
        units.si(value, "length", "reach")


HOSTILE = [
    "9**9**9 m",
    "1 m**9**9**9**9",
    "1 m^99^99",
    "1 (((km**99)**99)**99)**99",
    "1 m²²²²²²²²²²²²²²",
    "1 m**9e9",
    "1 m**999",
    "1 m^-999",
    "1 m33",
    "__import__('os')",
    "1 __import__('os').system('true')",
    "1 m; import os",
    "1 m if 1 else 2",
    "1 [m]",
    "1 {m}",
    "1 m.to('s')",
    "1 lambda: 0",
    "1 m\n2 m",
    "1 m\x00",
    "0x10 m",
    "1e5e5 m",
    "1,000 m",
    "0,5 m",
    "1__0 m",
    "1_ m",
    "--1 m",
    "1 2 m",
    "1 ((((m",
    "1 m))))",
    "1 /",
    "1 *",
    "1 **",
    "1 %%",
    "1 m**s",
    "nan m",
    "inf m",
    "infinity m",
    "٣ m",
    "\u22123 m",
    "m",
    "",
    "   ",
    "\t\n",
    "<b>1 m</b>",
    "'; drop table rates; --",
    "${HOME}",
    "1 m" + " " * 10**6 + "x",
    "1 " + "m" * 10**6,
    "1 " + "(" * 10**5,
    "9" * 10**6,
]


@pytest.mark.parametrize("words", HOSTILE, ids=[ascii(words[:30]) for words in HOSTILE])
def test_hostile_text_is_one_short_sentence(words):
    with pytest.raises(ValueError, match=r"^reach: got .*it takes a length such as") as caught:
        units.si(words, "length", "reach")
    sentence = str(caught.value)
    assert len(sentence) < 250
    assert "\n" not in sentence
    assert caught.value.__cause__ is None
    assert caught.value.__suppress_context__ or caught.value.__context__ is None


@given(st.text(max_size=90), st.sampled_from(sorted(units.KINDS)))
def test_any_text_is_a_finite_number_or_one_sentence(words, kind):
    _finite_or_one_sentence(words, kind)


@given(
    st.floats(allow_nan=False, allow_infinity=False),
    st.text(alphabet="mdsPahrbcDLftinpsl kMGu/*^²³23-() 1%°", max_size=14),
    st.sampled_from(sorted(units.KINDS)),
)
def test_any_number_with_any_unit_text_is_a_finite_number_or_one_sentence(number, unit, kind):
    _finite_or_one_sentence(f"{number} {unit}", kind)


@given(st.text(alphabet=string.ascii_letters, min_size=1, max_size=6), st.sampled_from(sorted(units.KINDS)))
def test_any_word_for_a_unit_is_a_finite_number_or_one_sentence(unit, kind):
    _finite_or_one_sentence(f"1 {unit}", kind)


def _finite_or_one_sentence(words: str, kind: str) -> None:
    try:
        number = units.si(words, kind, "x")
    except ValueError as error:
        assert str(error).startswith("x: got "), error
        assert "\n" not in str(error)
    else:
        assert isinstance(number, float)
        assert math.isfinite(number)


def test_an_angle_or_a_count_of_bits_is_not_a_fraction():
    """To pint, radian and bit have no dimension, so "10 deg" would pass for a porosity of 0.1745."""
    for words in ("10 deg", "0.1 rad", "1 bit", "3 count"):
        with pytest.raises(ValueError, match="^porosity: got .+, which is not a fraction; it takes a fraction"):
            units.si(words, "fraction", "porosity")
    with pytest.raises(ValueError, match="^porosity: got .+, which is not a fraction"):
        units.si(pint.UnitRegistry().Quantity(10.0, "deg"), "fraction", "porosity")


@pytest.mark.parametrize(
    ("sign", "refused", "taken", "words"),
    [
        ("positive", [0, -1, "0 m", "-3 ft"], [1e-300, "1 nm"], "above zero"),
        ("not negative", [-1e-300, "-1 m"], [0, 0.0, "0 m"], "zero or more"),
    ],
)
def test_signs(sign, refused, taken, words):
    for value in taken:
        units.si(value, "length", "reach", sign)
    for value in refused:
        with pytest.raises(ValueError, match=f"^reach: got {re.escape(repr(value))}; it must be {words}\\.$"):
            units.si(value, "length", "reach", sign)


# --- plain numbers and quantities ------------------------------------------------------------------


THREE = [3, 3.0, np.float64(3), np.float32(3), np.int16(3), np.uint8(3), Fraction(3), Decimal(3), np.array(3.0), np.array(3)]


@pytest.mark.parametrize("value", THREE, ids=lambda value: f"{type(value).__name__}")
def test_plain_numbers_are_si(value):
    got = units.si(value, "length", "x")
    assert got == 3.0
    assert type(got) is float


@pytest.mark.parametrize("number_type", [float, Decimal, Fraction])
def test_quantities_of_any_registry(number_type):
    reg = pint.UnitRegistry(non_int_type=number_type, cache_folder=None)
    for magnitude in (3, number_type(3)):
        assert units.si(reg.Quantity(magnitude, "liter/second"), "rate", "x") == pytest.approx(0.003, rel=1e-15, abs=0.0)
    with pytest.raises(ValueError, match="^x: got .+, which is not a rate; it takes a rate such as"):
        units.si(reg.Quantity(3, "kilogram/second^2"), "rate", "x")
    with pytest.raises(ValueError, match="^x: got .+, which is not a pressure"):
        units.si(reg.Quantity(3, "degC"), "pressure", "x")


def test_our_own_registry_knows_the_oilfield():
    reg = units.registry()
    assert reg is units.registry()
    written = {"40 mD": "permeability", "7 bbl/day": "rate", "3 STB": "volume", "0.5 cp": "viscosity", "2 bara": "pressure"}
    for words, kind in written.items():
        assert units.si(reg(words), kind, "x") == pytest.approx(units.si(words, kind, "x"), rel=1e-15, abs=0.0), words
    assert str(reg.Quantity(3, "m^2/s")) == "3 meter ** 2 / second"


def test_a_barrel_of_another_registry_keeps_its_own_size():
    """Pint's own barrel has 31.5 US gallons; a quantity means what its registry says, text what we say."""
    theirs = units.si(pint.UnitRegistry().Quantity(4.0, "bbl"), "volume", "x")
    assert theirs == pytest.approx(3 * float(BARREL), rel=1e-14, abs=0.0)
    assert units.si("4 bbl", "volume", "x") == float(4 * BARREL)


def test_a_level_in_decibel_is_not_a_power():
    with pytest.raises(ValueError, match="^x: got '20 dBm', which is not a power; it takes a power such as"):
        units.si("20 dBm", "power", "x")
    for converts_by_itself in (False, True):
        reg = pint.UnitRegistry(autoconvert_offset_to_baseunit=converts_by_itself)
        with pytest.raises(ValueError, match="^x: got .+, which is not a power; it takes a power such as"):
            units.si(reg.Quantity(20.0, "dBm"), "power", "x")


def test_a_quantity_that_pint_cannot_print_is_still_named():
    """Exponents of a registry of fractions are fractions, and pint has no way to write them."""
    quantity = pint.UnitRegistry(non_int_type=Fraction, cache_folder=None).Quantity(Fraction(3), "kg/s^2")
    with pytest.raises(ValueError, match="^x: got .+, which is not a length; it takes a length such as"):
        units.si(quantity, "length", "x")


def test_a_quantity_that_holds_no_number_is_refused():
    reg = pint.UnitRegistry()
    for magnitude in (float("nan"), float("inf"), np.array([1.0, 2.0])):
        with pytest.raises(ValueError, match="^x: got .+ it takes a length such as"):
            units.si(reg.Quantity(magnitude, "m"), "length", "x")


def test_what_only_looks_like_a_quantity_is_refused():
    class Lookalike:
        magnitude = 3.0
        units = "m"

    with pytest.raises(ValueError, match="^x: got .+; it takes a length such as"):
        units.si(Lookalike(), "length", "x")


# --- arrays ----------------------------------------------------------------------------------------


def test_arrays_are_taken_in_many_forms():
    day = 86400.0
    reg = pint.UnitRegistry()
    for values in (
        ["1 d", "2 d"],
        ("1 d", 2 * day),
        [reg.Quantity(1, "day"), "48 h"],
        np.array(["1 d", "2 d"]),
        np.array(["1 d", 2 * day], dtype=object),
        reg.Quantity([1, 2], "day"),
        reg.Quantity(np.array([1.0, 2.0]), "day"),
        np.array([1, 2]) * 86400,
        (n * day for n in (1, 2)),
        [Fraction(86400), Decimal(172800)],
        range(86400, 172801, 86400),
    ):
        got = units.si_array(values, "time", "times")
        assert got.dtype == np.float64
        assert got.tolist() == [day, 2 * day]
    for one in ("1 d", day, 86400, np.float32(day), reg.Quantity(1, "day"), np.array(day)):
        assert units.si_array(one, "time", "times").tolist() == [day]


def test_an_array_is_copied():
    given_array = np.array([1.0, 2.0])
    units.si_array(given_array, "time", "times")[0] = 9.0
    assert given_array[0] == 1.0


@pytest.mark.parametrize(
    ("values", "sentence"),
    [
        ([], "got an empty list; it takes at least one time"),
        (np.array([]), "got an empty list; it takes at least one time"),
        (np.zeros((2, 0)), r"got an array of shape \(2, 0\); it takes a flat list of time values"),
        (np.ones((2, 3)), r"got an array of shape \(2, 3\); it takes a flat list of time values"),
        ([[1.0], [2.0]], r"\[0\]: got \[1\.0\]; it takes a time such as"),
        ([[1], [1, 2]], r"\[0\]: got \[1\]; it takes a time such as"),
        ([1.0, float("nan")], "got nan at position 1; every time must be finite"),
        ([1.0, 2.0, -np.inf], "got -inf at position 2; every time must be finite"),
        (np.ma.array([1.0, 2.0], mask=[False, True]), "got nan at position 1"),
        ([True, 2.0], r"\[0\]: got True; it takes a time such as"),
        (np.array([True]), "got values of type bool"),
        (np.array([1j]), "got values of type complex128"),
        (np.array(["2020-01-01"], dtype="datetime64[D]"), "got values of type datetime64"),
        ([1.0, None], r"\[1\]: got None; it takes a time such as"),
        (["1 d", "2 m"], r"\[1\]: got '2 m', which is not a time"),
        (["1 d", "x"], r"\[1\]: got 'x'; it takes a time such as"),
        (None, "got None; it takes a time such as"),
        ("2 m", "got '2 m', which is not a time"),
        (b"3 d", "got b'3 d'; it takes a flat list of time values"),
        ({1.0, 2.0}, "got .+; it takes a flat list of time values"),
        ({"a": 1.0}, "got .+; it takes a flat list of time values"),
        ([10**400], "got .+, with a number beyond the range of a float; it takes a flat list"),
        (pint.UnitRegistry().Quantity([1.0, 2.0], "m"), "got .+, which is not a time"),
    ],
)
def test_arrays_that_are_refused(values, sentence):
    with pytest.raises(ValueError, match=f"^times(: )?{sentence}") as caught:
        units.si_array(values, "time", "times")
    assert "\n" not in str(caught.value)


# --- what is shown ---------------------------------------------------------------------------------

EVERY_KIND_AND_SYSTEM = [(kind, system) for kind in units.KINDS for system in units.SYSTEMS]


@pytest.mark.parametrize(("kind", "system"), EVERY_KIND_AND_SYSTEM)
@given(value=st.floats(min_value=1e-30, max_value=1e30) | st.floats(min_value=-1e30, max_value=-1e-30) | st.just(0.0))
def test_what_is_shown_reads_back(kind, system, value):
    """SI → shown number and label → text → SI, for every kind in every system: labels are units too."""
    number, label = units.shown(value, kind, system)
    assert number * units.unit_factor(kind, system) == pytest.approx(value, rel=4e-16, abs=0.0)
    assert units.si(f"{number!r} {label}", kind, "x") == pytest.approx(value, rel=1e-15, abs=0.0)
    assert units.si(units.text(value, kind, system), kind, "x") == pytest.approx(value, rel=6e-4, abs=0.0)


@pytest.mark.parametrize(("kind", "system"), EVERY_KIND_AND_SYSTEM)
def test_arrays_are_shown_like_numbers(kind, system):
    values = np.array([0.0, 1.5, -2.5e7])
    shown, label = units.shown(values, kind, system)
    assert shown.tolist() == [units.shown(v, kind, system)[0] for v in values.tolist()]
    assert label == units.label(kind, system)
    assert (label == "") == (kind == "fraction")
    assert values.tolist() == [0.0, 1.5, -2.5e7]


def test_systems_by_name():
    assert units.text(2.1e7, "pressure") == "210 bar"
    assert units.text(2.1e7, "pressure", "field") == "3046 psi"
    assert units.text(2.1e7, "pressure", "SI") == "2.1e+07 Pa"
    assert units.text(0.12, "fraction") == "0.12"
    assert units.text(0.003, "rate", "field", digits=6) == "1630.32 bbl/d"
    for call in (units.label, units.unit_factor):
        with pytest.raises(ValueError, match='^units: got \'imperial\'; it takes one of "SI", "metric", "field".$'):
            call("pressure", "imperial")
    with pytest.raises(ValueError, match="^units: got 'si'; it takes one of"):
        units.shown(1.0, "pressure", "si")
    with pytest.raises(ValueError, match="^units: got None; it takes one of"):
        units.text(1.0, "pressure", None)

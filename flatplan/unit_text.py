"""Reading text such as "0.1 bar/(m^3/h)": a number and a unit, by a small grammar of our own.

::

    text    number unit
    unit    [1 /] term { [* · / per] term }      from left to right; nothing between two terms multiplies
    term    name [power]  or  ( unit )
    power   ^2, **-2, ², ⁻¹, or a digit as in "m3/h"; one per name, at most two digits

Pint knows the names and converts, but is never handed the text itself: what it makes of arbitrary text
changes from version to version, and the value of a power of a power can have a billion digits.

>>> split("40 mD")
('40', 'mD')
>>> exact_factor("bbl/d", "m**3/s")
Fraction(1104078437, 600000000000000)
"""

from __future__ import annotations

import logging
import re
from fractions import Fraction
from functools import lru_cache
from typing import Any

__all__ = ["UnreadableUnit", "exact_factor", "factor", "registry", "split"]

_OILFIELD = (
    "barrel = 42 * gallon = bbl",
    "stb = bbl",
    "STB = bbl",
    "D = darcy",
    "md = 1e-3 * darcy",
    "cp = centipoise",
    "bpd = bbl / day",
    "bwpd = bbl / day",
    "gpm = gallon / minute",
    "psia = psi",
    "bara = bar",
    "lps = liter / second",
)


class UnreadableUnit(ValueError):
    """Text that the grammar does not read."""


def _oilfield_registry(number_type: type) -> Any:
    """A pint registry with our units; pint logs a redefinition at warning level, which is meant here."""
    import pint

    reg: Any = pint.UnitRegistry(cache_folder=None, non_int_type=number_type)
    logger = logging.getLogger("pint")
    level = logger.level
    logger.setLevel(logging.ERROR)
    try:
        for line in _OILFIELD:
            reg.define(line)
    finally:
        logger.setLevel(level)
    return reg


@lru_cache(maxsize=1)
def registry() -> Any:
    """The pint registry with the units of the oilfield added (loads pint on first use).

    "bbl", "barrel" and "STB" are the oilfield barrel of 42 US gallons, "D" and "mD" the darcy and its
    thousandth ("md" too), "cp" the centipoise. A quantity of another pint registry is taken at that
    registry's word: in pint's own, "bbl" and "barrel" are 31.5 US gallons.

    Returns
    -------
    pint.UnitRegistry
        The same one every time.
    """
    return _oilfield_registry(float)


@lru_cache(maxsize=1)
def _exact_registry() -> Any:
    """For text: exact fractions, rounded to a float once, so that "3 L/s" is 0.003."""
    return _oilfield_registry(Fraction)


def factor(unit: Any, si_unit: str) -> Any:
    """How many ``si_unit`` one ``unit`` is.

    Parameters
    ----------
    unit : pint.Unit
        Of any registry.
    si_unit : str
        In pint's notation; empty for a plain number.

    Returns
    -------
    float, Fraction or Decimal
        As the registry counts.

    Raises
    ------
    pint.PintError
        Of another dimension, not a multiple of the SI unit (a temperature, a level in decibel), or an angle, a
        count of bits or the like where a plain number is meant.
    """
    import pint

    one, zero = 1 * unit, 0 * unit
    try:
        converted, nought = one.to(si_unit or "dimensionless"), zero.to(si_unit or "dimensionless")
        # radian and bit are dimensionless to pint; to us "10 deg" is not a porosity
        unfit = one.to_root_units().units != converted.to_root_units().units or nought.magnitude != 0
    except TypeError:  # pint's own error of dimension, or a logarithm asked of a fraction
        unfit = True
    if unfit:
        raise pint.DimensionalityError(unit, si_unit)
    return converted.magnitude


_NUMBER = re.compile(r"\s*([+-]?(?:[0-9]+(?:_[0-9]+)*(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][+-]?[0-9]{1,3})?)\s*(.*?)\s*", re.DOTALL)
_LONGEST = 80


def split(words: str) -> tuple[str, str] | None:
    """Number and unit of a text, or None where it does not start with a number or is too long to mean one.

    Parameters
    ----------
    words : str

    Returns
    -------
    tuple of (str, str) or None
        The unit may be empty.

    Raises
    ------
    TypeError
        Not a text.
    """
    match = _NUMBER.fullmatch(words) if len(words) <= _LONGEST else None
    return None if match is None else (match[1], match[2])


_TOKEN = re.compile(
    r"\s*(?:(?P<name>[A-Za-zµμ°]+|%)(?P<power>(?:\^|\*\*)[+-]?[0-9]{1,2}(?![0-9])|⁻?[¹²³]|[0-9](?![0-9]))?"
    r"|(?P<sign>[*·/()])|(?P<one>1)(?=\s*/))"
)
_POWERS = str.maketrans({"^": None, "*": None, "⁻": "-", "¹": "1", "²": "2", "³": "3"})


def _tokens(unit: str) -> list[tuple[str, str, int]]:
    """(kind, word, power) for each token of a unit text."""
    found, at = [], 0
    while at < len(unit):
        match = _TOKEN.match(unit, at)
        if match is None:
            raise UnreadableUnit(unit)
        at = match.end()
        if match["name"] == "per" and not match["power"]:
            found.append(("sign", "/", 1))
        elif match["name"]:
            found.append(("name", match["name"], int((match["power"] or "1").translate(_POWERS))))
        else:
            found.append(("sign", match["sign"], 1) if match["sign"] else ("one", "1", 1))
    return found


def _product(reg: Any, tokens: list[tuple[str, str, int]], inside: bool) -> Any:
    """The pint unit of the tokens up to the end or the closing parenthesis, taking them off the front."""
    result = reg.Unit("dimensionless")
    before = "start"  # "start", "term", or the sign that was read
    while tokens:
        kind, word, power = tokens.pop(0)
        if kind == "one" and before == "start":
            before = "term"
        elif kind == "name" or word == "(":
            if kind == "name":
                # "bbl/D": nothing is stated per darcy
                name = {"%": "percent", "D": "day" if before == "/" else "darcy"}.get(word, word)
                term = reg.Unit(reg.get_name(name) or "dimensionless") ** power
            else:
                term = _product(reg, tokens, inside=True)
            result = result / term if before == "/" else result * term
            before = "term"
        elif word == ")" and inside and before == "term":
            return result
        elif word in ("*", "·", "/") and (before == "term" or (word == "/" and before == "start")):
            before = word
        else:
            raise UnreadableUnit(word)
    if inside or before != "term":
        raise UnreadableUnit("ends too early")
    return result


@lru_cache(maxsize=512)
def exact_factor(unit: str, si_unit: str) -> Fraction:
    """How many ``si_unit`` one ``unit`` is, exactly.

    Parameters
    ----------
    unit : str
        As a user writes it.
    si_unit : str
        In pint's notation; empty for a plain number.

    Returns
    -------
    Fraction

    Raises
    ------
    UnreadableUnit
        Not a unit by the grammar above.
    pint.UndefinedUnitError
        A name that is not known.
    pint.PintError
        Of another dimension, or not a multiple of the SI unit (a temperature, a level).
    """
    reg = _exact_registry()
    return Fraction(factor(_product(reg, _tokens(unit), inside=False), si_unit))

"""Units: text or quantity in, SI floats inside, a named unit system out.

Every conversion of the package happens here, through pint. A *kind* is what a number stands for
("pressure", "rate", ...); it decides the SI unit, the dimension that is accepted and the unit in
which each output system shows it.

>>> si("40 mD", "permeability", "permeability")
3.947693066864...e-14
>>> shown(1.0e5, "pressure", "field")
(14.503773..., 'psi')
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Set
from dataclasses import dataclass
from decimal import Decimal
from fractions import Fraction
from numbers import Real
from typing import Any

import numpy as np

from flatplan import unit_text
from flatplan.records import quoted
from flatplan.unit_text import registry

__all__ = ["KINDS", "SYSTEMS", "Kind", "label", "registry", "shown", "si", "si_array", "text", "unit_factor"]

SYSTEMS = ("SI", "metric", "field")


@dataclass(frozen=True)
class Kind:
    """What a number stands for.

    Attributes
    ----------
    name : str
        As error sentences call it.
    si, metric, field : str
        Its unit in each output system, in pint's notation; empty for a plain number.
    example : str
        A text that `si` takes.
    """

    name: str
    si: str
    metric: str
    field: str
    example: str

    def unit(self, system: str) -> str:
        """The pint unit text of this kind in ``system`` ("SI", "metric" or "field")."""
        if system not in SYSTEMS:
            raise ValueError(f'units: got {quoted(system)}; it takes one of "SI", "metric", "field".')
        return {"SI": self.si, "metric": self.metric, "field": self.field}[system]


# "metric" and "field" follow what a rate table and a gauge show on site: common practice, no source.
KINDS: dict[str, Kind] = {
    kind.name: kind
    for kind in (
        Kind("length", "m", "m", "ft", "140 m"),
        Kind("area", "m**2", "m**2", "ft**2", "6000 m^2"),
        Kind("permeability", "m**2", "mD", "mD", "40 mD"),
        Kind("viscosity", "Pa*s", "cP", "cP", "0.5 cP"),
        Kind("compressibility", "1/Pa", "1/bar", "1/psi", "5e-10 1/Pa"),
        Kind("pressure", "Pa", "bar", "psi", "21 MPa"),
        Kind("time", "s", "d", "d", "3 d"),
        Kind("rate", "m**3/s", "m**3/h", "bbl/d", "3 L/s"),
        Kind("volume", "m**3", "m**3", "bbl", "500 m^3"),
        Kind("diffusivity", "m**2/s", "m**2/s", "ft**2/h", "0.5 m^2/s"),
        Kind("rate change", "m**3/s**2", "m**3/h/h", "bbl/d/h", "0.5 L/s/h"),
        Kind("pressure rate", "Pa/s", "bar/h", "psi/h", "20 kPa/h"),
        Kind("storage", "m**3/Pa", "m**3/bar", "bbl/psi", "0.02 m^3/bar"),
        Kind("resistance", "Pa*s/m**3", "bar/(m**3/h)", "psi/(bbl/d)", "0.1 bar/(m^3/h)"),
        Kind("leakage", "1/(Pa*s)", "1/(bar*d)", "1/(psi*d)", "1e-17 1/(Pa s)"),
        Kind("face leak", "m**3/(Pa*s)", "m**3/h/bar", "bbl/d/psi", "0.01 m^3/h/bar"),
        Kind("power", "W", "kW", "hp", "50 kW"),
        Kind("fraction", "", "", "", "0.12"),
    )
}

# How each unit is printed; anything absent prints as pint's own compact form. Every label can be read back.
_LABELS = {
    "": "", "m": "m", "ft": "ft", "m**2": "m²", "ft**2": "ft²", "m**3": "m³", "bbl": "bbl", "mD": "mD",
    "Pa*s": "Pa s", "cP": "cP", "1/Pa": "1/Pa", "1/bar": "1/bar", "1/psi": "1/psi", "Pa": "Pa",
    "bar": "bar", "psi": "psi", "s": "s", "d": "d", "m**3/s": "m³/s", "m**3/h": "m³/h", "bbl/d": "bbl/d",
    "m**2/s": "m²/s", "ft**2/h": "ft²/h", "m**3/s**2": "m³/s²", "m**3/h/h": "m³/h per h",
    "bbl/d/h": "bbl/d per h", "Pa/s": "Pa/s", "bar/h": "bar/h", "psi/h": "psi/h", "m**3/Pa": "m³/Pa",
    "m**3/bar": "m³/bar", "bbl/psi": "bbl/psi", "Pa*s/m**3": "Pa s/m³", "bar/(m**3/h)": "bar/(m³/h)",
    "psi/(bbl/d)": "psi/(bbl/d)", "1/(Pa*s)": "1/(Pa s)", "1/(bar*d)": "1/(bar d)",
    "1/(psi*d)": "1/(psi d)", "m**3/(Pa*s)": "m³/(Pa s)", "m**3/h/bar": "m³/h per bar",
    "bbl/d/psi": "bbl/d per psi", "W": "W", "kW": "kW", "hp": "hp",
}  # fmt: skip

def unit_factor(kind: str, system: str) -> float:
    """How many SI units one unit of ``system`` is, for a kind (pressure, "field": 6894.76).

    Parameters
    ----------
    kind : str
        A key of `KINDS`.
    system : {"SI", "metric", "field"}

    Returns
    -------
    float

    Raises
    ------
    ValueError
        Unknown system.
    """
    k = KINDS[kind]
    unit = k.unit(system)
    return float(unit_text.exact_factor(unit, k.si)) if unit else 1.0


def label(kind: str, system: str = "SI") -> str:
    """The unit as printed in column names and on axes ("m³/h", "psi", ...).

    Parameters
    ----------
    kind : str
        A key of `KINDS`.
    system : {"SI", "metric", "field"}

    Returns
    -------
    str
        Empty for a fraction.

    Raises
    ------
    ValueError
        Unknown system.
    """
    unit = KINDS[kind].unit(system)
    return _LABELS.get(unit, unit)


def shown(value: Any, kind: str, system: str = "SI") -> tuple[Any, str]:
    """``value`` in the unit of ``system``, and that unit's label.

    Parameters
    ----------
    value : float or ndarray
        In SI.
    kind : str
        A key of `KINDS`.
    system : {"SI", "metric", "field"}

    Returns
    -------
    tuple of (float or ndarray, str)

    Raises
    ------
    ValueError
        Unknown system.
    """
    if system == "SI":
        return value, label(kind, system)
    return value / unit_factor(kind, system), label(kind, system)


def text(value: float, kind: str, system: str = "metric", digits: int = 4) -> str:
    """A number for reading: ``text(2.1e7, "pressure")`` is ``"210 bar"``.

    Parameters
    ----------
    value : float
        In SI.
    kind : str
        A key of `KINDS`.
    system : {"SI", "metric", "field"}
    digits : int
        Significant digits.

    Returns
    -------
    str
        Readable by `si` again.

    Raises
    ------
    ValueError
        Unknown system.
    """
    number, unit = shown(float(value), kind, system)
    return f"{number:.{digits}g} {unit}".strip()


def _takes(kind: Kind) -> str:
    unit = f" in {_LABELS.get(kind.si, kind.si)}" if kind.si else ""
    return f'it takes a {kind.name} such as "{kind.example}", or a number{unit}'


def _is_quantity(value: Any) -> bool:
    """Whether ``value`` is a pint quantity, of any registry (asks pint only if it looks like one)."""
    if not (hasattr(value, "magnitude") and hasattr(value, "units")):
        return False
    import pint

    return isinstance(value, pint.Quantity)


def _quantity_factor(value: Any, kind: Kind, name: str) -> float:
    """What the magnitude of a pint quantity is multiplied by to be SI."""
    import pint

    try:
        return float(unit_text.factor(value.units, kind.si))
    except pint.PintError:
        raise ValueError(f"{name}: got {quoted(value)}, which is not a {kind.name}; {_takes(kind)}.") from None


def _real(number: Any) -> float | None:
    """A plain real number as a float (beyond its range: infinite), or None for anything else."""
    if isinstance(number, np.ndarray) and number.ndim == 0 and number.dtype.kind in "iuf":
        number = number.item()
    if isinstance(number, (bool, np.bool_)) or not isinstance(number, (Real, Decimal)):
        return None
    try:
        return float(number)
    except OverflowError:
        return math.inf
    except ValueError:  # a signalling NaN of decimal
        return math.nan


def _parse(value: str, kind: Kind, name: str) -> float:
    wrong = f"{name}: got {quoted(value)}; {_takes(kind)}."
    parts = unit_text.split(value)
    if parts is None:
        raise ValueError(wrong)
    number, unit = parts
    if not unit:
        if kind.si:
            raise ValueError(f"{name}: got {quoted(value)}, a text without a unit; {_takes(kind)}.")
        return float(number)
    import pint

    try:
        factor = unit_text.exact_factor(unit, kind.si)
    except pint.UndefinedUnitError:
        raise ValueError(f"{name}: got {quoted(value)}, whose unit is not known; {_takes(kind)}.") from None
    except pint.PintError:
        raise ValueError(f"{name}: got {quoted(value)}, which is not a {kind.name}; {_takes(kind)}.") from None
    except unit_text.UnreadableUnit:
        raise ValueError(wrong) from None
    try:
        return float(Fraction(number) * factor)
    except OverflowError:
        return math.inf


_SIGNS = {
    "any": (lambda v: True, ""),
    "positive": (lambda v: v > 0, "above zero"),
    "not negative": (lambda v: v >= 0, "zero or more"),
}


def si(value: Any, kind: str, name: str, sign: str = "any") -> float:
    """One number in SI units.

    Parameters
    ----------
    value : float, str or pint quantity
        A plain number is taken as SI; text carries a unit.
    kind : str
        A key of `KINDS`.
    name : str
        The argument's name, for the error sentence.
    sign : {"any", "positive", "not negative"}
        What is accepted.

    Returns
    -------
    float
        The value in the kind's SI unit.

    Raises
    ------
    ValueError
        Unknown or unfitting unit, not a number, not finite, or of the wrong sign.
    """
    k = KINDS[kind]
    number: float | None
    if isinstance(value, str):
        number = _parse(value, k, name)
    elif _is_quantity(value):
        factor = _quantity_factor(value, k, name)
        magnitude = _real(value.magnitude)
        number = None if magnitude is None else magnitude * factor
    else:
        number = _real(value)
    if number is None:
        raise ValueError(f"{name}: got {quoted(value)}; {_takes(k)}.")
    if not math.isfinite(number):
        raise ValueError(f"{name}: got {quoted(value)}, which is not finite; {_takes(k)}.")
    accepted, words = _SIGNS[sign]
    if not accepted(number):
        raise ValueError(f"{name}: got {quoted(value)}; it must be {words}.")
    return number


def si_array(values: Any, kind: str, name: str) -> np.ndarray:
    """A one-dimensional float64 array in SI units, at least one entry, all finite.

    Parameters
    ----------
    values : float, str, sequence, ndarray or pint quantity
        A number, a sequence of numbers, texts or quantities, an array, or a quantity holding one.
    kind : str
        A key of `KINDS`.
    name : str
        The argument's name, for the error sentence.

    Returns
    -------
    ndarray
        float64, shape ``(n,)``, a copy.

    Raises
    ------
    ValueError
        Empty, not one-dimensional, not numeric, without order, not finite, or an unfitting unit.
    """
    k = KINDS[kind]
    flat = f"it takes a flat list of {k.name} values"
    factor = 1.0
    if _is_quantity(values):
        values, factor = values.magnitude, _quantity_factor(values, k, name)
    if isinstance(values, (bytes, bytearray, Set, Mapping)):
        raise ValueError(f"{name}: got {quoted(values)}; {flat}.")
    if isinstance(values, np.ma.MaskedArray):
        values = np.ma.filled(values.astype(np.float64), np.nan)  # a masked entry is a missing one
    if not isinstance(values, np.ndarray) or values.dtype.kind in "UO":
        values = list(values) if hasattr(values, "__iter__") and not isinstance(values, str) else [values]
        if not all(isinstance(v, (int, float, np.integer, np.floating)) and not isinstance(v, bool) for v in values):
            values = [si(v, kind, f"{name}[{i}]" if len(values) > 1 else name) for i, v in enumerate(values)]
        try:
            values = np.asarray(values, dtype=np.float64)
        except OverflowError:
            raise ValueError(f"{name}: got {quoted(values)}, with a number beyond the range of a float; {flat}.") from None
    if values.dtype.kind not in "iuf":
        raise ValueError(f"{name}: got values of type {values.dtype}; {flat}.")
    if values.ndim > 1:
        raise ValueError(f"{name}: got an array of shape {values.shape}; {flat}.")
    if values.size == 0:
        raise ValueError(f"{name}: got an empty list; it takes at least one {k.name}.")
    array = np.atleast_1d(values).astype(np.float64) * factor
    if not np.all(np.isfinite(array)):
        at = int(np.flatnonzero(~np.isfinite(array))[0])
        raise ValueError(f"{name}: got {array[at]} at position {at}; every {k.name} must be finite.")
    return array

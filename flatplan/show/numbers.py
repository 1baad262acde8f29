"""Numbers and times for reading: as many digits as matter, times in the unit people speak of."""

from __future__ import annotations

import math
import re

from flatplan import units

_MINUTE, _HOUR, _DAY = 60.0, 3600.0, 86400.0
_SUPERSCRIPT = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")


def column(words: str, kind: str | None, system: str) -> str:
    """A column's name with its unit: ``injection rate [m³/h]``; ``[-]`` for a plain number.

    >>> column("injection rate", "rate", "metric")
    'injection rate [m³/h]'
    """
    if kind is None:
        return words
    return f"{words} [{units.label(kind, system) or '-'}]"


def decimals(scale: float) -> int:
    """Decimal places that resolve a thousandth of ``scale``.

    >>> decimals(2.858), decimals(143.7), decimals(25000.0)
    (3, 1, 0)
    """
    size = abs(scale)
    if not (math.isfinite(size) and size > 0.0):
        return 0
    return int(min(max(math.ceil(3.0 - math.log10(size) - 1e-9), 0), 12))


def fixed(value: float, places: int) -> str:
    """``value`` with a fixed number of decimal places and a real minus sign; never a minus zero.

    >>> fixed(-0.0001, 2), fixed(-1.5, 2)
    ('0.00', '−1.50')
    """
    if not math.isfinite(value):
        return "–"
    text = f"{value:.{places}f}"
    if float(text) == 0.0:
        text = text.lstrip("-")
    return text.replace("-", "−")


def significant(value: float, digits: int = 4) -> str:
    """``value`` to some significant digits, without an exponent between 1e-4 and 1e7.

    >>> significant(0.02838), significant(143.7042), significant(3.42e-12, 2), significant(0.0)
    ('0.02838', '143.7', '3.4×10⁻¹²', '0')
    """
    if not math.isfinite(value):
        return "–"
    if value == 0.0:
        return "0"
    exponent = math.floor(math.log10(abs(value)))
    if -4 <= exponent < 7:
        rounded = float(f"{value:.{digits}g}")
        places = max(digits - 1 - math.floor(math.log10(abs(rounded))), 0)
        text = f"{rounded:.{places}f}"
        text = text.rstrip("0").rstrip(".") if "." in text else text
        return text.replace("-", "−")
    mantissa, power = f"{value:.{digits - 1}e}".split("e")
    mantissa = mantissa.rstrip("0").rstrip(".") if "." in mantissa else mantissa
    return f"{mantissa.replace('-', '−')}×10{str(int(power)).translate(_SUPERSCRIPT)}"


def power_of_ten(value: float) -> str:
    """The nearest power of ten, for the ticks of a logarithmic axis.

    >>> power_of_ten(1e-7)
    '10⁻⁷'
    """
    return f"10{str(round(math.log10(value))).translate(_SUPERSCRIPT)}"


def percent(share: float) -> str:
    """A share as a percentage; one too small to matter is said to be less than 0.0001 %.

    >>> percent(0.01186), percent(7.5e-15)
    ('1.2 %', 'less than 0.0001 %')
    """
    return "less than 0.0001 %" if 0.0 < share < 0.9999e-6 else f"{significant(100.0 * share, 2)} %"


def typeset(sentence: str) -> str:
    """A sentence of another room with real minus signs and powers of ten.

    >>> typeset("It is -2.3 m³/h, at most 4.1e-12 of the peak.")
    'It is −2.3 m³/h, at most 4.1×10⁻¹² of the peak.'
    """
    powers = re.sub(r"(\d)e([+-]\d+)\b", lambda m: f"{m[1]}×10{str(int(m[2])).translate(_SUPERSCRIPT)}", sentence)
    return re.sub(r"(?<![\w.)-])-(?=\d)", "−", powers)


def reading_unit(kind: str, system: str) -> tuple[float, str]:
    """(SI units per unit, label) for figures and the report; "SI" takes MPa and L/s there, so that numbers stay short.

    >>> reading_unit("pressure", "SI"), reading_unit("pressure", "metric")
    ((1000000.0, 'MPa'), (100000.0, 'bar'))
    """
    if system == "SI":
        near = {"pressure": (1e6, "MPa"), "rate": (1e-3, "L/s")}.get(kind)
        if near is not None:
            return near
    return units.unit_factor(kind, system), units.label(kind, system)


def amount(value: float, kind: str, system: str, digits: int = 4) -> str:
    """A value of some kind in the reading units of ``system``: ``2.858 m³/h``."""
    factor, unit = reading_unit(kind, system)
    return f"{significant(value / factor, digits)} {unit}".strip()


def level(value: float, change: float, kind: str, system: str) -> str:
    """A level with the decimals that a thousandth of ``change`` needs: ``225.00 bar`` for a change of 15 bar."""
    factor, unit = reading_unit(kind, system)
    return f"{fixed(value / factor, decimals((change or value) / factor))} {unit}".strip()


def time_unit(span: float) -> tuple[float, str]:
    """(seconds, label) of the unit for a time axis of length ``span`` [s]: days; hours below 3 days; minutes below 3 hours.

    >>> time_unit(12 * 86400.0), time_unit(30 * 3600.0), time_unit(600.0)
    ((86400.0, 'd'), (3600.0, 'h'), (60.0, 'min'))
    """
    if span >= 3.0 * _DAY:
        return _DAY, "d"
    if span >= 3.0 * _HOUR:
        return _HOUR, "h"
    return (_MINUTE, "min") if span >= 3.0 * _MINUTE else (1.0, "s")


def duration(seconds: float) -> str:
    """A length of time in words: ``3 d``, ``7.86 h``, ``45 min``.

    >>> duration(3 * 86400.0), duration(28296.0), duration(2700.0)
    ('3 d', '7.86 h', '45 min')
    """
    for unit, label, least in ((_DAY, "d", 2.0 * _DAY), (_HOUR, "h", 2.0 * _HOUR), (_MINUTE, "min", 2.0 * _MINUTE)):
        whole = abs(seconds / unit - round(seconds / unit)) < 1e-9 and seconds >= unit
        if seconds >= least or (whole and label == "d"):
            return f"{significant(seconds / unit, 3)} {label}"
    return f"{significant(seconds, 3)} s"


def moment(seconds: float, span: float) -> str:
    """A point in time, in the unit of an axis of length ``span``: ``day 2.49``, ``hour 6``.

    >>> moment(2.485 * 86400.0, 12 * 86400.0)
    'day 2.48'
    """
    unit, label = time_unit(span)
    word = {"d": "day", "h": "hour", "min": "minute", "s": "second"}[label]
    text = f"{seconds / unit:.2f}".rstrip("0").rstrip(".")
    return f"{word} {text}"


def clock(seconds: float) -> str:
    """Elapsed time as days, hours and minutes (seconds where they are needed): ``1 d 06:00``.

    >>> clock(30 * 3600.0), clock(90.0), clock(0.0)
    ('1 d 06:00', '0 d 00:01:30', '0 d 00:00')
    """
    whole = round(seconds)
    days, rest = divmod(whole, int(_DAY))
    hours, rest = divmod(rest, int(_HOUR))
    minutes, left = divmod(rest, int(_MINUTE))
    return f"{days} d {hours:02d}:{minutes:02d}" + (f":{left:02d}" if left else "")

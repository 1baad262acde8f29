"""Rock whose properties vary smoothly along the path, from samples (a log) or from functions."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass
from typing import Any

import numpy as np

from flatplan import units
from flatplan.records import Record

_MOST_PIECES = 64


@dataclass(frozen=True, repr=False, eq=False)
class RockProfile(Record):
    """A rock with permeability and porosity that vary along the path; stands wherever a `Rock` does.

    Between the places the logarithms of permeability and porosity follow monotone cubic curves
    [FritschCarlson1980]_, so nothing overshoots the samples; the medium *is* that curve.

    Parameters
    ----------
    permeability : array_like or callable
        Samples [m²] at the places ``at``, or a function of distance [m] that returns m².
    porosity : float, array_like or callable
        The same for porosity, each strictly between 0 and 1; a number where it does not vary.
    compressibility : float, str or quantity
        Pore-volume compressibility [1/Pa], zero or more; the same everywhere.
    at : array_like, optional
        Distances from the start of the slab or zone that it fills, on the side of the target face [m], strictly
        increasing, from 0 to its full length; 2 to 65 of them. Without it a function is sampled at 33
        places spread evenly (in radial and spherical flow evenly in the logarithm of the radius).

    Raises
    ------
    ValueError
        Samples without ``at``, of another number than ``at``, places that do not increase, values out of range.
    """

    permeability: np.ndarray | Callable[[np.ndarray], Any]
    porosity: np.ndarray | Callable[[np.ndarray], Any] | float
    compressibility: float
    at: np.ndarray | None

    def __init__(self, permeability: Any, porosity: Any, compressibility: Any, at: Any = None) -> None:
        put = object.__setattr__
        put(self, "compressibility", units.si(compressibility, "compressibility", "rock compressibility", "not negative"))
        places = None if at is None else _places(at)
        put(self, "at", places)
        put(
            self, "permeability", permeability if callable(permeability) else _samples(permeability, "permeability", "permeability", places)
        )
        if callable(porosity):
            put(self, "porosity", porosity)
        elif np.ndim(porosity) == 0 and not isinstance(porosity, (list, tuple)):
            put(self, "porosity", float(_fractions(units.si_array(porosity, "fraction", "porosity"))[0]))
        else:
            put(self, "porosity", _fractions(_samples(porosity, "fraction", "porosity", places)))

    def _key(self) -> tuple:
        """What makes two profiles equal: arrays by their values, functions by themselves."""
        values = (self.permeability, self.porosity, self.compressibility, self.at)
        return tuple(tuple(v.tolist()) if isinstance(v, np.ndarray) else v for v in values)

    def __eq__(self, other: object) -> bool:
        return isinstance(other, RockProfile) and self._key() == other._key()

    def __hash__(self) -> int:
        return hash(self._key())

    def sampled(self, length: float, default_places: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """(places, permeability, porosity) over a stretch of ``length`` [m]."""
        places = default_places if self.at is None else self.at
        if abs(places[0]) > 1e-9 * length or abs(places[-1] - length) > 1e-9 * length:
            raise ValueError(f"at: runs from {places[0]:g} m to {places[-1]:g} m; it takes places from 0 to the full length, {length:g} m.")
        places = np.concatenate([[0.0], places[1:-1], [length]])
        k = _values(self.permeability, places, "permeability")
        if np.any(k <= 0.0):
            raise ValueError(f"permeability: got {k[k <= 0.0][0]:g} m² at {places[k <= 0.0][0]:g} m; it must be above zero everywhere.")
        return places, k, _fractions(_values(self.porosity, places, "porosity"))

    def _rows(self) -> Iterable[tuple[str, str]]:
        for name, kind in (("permeability", "permeability"), ("porosity", "fraction")):
            value = getattr(self, name)
            if callable(value):
                yield name, "a function of distance"
            elif np.ndim(value):
                yield name, f"{units.text(value.min(), kind)} to {units.text(value.max(), kind)}, {len(value)} places"
            else:
                yield name, units.text(value, kind)
        yield "pore compressibility", units.text(self.compressibility, "compressibility", "SI")


def log_curves(places: np.ndarray, values: np.ndarray) -> np.ndarray:
    """Coefficients of the monotone cubic through ``ln values``, in u = 0 … 1 on each piece and less its start, shape (pieces, 3)."""
    from scipy.interpolate import PchipInterpolator

    if len(places) == 2:
        return np.array([[np.log(values[1] / values[0]), 0.0, 0.0]])
    cubic = PchipInterpolator(places, np.log(values))
    h = np.diff(places)
    return np.column_stack([cubic.c[2] * h, cubic.c[1] * h**2, cubic.c[0] * h**3])


def _places(at: Any) -> np.ndarray:
    places = units.si_array(at, "length", "at")
    if not 2 <= len(places) <= _MOST_PIECES + 1:
        raise ValueError(f"at: got {len(places)} places; it takes 2 to {_MOST_PIECES + 1}.")
    if np.any(np.diff(places) <= 0.0):
        raise ValueError("at: the places must strictly increase from the target face on.")
    return places


def _samples(values: Any, kind: str, name: str, places: np.ndarray | None) -> np.ndarray:
    if places is None:
        raise ValueError(f"at: is missing; samples of {name} need the places they were taken at.")
    array = units.si_array(values, kind, name)
    if len(array) != len(places):
        raise ValueError(f"{name}: got {len(array)} samples for {len(places)} places; it takes one for each.")
    if kind == "permeability" and np.any(array <= 0.0):
        raise ValueError(f"{name}: got {array[array <= 0.0][0]:g}; every sample must be above zero.")
    return array


def _fractions(array: np.ndarray) -> np.ndarray:
    wrong = (array <= 0.0) | (array >= 1.0)
    if np.any(wrong):
        raise ValueError(f"porosity: got {array[wrong][0]:g}; it takes fractions strictly between 0 and 1.")
    return array


def _values(source: Any, places: np.ndarray, name: str) -> np.ndarray:
    """Samples as they are, a number everywhere, or a function at the places."""
    if not callable(source):
        return np.broadcast_to(np.asarray(source, dtype=float), places.shape).copy()
    given = source(places)
    try:
        out = np.asarray(given)
        if np.iscomplexobj(out):
            raise ValueError("complex")
        out = out.astype(float)
    except (TypeError, ValueError):
        shown = " ".join(repr(given).split())
        raise ValueError(f"{name}: the function must give numbers; it gave {shown if len(shown) < 60 else shown[:56] + ' ...'}.") from None
    if out.shape == ():
        out = np.full(places.shape, float(out))
    if out.shape != places.shape:
        raise ValueError(f"{name}: the function must give one value for each of {len(places)} places; it gave shape {out.shape}.")
    if not np.all(np.isfinite(out)):
        i = int(np.flatnonzero(~np.isfinite(out))[0])
        raise ValueError(f"{name}: the function gave {out[i]} at {places[i]:g} m; every {name} must be finite.")
    return out

"""At which times a plan is read: evenly for a table, densely for a figure."""

from __future__ import annotations

from itertools import pairwise
from typing import Any

import numpy as np

from flatplan import units
from flatplan.flat import Plan

_MOST_ROWS = 200_000
_ROWS = 60  # a default table has at most this many
_ROUND = tuple(60.0 * m for m in (1, 2, 5, 10, 15, 30)) + tuple(3600.0 * h for h in (1, 2, 3, 4, 6, 8, 12, 24, 48, 120, 240))


def round_spacing(end: float) -> float:
    """A round spacing [s] that reads a plan of length ``end`` [s] in at most about 60 rows.

    >>> round_spacing(12 * 86400.0) / 3600, round_spacing(6 * 3600.0) / 60
    (6.0, 10.0)
    """
    for spacing in _ROUND:
        if end / spacing <= _ROWS:
            return spacing if end > 10.0 * spacing else end / 50.0
    return 86400.0 * 10.0 ** np.ceil(np.log10(end / 86400.0 / _ROWS))


def even_times(end: float, every: Any = None) -> np.ndarray:
    """0, ``every``, 2 ``every`` … and the end [s].

    Raises
    ------
    ValueError
        A spacing that is not above zero or of another dimension, or that makes over 200 000 rows.
    """
    spacing = round_spacing(end) if every is None else units.si(every, "time", "every", "positive")
    count = end / spacing
    if count > _MOST_ROWS:
        raise ValueError(f"every: got {every!r}, which makes {count:.3g} rows; it takes at least {units.text(end / _MOST_ROWS, 'time')}.")
    times = np.arange(int(count) + 1) * spacing
    # a last spacing that differs from the end by rounding only is the end
    return np.append(times[times < end - 1e-9 * spacing], end)


def dense_times(plan: Plan, least: int = 600) -> np.ndarray:
    """Times that show every corner of a plan [s]: evenly spaced ones, and more between neighbouring knots."""
    knots = plan.knots
    between = int(np.clip(4000 // max(len(knots) - 1, 1), 6, 160))
    parts = [np.linspace(0.0, plan.end, least), knots]
    parts.extend(np.linspace(a, b, between) for a, b in pairwise(knots))
    return np.unique(np.concatenate(parts))

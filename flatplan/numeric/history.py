"""Any rate history as piecewise polynomials: steps as they are, a function of time by adaptive subdivision.

A function is sampled at Gauss points of each panel (never at a panel's ends, so a jump at a knot does no harm). A panel is
halved until its polynomial of degree 13 agrees with the function at points in between and its last two coefficients are as
small, to 1e-13 of the largest rate. A narrow panel may be off by more: pressure feels a rate that is wrong over a time ``w`` in
proportion to ``sqrt(w)`` at most, so what counts is the error times ``sqrt(w / span)``. The rate of a fast move swings to 1e5 times
what its target asks for, which 1e-13 of that would show; for it the volume that the rate may be off in all is stated too.

Source: piecewise Legendre interpolation, e.g. L. N. Trefethen, *Approximation Theory and Approximation Practice* (2013), ch. 4 and 8
[Trefethen2013].

Assumed, not checked: nothing happens between two knots that is shorter than 1/50 of the time between them.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from itertools import pairwise
from typing import Any

import numpy as np
from numpy.polynomial import legendre

from flatplan import units
from flatplan.numeric.panels import Panels, projection
from flatplan.numeric.steps import Steps

DEGREE = 13
# What is aimed at, relative to the largest rate: a few hundred roundings.
AIM = 1e-13
# A function with noise of its own cannot be followed below it; noise up to this much is taken and recorded as error.
MOST_NOISE = 1e-6
# What evaluation and projection round by, relative to the largest rate on a panel.
ROUNDING = 1e-14
# Halvings: 30 take a corner that no knot announces down to AIM, 45 a square root; there the resolution of the clock ends too.
MOST_HALVINGS = 46
MOST_PANELS = 20_000
_CHECKS = np.array([-0.9965, 0.05, 0.9965])


def panels_of(history: Any, start: float, end: float, knots: Any = None, volume: float = math.inf) -> Panels:
    """A rate history as `Panels` that cover ``start`` to ``end``.

    Parameters
    ----------
    history : Steps, Panels, plan or callable
        A function takes times [s], shape (n,), and gives rates [m³/s], shape (n,); a plan has ``rate`` and ``knots``.
    start, end : float
        [s].
    knots : array_like, optional
        Times [s] where a function jumps, bends or is not analytic.
    volume : float
        Most that a function may be off in all, ``∫|departure| dt`` [m³], unless rounding is more.

    Returns
    -------
    Panels

    Raises
    ------
    TypeError
        Something else than a history.
    ValueError
        A rate that is not finite or of another shape, or a function that is too rough.
    """
    if isinstance(history, Steps):
        return history.panels.between(start, end)
    if isinstance(history, Panels):
        return history.between(start, end)
    if callable(getattr(history, "rate", None)):
        given = getattr(history, "knots", None)
        rate = history.rate
    elif callable(history):
        given, rate = None, history
    else:
        raise TypeError(
            f"history: got {type(history).__name__}; it takes flatplan.Steps, a plan, or a function that gives rates [m³/s]"
            " for an array of times [s]."
        )
    marks = [] if given is None else [np.asarray(given, dtype=float)]
    if knots is not None:
        marks.append(units.si_array(knots, "time", "knots"))
    return fitted(rate, start, end, np.concatenate(marks) if marks else np.empty(0), volume)


def fitted(rate: Callable[[np.ndarray], Any], start: float, end: float, knots: np.ndarray, volume: float = math.inf) -> Panels:
    """Piecewise polynomials of degree 13 for a function of time, by adaptive halving; ``volume`` as in `panels_of`."""
    inner = np.unique(knots[(knots > start) & (knots < end)])
    edges = np.concatenate([[start], inner, [end]])
    # A few panels to begin with, so that a feature between two knots is not stepped over.
    first = 4 if inner.size else 16
    edges = np.unique(np.concatenate([np.linspace(a, b, first + 1) for a, b in pairwise(edges)]))
    left, right = edges[:-1], edges[1:]
    nodes, to_coefficients = projection(DEGREE)
    points = np.concatenate([nodes, _CHECKS])
    order = np.argsort(points)
    at_checks = legendre.legvander(_CHECKS, DEGREE)

    peak = 0.0
    # Errors of the panels that each one was halved from, latest first. What is small and has fallen by less than 4 over three
    # halvings, on both sides of the latest, is noise of the function; a corner or a jump leaves one of the two sides smooth.
    ancestors = np.full((3, len(left)), np.inf)
    kept: list[tuple[np.ndarray, np.ndarray, np.ndarray]] = []
    total, off = 0, 0.0
    for _ in range(MOST_HALVINGS):
        times = 0.5 * (left + right)[:, None] + 0.5 * (right - left)[:, None] * points[order]
        values = np.empty((len(left), len(points)))
        values[:, order] = _evaluate(rate, times.ravel()).reshape(times.shape)
        peak = max(peak, float(np.max(np.abs(values))))
        coefficients = values[:, : DEGREE + 1] @ to_coefficients.T
        missed = np.abs(coefficients @ at_checks.T - values[:, DEGREE + 1 :]).max(axis=1)
        missed = np.maximum(missed, np.abs(coefficients[:, -2:]).sum(axis=1))
        good = missed * np.sqrt((right - left) / (end - start)) <= AIM * peak
        if off + missed[good] @ (right - left)[good] > volume:
            near = missed <= np.maximum(volume / (end - start), ROUNDING * np.abs(values).max(axis=1))
            # so far down the function is smooth, or one halving that gains nothing on either side is noise
            if np.all(np.isfinite(ancestors[0])):
                near |= np.repeat((good & (missed > ancestors[0] / 4.0)).reshape(-1, 2).all(axis=1), 2)
            good &= near
        if np.all(np.isfinite(ancestors[2])):
            noise = (missed <= MOST_NOISE * peak) & (missed > ancestors[2] / 4.0)
            good |= np.repeat(noise.reshape(-1, 2).all(axis=1), 2)
        if np.any(good):
            kept.append((left[good], coefficients[good], missed[good]))
            total += int(np.count_nonzero(good))
            off += float(missed[good] @ (right - left)[good])
        bad = ~good
        if not np.any(bad):
            break
        if total + 2 * np.count_nonzero(bad) > MOST_PANELS:
            raise _too_rough(left[bad][0])
        middle = 0.5 * (left[bad] + right[bad])
        left, right = np.stack([left[bad], middle], axis=1).ravel(), np.stack([middle, right[bad]], axis=1).ravel()
        ancestors = np.repeat(np.stack([missed, ancestors[0], ancestors[1]])[:, bad], 2, axis=1)
    else:
        raise _too_rough(left[0])
    lefts, coefficients, errors = (np.concatenate(part) for part in zip(*kept, strict=True))
    order = np.argsort(lefts)
    return Panels(np.append(lefts[order], end), coefficients[order], errors[order], peak)


def _too_rough(time: float) -> ValueError:
    return ValueError(
        f"history: the rate changes too sharply near {time:.10g} s to be followed; state the times where it jumps in knots=,"
        " or use flatplan.Steps."
    )


def _evaluate(rate: Callable[[np.ndarray], Any], times: np.ndarray) -> np.ndarray:
    values = np.asarray(rate(times), dtype=float)
    if values.ndim == 0:
        values = np.full(times.shape, float(values))
    if values.shape != times.shape:
        raise ValueError(
            f"history: the function gave an array of shape {values.shape} for {len(times)} times; it must give one rate for each."
        )
    wrong = ~np.isfinite(values)
    if np.any(wrong):
        at = int(np.flatnonzero(wrong)[0])
        raise ValueError(f"history: the rate is {values[at]} at {times[at]:g} s; every rate must be finite.")
    return values

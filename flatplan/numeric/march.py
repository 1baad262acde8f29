"""Output times as steps from one to the next, so that a model's answers are worked out once for all steps of one length.

Every panel begins anew from its own start, so that what the steps round by does not add up beyond a panel.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from flatplan.numeric.panels import Panels, restricted

# Steps count as equally long when they differ by a few roundings of the clock, which are at most this share of them.
SAME = 1e-10


@dataclass(frozen=True, eq=False)
class March:
    """The way through a chain of panels by output times; made by `march`.

    Attributes
    ----------
    panels : Panels
    panel : ndarray
        Panel of each time where the way begins anew from the panel's start, -1 where it goes on from the time before, shape (n,).
    widths : ndarray
        Length of each step, from the panel's start or the time before [s], shape (n,).
    coefficients : ndarray
        Legendre coefficients of the rate over each step [m³/s], shape (n, degree + 1).
    kind : ndarray
        Steps of one kind are equally long but for the clock's roundings, shape (n,).
    """

    panels: Panels
    panel: np.ndarray
    widths: np.ndarray
    coefficients: np.ndarray
    kind: np.ndarray

    def kinds(self, part: slice) -> tuple[np.ndarray, np.ndarray]:
        """Lengths [s] of the kinds of steps in a part, shape (kinds,), and which of them each step is, shape (len(part),)."""
        _, first, kind = np.unique(self.kind[part], return_index=True, return_inverse=True)
        widths = self.widths[part]
        base = widths[first]
        # the mean, by differences: no step is off by more than the clock, and the steps of a panel not by the sum of that
        return base + np.bincount(kind, weights=widths - base[kind]) / np.bincount(kind), kind


def march(panels: Panels, times: np.ndarray) -> March:
    """The way through ``panels`` by ``times`` [s], increasing and within them, shape (n,)."""
    index = np.clip(panels.locate(times), 0, len(panels.edges) - 2)
    left, width = panels.edges[index], np.diff(panels.edges)[index]
    anew = np.concatenate([[True], index[1:] != index[:-1]])
    before = np.where(anew, left, np.roll(times, 1))
    widths = times - before
    low, high = (np.clip((at - left) / width, 0.0, 1.0) for at in (before, times))
    grain = 8.0 * np.spacing(max(abs(float(panels.edges[0])), abs(float(panels.edges[-1]))))
    kind = np.rint(widths / grain)
    short = grain > SAME * widths
    kind[short] = -1.0 - np.arange(np.count_nonzero(short))
    return March(panels, np.where(anew, index, -1), widths, restricted(panels.coefficients[index], low, high), kind)


def chained(gains: np.ndarray, kept: np.ndarray, start: np.ndarray) -> np.ndarray:
    """``s_i = kept_i s_(i-1) + gains_i`` from ``s_(-1) = start``, shape (n, modes); ``kept`` is zero to one.

    In about ``sqrt(n)`` blocks of as many steps: all blocks step at once as if from zero, then hand on from one to the next.
    """
    count, modes = gains.shape
    size = math.isqrt(count - 1) + 1
    blocks = -(-count // size)
    padded = np.empty((2, blocks * size, modes))
    padded[0, :count], padded[1, :count], padded[:, count:] = gains, kept, 0.0
    states, left = padded.reshape(2, blocks, size, modes)
    for i in range(1, size):
        states[:, i] += left[:, i] * states[:, i - 1]
        left[:, i] *= left[:, i - 1]
    for block, rest in zip(states, left, strict=True):
        block += rest * start
        start = block[-1]
    return states.reshape(-1, modes)[:count]

"""Piecewise polynomial rates: the form in which every history reaches the model.

Each panel holds Legendre coefficients, so that its decay integrals add without cancellation (see
`flatplan.numeric.exponential`).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.polynomial import legendre


@dataclass(frozen=True, eq=False)
class Panels:
    """A rate that is a polynomial on each of a chain of time intervals, and zero before and after them.

    Attributes
    ----------
    edges : ndarray
        Ends of the panels [s], strictly increasing, shape (m + 1,).
    coefficients : ndarray
        Legendre coefficients on each panel [m³/s], shape (m, degree + 1).
    errors : ndarray
        Departure of each panel from the history it stands for, where that was measured [m³/s], shape (m,).
    peak : float
        Largest rate seen [m³/s].
    """

    edges: np.ndarray
    coefficients: np.ndarray
    errors: np.ndarray
    peak: float

    @property
    def error(self) -> float:
        """The largest of ``errors`` [m³/s]."""
        return float(self.errors.max())

    @property
    def degree(self) -> int:
        """Degree of the polynomials."""
        return self.coefficients.shape[1] - 1

    def locate(self, times: np.ndarray) -> np.ndarray:
        """Index of the panel that holds each time (an edge belongs to the panel it opens); -1 before, m from the last edge on."""
        return np.searchsorted(self.edges, times, side="right") - 1

    def rate(self, times: np.ndarray, before: bool = False) -> np.ndarray:
        """The rate [m³/s], shape of ``times``: at an edge the panel that opens there counts, or with ``before`` the one that ends there."""
        index, xi = self._reference(times, before)
        inside = (index >= 0) & (index < len(self.edges) - 1)
        coefficients = self.coefficients[np.clip(index, 0, len(self.edges) - 2)]
        return np.where(inside, summed(coefficients, xi), 0.0)

    def volume(self, times: np.ndarray) -> np.ndarray:
        """Volume since the first edge [m³], exact for the polynomials, shape of ``times``."""
        widths = np.diff(self.edges)
        whole = np.concatenate([[0.0], np.cumsum(widths * self.coefficients[:, 0])])
        index, xi = self._reference(times)
        panel = np.clip(index, 0, len(widths) - 1)
        part = 0.5 * widths[panel] * np.sum(integrals(xi, self.degree) * self.coefficients[panel], axis=-1)
        return np.where(index < 0, 0.0, whole[np.clip(index, 0, len(widths))] + np.where(index < len(widths), part, 0.0))

    def _reference(self, times: np.ndarray, before: bool = False) -> tuple[np.ndarray, np.ndarray]:
        """The panel of each time, as `locate` gives it, and the place in it from -1 to 1."""
        index = np.searchsorted(self.edges, times, side="left" if before else "right") - 1
        panel = np.clip(index, 0, len(self.edges) - 2)
        left, right = self.edges[panel], self.edges[panel + 1]
        return index, np.clip((times - left) / (right - left) * 2.0 - 1.0, -1.0, 1.0)

    def between(self, start: float, end: float) -> Panels:
        """The same rate on panels that cover exactly ``start`` to ``end`` [s], zero panels where nothing was said.

        Panels that lie outside are dropped and those that reach over an end are cut.
        """
        inner = self.edges[(self.edges > start) & (self.edges < end)]
        edges = np.concatenate([[start], inner, [end]])
        index = self.locate(edges[:-1])
        inside = (index >= 0) & (index < len(self.edges) - 1)
        index = np.clip(index, 0, len(self.edges) - 2)
        left, width = self.edges[index], np.diff(self.edges)[index]
        coefficients = self.coefficients[index] * inside[:, None]
        cut = (edges[:-1] != left) | (edges[1:] != self.edges[index + 1])
        if np.any(cut & inside):
            low = (edges[:-1] - left)[cut] / width[cut]
            high = (edges[1:] - left)[cut] / width[cut]
            coefficients[cut] = restricted(coefficients[cut], np.clip(low, 0.0, 1.0), np.clip(high, 0.0, 1.0))
        return Panels(edges, coefficients, self.errors[index] * inside, self.peak)


def summed(coefficients: np.ndarray, xi: np.ndarray) -> np.ndarray:
    """``Σ_j q_j P_j(ξ)`` for coefficients of shape (n, degree + 1) and ``xi`` of shape (..., n), shape of ``xi``.

    By the recurrence upwards, term by term: a table of all ``P_j`` would cost more to move than to work out.
    """
    rows = np.ascontiguousarray(coefficients.T)
    total = np.empty_like(xi)
    total[...] = rows[0]
    before, now = np.ones_like(xi), xi
    for j, row in enumerate(rows[1:], start=1):
        total += row * now
        following = now * xi
        following *= (2 * j + 1) / (j + 1)
        before *= j / (j + 1)
        following -= before
        before, now = now.copy() if j == 1 else now, following
    return total


def integrals(xi: np.ndarray, degree: int) -> np.ndarray:
    """``∫_-1^ξ P_j`` for j = 0 … degree, shape (*xi.shape, degree + 1)."""
    values = legendre.legvander(xi, degree + 1)
    j = np.arange(1, degree + 1)
    return np.concatenate([(xi + 1.0)[..., None], (values[..., 2:] - values[..., :-2]) / (2 * j + 1)], axis=-1)


def restricted(coefficients: np.ndarray, low: np.ndarray, high: np.ndarray) -> np.ndarray:
    """Legendre coefficients of the same polynomials on the part from ``low`` to ``high`` (shares of the panel, 0 to 1).

    Parameters
    ----------
    coefficients : ndarray
        shape (n, degree + 1).
    low, high : ndarray
        shape (n,).

    Returns
    -------
    ndarray
        shape (n, degree + 1).
    """
    degree = coefficients.shape[1] - 1
    if degree == 0:
        return coefficients
    nodes, to_coefficients = projection(degree)
    xi = 2.0 * (low + (high - low) * (0.5 + nodes[:, None] / 2.0)) - 1.0
    return to_coefficients.dot(summed(coefficients, xi)).T


@lru_cache(maxsize=32)
def projection(degree: int) -> tuple[np.ndarray, np.ndarray]:
    """Gauss points on [-1, 1] and the matrix from values there to Legendre coefficients (exact for the degree), read-only."""
    nodes, weights = legendre.leggauss(degree + 1)
    matrix = (legendre.legvander(nodes, degree) * weights[:, None]).T * (np.arange(degree + 1) + 0.5)[:, None]
    nodes.setflags(write=False)
    matrix.setflags(write=False)
    return nodes, matrix

"""Exact integration of the terms that generating functions are made of: ``c · r^i · ln(r/r_0)^j``.

Without leakage every generating function of a linear, radial or spherical zone is a finite sum of such terms (in
linear flow j = 0, in spherical flow too, with negative i), so the recurrence is integrated by parts term by term,
quicker and in plainer form than a general integrator would.
"""

from __future__ import annotations

from collections import defaultdict

import sympy


class Terms:
    """A finite sum ``Σ c_ij r^i ln(r/r_0)^j`` with sympy coefficients, whole i, j ≥ 0."""

    def __init__(self, terms: dict[tuple[int, int], sympy.Expr] | None = None) -> None:
        self.terms = {key: value for key, value in (terms or {}).items() if value != 0}

    @staticmethod
    def constant(value: sympy.Expr) -> Terms:
        """The constant function."""
        return Terms({(0, 0): value})

    def __add__(self, other: Terms) -> Terms:
        out: dict[tuple[int, int], sympy.Expr] = defaultdict(lambda: sympy.Integer(0))
        for part in (self.terms, other.terms):
            for key, value in part.items():
                out[key] += value
        return Terms({key: sympy.expand(value) for key, value in out.items()})

    def times(self, factor: sympy.Expr, power: int = 0) -> Terms:
        """Multiplied by ``factor · r^power``."""
        return Terms({(i + power, j): sympy.expand(factor * value) for (i, j), value in self.terms.items()})

    def antiderivative(self) -> Terms:
        """An integral over r, by parts in the logarithm."""
        out: dict[tuple[int, int], sympy.Expr] = defaultdict(lambda: sympy.Integer(0))
        for (i, j), value in self.terms.items():
            if i == -1:
                out[0, j + 1] += value / (j + 1)
                continue
            # ∫ r^i L^j = r^(i+1) Σ_m (-1)^m j!/(j-m)! L^(j-m) / (i+1)^(m+1)
            factor = value
            for m in range(j + 1):
                out[i + 1, j - m] += factor / (i + 1)
                factor = -factor * (j - m) / (i + 1)
        return Terms(dict(out))

    def expression(self, r: sympy.Expr, log: sympy.Expr) -> sympy.Expr:
        """The sum with ``r`` and ``ln(r/r_0)`` put in."""
        return sympy.Add(*(value * r**i * log**j for (i, j), value in self.terms.items()))

    def from_place(self, r: sympy.Expr, log: sympy.Expr, start: sympy.Expr) -> Terms:
        """The integral that takes the value ``start`` at the place ``r``."""
        whole = self.antiderivative()
        return whole + Terms.constant(sympy.expand(start - whole.expression(r, log)))

"""A rate that is held constant over each step, as pumps are run."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np

from flatplan import units
from flatplan.numeric.panels import Panels
from flatplan.records import Record


@dataclass(frozen=True, repr=False, eq=False)
class Steps(Record):
    """A rate history of constant steps; zero before the first edge and from the last one on.

    Parameters
    ----------
    edges : array_like
        Times between which the rate is constant [s] (numbers, texts or a quantity), strictly increasing, shape (n + 1,).
    rates : array_like
        Rate over each step [m³/s], positive into the ground, shape (n,).

    Attributes
    ----------
    edges, rates : ndarray
        float64, SI, read-only.

    Raises
    ------
    ValueError
        Edges that do not increase, a number of rates that does not fit, a value that is not finite or of another dimension.

    Examples
    --------
    >>> steps = Steps(edges=["0 h", "6 h", "18 h"], rates=["3 L/s", "1 L/s"])
    >>> steps.volume("1 d")
    array([108.])
    """

    edges: np.ndarray
    rates: np.ndarray

    def __init__(self, *, edges: Any, rates: Any) -> None:
        edge_array = units.si_array(edges, "time", "edges")
        rate_array = units.si_array(rates, "rate", "rates")
        if len(edge_array) < 2:
            raise ValueError("edges: got 1 time; it takes at least two, the start and the end of the first step.")
        wrong = np.flatnonzero(np.diff(edge_array) <= 0.0)
        if wrong.size:
            i = int(wrong[0])
            raise ValueError(
                f"edges: got {edge_array[i]:.10g} s followed by {edge_array[i + 1]:.10g} s at position {i + 1};"
                " it takes times that strictly increase."
            )
        if len(rate_array) != len(edge_array) - 1:
            raise ValueError(
                f"rates: got {len(rate_array)} for {len(edge_array)} edges; it takes one rate per step, {len(edge_array) - 1} here."
            )
        for name, array in (("edges", edge_array), ("rates", rate_array)):
            array.flags.writeable = False
            object.__setattr__(self, name, array)

    @property
    def end(self) -> float:
        """When the last step is over [s]."""
        return float(self.edges[-1])

    @cached_property
    def panels(self) -> Panels:
        """The steps as piecewise polynomials of degree 0, exact."""
        return Panels(self.edges, self.rates[:, None], np.zeros(len(self.rates)), float(np.max(np.abs(self.rates))))

    def rate(self, times: Any) -> np.ndarray:
        """Rate at ``times`` [s], shape (k,) [m³/s]; at an edge the step that begins there counts."""
        return self.panels.rate(units.si_array(times, "time", "times"))

    def volume(self, times: Any) -> np.ndarray:
        """Net volume injected from the first edge up to ``times`` [s], shape (k,) [m³]."""
        return self.panels.volume(units.si_array(times, "time", "times"))

    def _title(self) -> str:
        return f"{type(self).__name__}: {len(self.rates)} step{'s' if len(self.rates) > 1 else ''}"

    def _rows(self) -> Iterable[tuple[str, str]]:
        yield "from", units.text(self.edges[0], "time")
        yield "to", units.text(self.edges[-1], "time")
        yield "rates", f"{units.text(self.rates.min(), 'rate')} to {units.text(self.rates.max(), 'rate')}"
        yield "net volume", units.text(float(np.diff(self.edges) @ self.rates), "volume")

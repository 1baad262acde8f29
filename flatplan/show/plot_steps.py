"""The rate as pumped against the plan, and what that does at the target.

Loaded only when something is drawn, because it imports matplotlib.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from matplotlib.figure import Figure

from flatplan.decide import Limits
from flatplan.field import PumpedSteps
from flatplan.numeric import Check, Steps, confirm
from flatplan.show.axes import Curve, EndLabel, back_flow, end_labels, rate_limits, room_for, time_axis, value_axis
from flatplan.show.figure import panels
from flatplan.show.numbers import time_unit
from flatplan.show.plot_check import departure_panel
from flatplan.show.style import COLOURS, DASHES, INK
from flatplan.show.times import dense_times


def plot_pumped(steps: PumpedSteps, limits: Limits | None, check: Check | None, system: str, axes: Any) -> Figure:
    """Stairs against the smooth plan above; the departure of the target, as simulated, below."""
    figure, (upper, lower) = panels(axes, (1.3, 1.0), 4.8)
    _stairs(upper, steps, limits, system)
    departure_panel(lower, check if check is not None else confirm(steps), system, steps.end)
    for panel in (upper, lower):
        time_axis(panel, 0.0, steps.end)
    if upper.get_shared_x_axes().joined(upper, lower):
        upper.set_xlabel("")
        upper.tick_params(labelbottom=False)
    return figure


def plot_steps(steps: Steps, limits: Limits | None, system: str, axes: Any) -> Figure:
    """Stairs alone, for steps that belong to no plan."""
    figure, (panel,) = panels(axes, (1.0,), 3.0)
    _stairs(panel, steps, limits, system)
    time_axis(panel, float(steps.edges[0]), steps.end)
    return figure


def _stairs(axes: Any, steps: Steps, limits: Limits | None, system: str) -> None:
    factor = value_axis(axes, "injection rate", "rate", system)
    unit = time_unit(steps.end - float(steps.edges[0]))[0]
    rates, edges = steps.rates / factor, steps.edges / unit
    stated = limits.stated if limits is not None else {}
    drawn = [rates, np.zeros(1)]
    labels = []
    if isinstance(steps, PumpedSteps):
        times = dense_times(steps.plan)
        smooth = steps.plan.rate(times) / factor
        drawn.append(smooth)
        axes.plot(times / unit, smooth, color=COLOURS["rate"], linestyle=DASHES["planned"], linewidth=1.2, label="planned rate", zorder=4)
        labels.append(EndLabel("planned rate", float(times[-1] / unit), float(smooth[-1]), COLOURS["rate"]))
    found = [stated[name] / factor for name in ("max_rate", "min_rate") if name in stated]
    room_for(axes, drawn, found)
    axes.stairs(rates, edges, baseline=None, color=INK, linewidth=1.4, label="rate as pumped", zorder=5)
    labels.append(EndLabel("rate as pumped", float(edges[-1]), float(rates[-1]), INK))
    corners, levels = np.repeat(edges, 2)[1:-1], np.repeat(rates, 2)
    words = back_flow(axes, corners, levels, 1e-9 * float(np.max(np.abs(rates))), found)
    # points all along each step, so that a long one counts as much as it shows
    along = np.linspace(edges[0], edges[-1], 400)
    height = rates[np.clip(np.searchsorted(edges, along, side="right") - 1, 0, len(rates) - 1)]
    rate_limits(axes, stated, factor, system, [Curve(along, height, filled=True), *words])
    end_labels(axes, labels)

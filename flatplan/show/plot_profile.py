"""Pressure along the path at several moments.

Loaded only when something is drawn, because it imports matplotlib.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from matplotlib.colors import to_hex
from matplotlib.figure import Figure

from flatplan import units
from flatplan.flat import Plan
from flatplan.show.axes import EndLabel, end_labels, room_for, value_axis
from flatplan.show.figure import panels
from flatplan.show.numbers import moment
from flatplan.show.path_axis import drawn_at, path_axis, places_along, reads_by_radius
from flatplan.show.quantities import joins
from flatplan.show.style import GREY
from flatplan.show.table_histories import relative

_MOST_TIMES = 12
_PLACES = 161
# from blue at the start to orange at the end: moments read as an order, and each keeps 4.5 to 1 against white
_FIRST, _LAST = np.array([27, 47, 138]) / 255.0, np.array([205, 74, 14]) / 255.0
_TURNS: tuple[Any, ...] = ("-", (0, (6, 1.6)), (0, (2.2, 1.3)), (0, (7, 1.8, 1.4, 1.8)))


def plot_profile(plan: Plan, times: Any, system: str, axes: Any) -> Figure:
    """Pressure from the target face to the well at ``times`` [s]; by default the turning points of the plan."""
    at = _moments(plan) if times is None else units.si_array(times, "time", "times")
    if len(at) > _MOST_TIMES:
        raise ValueError(f"times: got {len(at)}; a profile is readable with at most {_MOST_TIMES} moments.")
    figure, (panel,) = panels(axes, (1.0,), 3.9)
    factor_length = units.unit_factor("length", system)
    log = reads_by_radius(plan.medium)
    count = max(_PLACES // len(plan.medium.segments), 9)
    places = np.unique(np.concatenate([places_along(s, log, count) for s in plan.medium.segments]))
    pressure = plan.pressure(places, at)
    factor = value_axis(panel, "pressure change" if relative(plan) else "pressure", "pressure", system)
    room_for(panel, [pressure / factor])
    path_axis(panel, plan.medium, system, log)
    x = drawn_at(plan.medium, places, log) / factor_length
    for join in drawn_at(plan.medium, np.array(joins(plan.medium)), log) / factor_length:
        panel.axvline(float(join), color=GREY, linewidth=0.8, zorder=2)
    labels = []
    for i, when in enumerate(at):
        share = i / max(len(at) - 1, 1)
        red, green, blue = (_FIRST + share * (_LAST - _FIRST)).tolist()
        colour = to_hex((red, green, blue))
        values = pressure[:, i] / factor
        panel.plot(x, values, color=colour, linestyle=_TURNS[i % len(_TURNS)], linewidth=1.5, label=moment(float(when), plan.end))
        labels.append(EndLabel(moment(float(when), plan.end), float(x[-1]), float(values[-1]), colour))
    end_labels(panel, labels)
    return figure


def _moments(plan: Plan) -> np.ndarray:
    """The start, and in each move (the two largest of many) a quarter, half, three quarters and its end.

    A moment whose profile all but repeats an earlier one is left out.
    """
    largest = sorted(plan.target.moves, key=lambda m: -abs(m.change))[:2]
    moments = {0.0}
    for move in largest:
        moments |= {move.start + share * move.duration for share in (0.25, 0.5, 0.75, 1.0)}
    times = np.array(sorted(min(t, plan.end) for t in moments))
    profiles = plan.pressure(np.linspace(0.0, plan.medium.length, 21), times).T
    apart = 0.02 * float(np.ptp(profiles))
    kept: list[int] = []
    for i, profile in enumerate(profiles):
        if all(float(np.max(np.abs(profile - profiles[k]))) > apart for k in kept):
            kept.append(i)
    return times[kept]

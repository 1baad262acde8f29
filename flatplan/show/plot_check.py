"""What the independent model says of the target: the curve, and its departure from what is wanted.

Loaded only when something is drawn, because it imports matplotlib.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter, LogLocator

from flatplan.numeric import Check
from flatplan.show.axes import Curve, EndLabel, end_labels, limit_line, room_for, time_axis, value_axis
from flatplan.show.figure import panels
from flatplan.show.numbers import power_of_ten, reading_unit, time_unit
from flatplan.show.style import COLOURS, DASHES, GREY, INK
from flatplan.show.table_records import check_kind

_LOGARITHMIC = 0.02  # a departure below this share of what is allowed would be a flat line on a straight axis


def plot_check(check: Check, system: str, axes: Any) -> Figure:
    """The simulated target on the wanted one above, the departure below."""
    figure, (upper, lower) = panels(axes, (1.1, 1.0), 4.8)
    times = check.channels.times
    end = float(times[-1])
    kind = check_kind(check)
    factor = value_axis(upper, "target pressure" if kind == "pressure" else "rate through the target face", kind, system)
    unit = time_unit(end)[0]
    wanted = check.wanted / factor
    simulated = check.channels.target_pressure / factor
    room_for(upper, [wanted, simulated])
    upper.plot(times / unit, wanted, color=COLOURS["target"], linestyle=DASHES["target"], label="wanted")
    at = np.unique(np.searchsorted(times, np.linspace(times[0], end, 40)))
    upper.plot(
        times[at] / unit, simulated[at], linestyle="none", marker="o", markersize=4.2, markerfacecolor="white",
        markeredgecolor=COLOURS["bottomhole"], markeredgewidth=1.0, label="simulated", zorder=6,
    )  # fmt: skip
    end_labels(
        upper,
        [
            EndLabel("wanted", float(times[-1] / unit), float(wanted[-1]), COLOURS["target"]),
            EndLabel("○ simulated", float(times[-1] / unit), float(simulated[-1]), COLOURS["bottomhole"]),
        ],
    )
    departure_panel(lower, check, system, end)
    for panel in (upper, lower):
        time_axis(panel, 0.0, end)
    if upper.get_shared_x_axes().joined(upper, lower):
        upper.set_xlabel("")
        upper.tick_params(labelbottom=False)
    return figure


def departure_panel(axes: Axes, check: Check, system: str, end: float) -> None:
    """Simulated less wanted target over time; on a logarithmic axis where it is far below what is allowed."""
    kind = check_kind(check)
    unit = time_unit(end)[0]
    departure = check.channels.target_pressure - check.wanted
    allowed = check.allowed * check.target_change
    inside = check.channels.times <= end
    x, departure = check.channels.times[inside] / unit, departure[inside]
    if check.target_error < _LOGARITHMIC * allowed:
        _logarithmic(axes, x, np.abs(departure), check, kind, system)
        return
    factor = value_axis(axes, "departure of the target", kind, system)
    label = reading_unit(kind, system)[1]
    room_for(axes, [departure / factor, np.zeros(1)], [-allowed / factor, allowed / factor])
    axes.axhline(0.0, color=GREY, linewidth=0.9, zorder=2)
    axes.plot(x, departure / factor, color=INK, linewidth=1.3, label="simulated less wanted", zorder=5)
    for sign in (1.0, -1.0):
        limit_line(axes, sign * allowed / factor, "allowed", label, sign > 0.0, [Curve(x, departure / factor)])
    end_labels(axes, [EndLabel("simulated\nless wanted", float(x[-1]), float(departure[-1] / factor), INK)])


def _logarithmic(axes: Axes, x: np.ndarray, size: np.ndarray, check: Check, kind: str, system: str) -> None:
    # such departures are a tiny part of a bar: pascals keep the powers of ten short
    factor, label = (1.0, "Pa") if kind == "pressure" and system != "field" else reading_unit(kind, system)
    allowed = check.allowed * check.target_change / factor
    floor = np.spacing(max(check.target_change, float(np.abs(check.wanted).max()))) / factor
    shown = np.maximum(size / factor, 0.3 * floor)
    axes.set_yscale("log")
    axes.set_ylabel(f"departure of the target [{label}]")
    axes.set_ylim(0.003 * min(floor, float(shown.min())), 30.0 * allowed)
    axes.yaxis.set_major_locator(LogLocator(base=10.0, numticks=7))
    axes.yaxis.set_major_formatter(FuncFormatter(lambda value, _: power_of_ten(value)))
    axes.yaxis.minorticks_off()
    axes.plot(x, shown, color=INK, linewidth=0.9, label="simulated less wanted, size", zorder=5)
    limit_line(axes, allowed, "allowed", label, True)
    grid = check.grid_error / factor
    axes.axhline(max(grid, 0.3 * floor), color=COLOURS["sandface"], linestyle=DASHES["sandface"], linewidth=1.3, zorder=3)
    axes.annotate(
        "error estimate of the model", (1.0, max(grid, 0.3 * floor)), xycoords=("axes fraction", "data"), xytext=(-4.0, 2.0),
        textcoords="offset points", ha="right", va="bottom", color=COLOURS["sandface"], fontsize="small",
    )  # fmt: skip
    axes.annotate(
        "simulated less wanted", (0.0, 0.0), xycoords="axes fraction", xytext=(4.0, 3.0),
        textcoords="offset points", ha="left", va="bottom", color=INK, fontsize="small",
    )  # fmt: skip

"""The main figure: pressures above, rates below, over time, with limits and what was pumped or simulated.

Loaded only when something is drawn, because it imports matplotlib.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from flatplan.channels import Channels
from flatplan.decide import Limits
from flatplan.flat import Plan
from flatplan.numeric import Check, Steps
from flatplan.show.axes import Curve, EndLabel, back_flow, end_labels, limit_line, rate_limits, room_for, time_axis, value_axis
from flatplan.show.figure import panels
from flatplan.show.numbers import reading_unit, time_unit
from flatplan.show.style import COLOURS, DASHES, GREY, INK
from flatplan.show.table_histories import relative
from flatplan.show.times import dense_times

_HEIGHTS, _HEIGHT = (1.25, 1.0), 5.0
_PRESSURE_LIMITS = (
    ("max_bottomhole_pressure", True, "largest allowed bottomhole pressure"),
    ("min_bottomhole_pressure", False, "smallest allowed bottomhole pressure"),
)
_SAME = 1e-6  # two lines closer than this share of their span are drawn as one


def plot_plan(plan: Plan, limits: Limits | None, steps: Steps | None, check: Check | None, system: str, axes: Any) -> Figure:
    """A plan over time, with limits, the rate as pumped and the simulated target where they are given.

    For a held face the target is a rate: it is drawn below, with the injection rate.
    """
    figure, (upper, lower) = panels(axes, _HEIGHTS, _HEIGHT)
    channels = plan.at(dense_times(plan))
    _pressures(upper, channels, limits, check, system, "target pressure, wanted", " change" if relative(plan) else "")
    certificate = plan.certificate
    floor = certificate.tail["injection_rate"] + certificate.rounding["injection_rate"]
    _rates(lower, channels, limits, steps, system, floor, check, ", wanted")
    _share_time(upper, lower, 0.0, plan.end)
    return figure


def plot_channels(channels: Channels, limits: Limits | None, system: str, axes: Any) -> Figure:
    """Channels of a plan or a simulation over their own times."""
    if len(channels.times) < 2:
        raise ValueError(f"thing: got channels at {len(channels.times)} time; a figure over time takes at least two.")
    figure, (upper, lower) = panels(axes, _HEIGHTS, _HEIGHT)
    _pressures(upper, channels, limits, None, system, "target pressure")
    _rates(lower, channels, limits, None, system, 1e-9 * float(np.max(np.abs(channels.injection_rate))))
    _share_time(upper, lower, float(channels.times[0]), float(channels.times[-1]))
    return figure


def _share_time(upper: Axes, lower: Axes, start: float, end: float) -> None:
    time_axis(lower, start, end)
    time_axis(upper, start, end)
    if upper.get_shared_x_axes().joined(upper, lower):
        upper.set_xlabel("")
        upper.tick_params(labelbottom=False)


def _unit(channels: Channels) -> float:
    """Seconds in one unit of the time axis."""
    return time_unit(float(channels.times[-1] - channels.times[0]))[0]


def _pressures(
    axes: Axes, channels: Channels, limits: Limits | None, check: Check | None, system: str, target_words: str, change: str = ""
) -> None:
    factor = value_axis(axes, f"pressure{change}", "pressure", system)
    held = channels.target_kind == "rate"  # there the target is a rate, and drawn with the rates
    x = channels.times / _unit(channels)
    bottomhole, sandface, target = (
        getattr(channels, name) / factor for name in ("bottomhole_pressure", "sandface_pressure", "target_pressure")
    )
    stated = limits.stated if limits is not None else {}
    found = [stated[name] / factor for name in ("max_bottomhole_pressure", "min_bottomhole_pressure") if name in stated]
    low, high = room_for(axes, [bottomhole, sandface] if held else [bottomhole, sandface, target], found)
    same = float(np.max(np.abs(bottomhole - sandface))) <= _SAME * max(high - low, 1e-300)
    lines = [("bottomhole", bottomhole, "bottomhole and sandface" if same else "bottomhole")]
    if not same:
        lines.append(("sandface", sandface, "sandface"))
    if not held:
        lines.append(("target", target, target_words))
    labels = []
    for name, values, words in lines:
        axes.plot(x, values, color=COLOURS[name], linestyle=DASHES[name], label=words, zorder=5 if name == "target" else 4)
        labels.append(EndLabel(words, float(x[-1]), float(values[-1]), COLOURS[name]))
    if check is not None and not held:
        labels.append(_simulated(axes, channels, check, factor))
    curves = [Curve(x, values) for _, values, _ in lines]
    for name, above, words in _PRESSURE_LIMITS:
        if name in stated:
            limit_line(axes, stated[name] / factor, words, reading_unit("pressure", system)[1], above, curves)
    end_labels(axes, labels[::-1])


def _simulated(axes: Axes, channels: Channels, check: Check, factor: float) -> EndLabel:
    """Open circles on the target as the independent model has it."""
    unit = _unit(channels)
    wanted = np.linspace(channels.times[0], channels.times[-1], 34)
    at = np.unique(np.clip(np.searchsorted(check.channels.times, wanted), 0, len(check.channels.times) - 1))
    at = at[check.channels.times[at] <= channels.times[-1]]
    x, y = check.channels.times[at] / unit, check.channels.target_pressure[at] / factor
    words = "target, simulated as pumped" if check.subject == "steps" else "target, simulated"
    axes.plot(
        x,
        y,
        linestyle="none",
        marker="o",
        markersize=4.0,
        markerfacecolor="white",
        markeredgecolor=INK,
        markeredgewidth=0.8,
        label=words,
        zorder=6,
    )
    return EndLabel(f"○ {words}", float(x[-1]), float(y[-1]), INK)


def _rates(
    axes: Axes,
    channels: Channels,
    limits: Limits | None,
    steps: Steps | None,
    system: str,
    floor: float,
    check: Check | None = None,
    wanted: str = "",
) -> None:
    held = channels.target_kind == "rate"
    factor = value_axis(axes, "rate" if held else "injection rate", "rate", system)
    x = channels.times / _unit(channels)
    injection, sandface = channels.injection_rate / factor, channels.sandface_rate / factor
    stated = limits.stated if limits is not None else {}
    found = [stated[name] / factor for name in ("max_rate", "min_rate") if name in stated]
    drawn = [injection, np.zeros(1)] + ([steps.rates / factor] if steps is not None else [])
    if held:
        drawn.append(channels.target_pressure / factor)
    low, high = room_for(axes, drawn, found)
    labels = []
    if held:
        through = f"target face{wanted}"
        axes.plot(x, drawn[-1], color=COLOURS["target"], linestyle=DASHES["target"], label=through, zorder=4)
        labels.append(EndLabel(through, float(x[-1]), float(drawn[-1][-1]), COLOURS["target"]))
        if check is not None:
            labels.append(_simulated(axes, channels, check, factor))
    if steps is None and np.max(np.abs(injection - sandface)) > _SAME * max(high - low, 1e-300):
        axes.plot(x, sandface, color=COLOURS["sandface"], linestyle=DASHES["sandface"], label="sandface rate", zorder=3)
        labels.append(EndLabel("sandface rate", float(x[-1]), float(sandface[-1]), COLOURS["sandface"]))
    smooth = DASHES["planned"] if steps is not None else DASHES["rate"]
    axes.plot(
        x, injection, color=COLOURS["rate"], linestyle=smooth, linewidth=1.1 if steps is not None else 1.6, label="planned rate", zorder=5
    )
    labels.append(EndLabel("planned rate" if steps is not None else "injection rate", float(x[-1]), float(injection[-1]), COLOURS["rate"]))
    if steps is not None:
        unit = _unit(channels)
        pumped = GREY if held else INK
        axes.stairs(steps.rates / factor, steps.edges / unit, baseline=None, color=pumped, linewidth=1.2, label="rate as pumped", zorder=4)
        labels.append(EndLabel("rate as pumped", float(steps.edges[-1] / unit), float(steps.rates[-1] / factor), pumped))
    words = back_flow(axes, x, injection, floor / factor, found)
    rate_limits(axes, stated, factor, system, [Curve(x, injection, filled=True), *words])
    end_labels(axes, labels)

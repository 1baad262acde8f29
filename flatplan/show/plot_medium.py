"""A sketch of the path: its zones between target face and well, and the mobility and storage along it.

Loaded only when something is drawn, because it imports matplotlib.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.patches import Rectangle
from matplotlib.ticker import FixedLocator, FuncFormatter, MaxNLocator

from flatplan import units
from flatplan.show.figure import panels
from flatplan.show.numbers import reading_unit, significant
from flatplan.show.path_axis import drawn_at, log_ticks, path_axis, places_along
from flatplan.show.quantities import ZoneOf, is_radial, zones_of
from flatplan.show.style import COLOURS, DASHES, GREY, INK
from flatplan.site import Medium

_FILLS = ("#e8eaf1", "#d3dae6", "#f1e8dc", "#dfe9e6", "#ece2ea")
_POINTS = 41
_BOX = (0.12, 0.5)  # bottom and height of the zones in the sketch


def plot_medium(medium: Medium, system: str, axes: Any) -> Figure:
    """Zones from the target face (left) to the well (right) above, mobility and storage along the path below.

    Radii stand on a logarithmic axis, so that the rock near the well can be seen.
    """
    figure, drawn = panels(axes, (0.9, 1.0, 1.0), 5.0)
    radial = is_radial(medium)
    for panel in drawn:
        path_axis(panel, medium, system, radial)
    if axes is None:
        for panel in drawn[:-1]:
            panel.set_xlabel("")
    length = units.unit_factor("length", system)
    _sketch(drawn[0], medium, length, radial, system)
    # SI mobilities of rock are far from one; the field's own unit reads best in every system
    mobility = units.unit_factor("permeability", "field") / units.unit_factor("viscosity", "field")
    _curve(drawn[1], medium, length, radial, lambda s, x: s.mobility_at(x) / mobility, "mobility k/μ [mD/cP]")
    per = 1e-6 * units.unit_factor("compressibility", system)
    label = units.label("compressibility", system).removeprefix("1")
    _curve(drawn[2], medium, length, radial, lambda s, x: s.capacity_at(x) / per, f"storage φ·cₜ [10⁻⁶{label}]")
    return figure


def _sketch(panel: Axes, medium: Medium, length: float, radial: bool, system: str) -> None:
    panel.set_ylim(0.0, 1.0)
    panel.set_yticks([])
    panel.grid(False)
    panel.spines["left"].set_visible(False)
    zones = zones_of(medium)
    first, last = panel.get_xlim()
    points = panel.get_window_extent().width * 72.0 / panel.figure.dpi
    bottom, height = _BOX
    for i, zone in enumerate(zones):
        left, right = (float(v) / length for v in drawn_at(medium, np.array([zone.start, zone.end]), radial))
        panel.add_patch(Rectangle((left, bottom), right - left, height, facecolor=_FILLS[i % len(_FILLS)], edgecolor=GREY, linewidth=0.6))
        share = np.log(right / left) / np.log(last / first) if radial else (right - left) / (last - first)
        room = float(share) * points - 8.0
        middle = (left * right) ** 0.5 if radial else 0.5 * (left + right)
        words = _fitting(_zone_words(zone, i if len(zones) > 1 else None, system), room)
        if words:
            panel.text(middle, bottom + 0.5 * height, words, ha="center", va="center", fontsize="small", color=INK)
        leaks = _fitting(["leaks through the bed", "leaks", "↑"], room)
        if zone.leakage and leaks:
            panel.text(middle, bottom + height + 0.03, leaks, ha="center", va="bottom", fontsize="small", color=COLOURS["sandface"])
    ends = (
        (0.0, "left", f"target face: {_face_words(medium)}", "target"),
        (1.0, "right", f"sandface and well{_well_words(medium)}", "rate"),
    )
    for x, side, words, colour in ends:
        panel.axvline(
            panel.get_xlim()[int(x)], ymin=0.06, ymax=0.8, color=COLOURS[colour], linewidth=3.0, linestyle=DASHES["target"], clip_on=False
        )
        panel.text(x, 0.98, words, transform=panel.transAxes, ha=side, va="top", fontsize="small", color=COLOURS[colour])


def _zone_words(zone: ZoneOf, number: int | None, system: str) -> list[str]:
    """What may be written in a zone, from the longest to the shortest."""
    factor, unit = reading_unit("diffusivity", system)
    values = [s.diffusivity / factor for s in zone.segments]
    alpha = f"α {significant(min(values), 3)}{f' to {significant(max(values), 3)}' if zone.varies else ''} {unit}"
    if number is None:
        return [alpha]
    return [f"zone {number + 1}\n{alpha}", f"zone {number + 1}\n{alpha.removesuffix(unit).strip()}", f"zone {number + 1}", f"{number + 1}"]


def _fitting(choices: list[str], room: float) -> str:
    """The first that fits into ``room`` points (a small letter is about 4.8 wide); empty where none does."""
    return next((words for words in choices if 4.8 * max(len(line) for line in words.splitlines()) <= room), "")


def _face_words(medium: Medium) -> str:
    face = medium.face
    if face.held:
        return "held"
    return " and ".join(word for word, there in (("leaky", face.leak), ("storing", face.storage)) if there) or "sealed"


def _well_words(medium: Medium) -> str:
    words = [word for word, there in (("resistance", medium.well_resistance), ("wellbore storage", medium.well.storage)) if there]
    return f" with {' and '.join(words)}" if words else ""


def _curve(panel: Axes, medium: Medium, length: float, radial: bool, value: Any, words: str) -> None:
    x_all, y_all = [], []
    for segment in medium.segments:
        x = places_along(segment, radial, _POINTS)
        x_all.append(drawn_at(medium, x, radial) / length)
        y_all.append(np.broadcast_to(np.asarray(value(segment, x), dtype=float), x.shape))
    y = np.concatenate(y_all)
    panel.plot(np.concatenate(x_all), y, color=COLOURS["target"], linestyle=DASHES["target"])
    panel.set_ylabel(words)
    formatter = FuncFormatter(lambda v, _: significant(v))
    if y.max() > 8.0 * y.min():
        panel.set_yscale("log")
        low, high = 0.7 * float(y.min()), 1.4 * float(y.max())
        panel.set_ylim(low, high)
        panel.yaxis.set_major_locator(FixedLocator(log_ticks(low, high)))
        panel.yaxis.set_major_formatter(formatter)
        panel.yaxis.minorticks_off()
        return
    panel.set_ylim(0.0, 1.15 * float(y.max()))
    panel.yaxis.set_major_locator(MaxNLocator(nbins=5))
    panel.yaxis.set_major_formatter(formatter)

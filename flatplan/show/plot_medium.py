"""A sketch of the path: its zones between target face and well, and the mobility and storage along it.

Loaded only when something is drawn, because it imports matplotlib.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.patches import Rectangle
from matplotlib.ticker import FuncFormatter, LogLocator, MaxNLocator, NullFormatter

from flatplan import units
from flatplan.show.axes import plain_ticks
from flatplan.show.figure import panels
from flatplan.show.numbers import significant
from flatplan.show.style import COLOURS, DASHES, GREY, INK
from flatplan.site import Medium, Segment

_FILLS = ("#e8eaf1", "#d3dae6", "#f1e8dc", "#dfe9e6", "#ece2ea")
_MOST_NAMED = 6  # zones named one by one in the sketch
_POINTS = 41


def plot_medium(medium: Medium, system: str, axes: Any) -> Figure:
    """Zones from the target face (left) to the well (right) above, mobility and storage along the path below."""
    figure, drawn = panels(axes, (0.9, 1.0, 1.0), 5.0)
    length = units.unit_factor("length", system)
    radial = medium.segments[0].power > 0
    for panel in drawn:
        _path_axis(panel, medium, length, radial)
    _sketch(drawn[0], medium, length, radial)
    # SI mobilities of rock are far from one; the field's own unit reads best in every system
    mobility = units.unit_factor("permeability", "field") / units.unit_factor("viscosity", "field")
    _curve(drawn[1], medium, length, radial, lambda s, x: s.mobility_at(x) / mobility, "mobility k/μ [mD/cP]")
    per = 1e-6 * units.unit_factor("compressibility", system)
    label = units.label("compressibility", system).removeprefix("1")
    _curve(drawn[2], medium, length, radial, lambda s, x: s.capacity_at(x) / per, f"storage φ·cₜ [10⁻⁶{label}]")
    word = "radius" if radial else "distance from the target face"
    drawn[2].set_xlabel(f"{word} [{units.label('length', system)}]")
    return figure


def _places(segment: Segment, length: float, radial: bool, count: int = _POINTS) -> tuple[np.ndarray, np.ndarray]:
    """(path coordinates, where they are drawn) along a segment."""
    if not radial:
        x = np.linspace(segment.start, segment.end, count)
        return x, x / length
    r = np.geomspace(segment.radius(segment.start), segment.radius(segment.end), count)
    x = np.clip(np.abs(r - segment.origin), segment.start, segment.end)
    return x, r / length


def _path_axis(panel: Axes, medium: Medium, length: float, radial: bool) -> None:
    """Target face left, well right; radii on a logarithmic axis, so that the rock near the well can be seen."""
    first, last = medium.segments[0], medium.segments[-1]
    if not radial:
        panel.set_xlim(0.0, medium.length / length)
        panel.xaxis.set_major_locator(MaxNLocator(nbins=8, steps=[1, 2, 2.5, 5, 10]))
        plain_ticks(panel.xaxis)
        return
    panel.set_xscale("log")
    panel.set_xlim(first.radius(first.start) / length, last.radius(last.end) / length)
    panel.xaxis.set_major_locator(LogLocator(subs=(1.0, 3.0), numticks=12))
    panel.xaxis.set_minor_formatter(NullFormatter())
    panel.xaxis.set_major_formatter(FuncFormatter(_plain))


def _sketch(panel: Axes, medium: Medium, length: float, radial: bool) -> None:
    panel.set_ylim(0.0, 1.0)
    panel.set_yticks([])
    panel.grid(False)
    panel.spines["left"].set_visible(False)
    many = len(medium.segments) > _MOST_NAMED
    for i, segment in enumerate(medium.segments):
        _, at = _places(segment, length, radial, 2)
        left, right = float(at[0]), float(at[-1])
        panel.add_patch(Rectangle((left, 0.12), right - left, 0.5, facecolor=_FILLS[i % len(_FILLS)], edgecolor=GREY, linewidth=0.6))
        if many:
            continue
        middle = (left * right) ** 0.5 if radial else 0.5 * (left + right)
        name = f"zone {i + 1}\n" if len(medium.segments) > 1 else ""
        panel.text(
            middle, 0.37, f"{name}α {significant(segment.diffusivity, 3)} m²/s", ha="center", va="center", fontsize="small", color=INK
        )
        if segment.leakage:
            panel.text(middle, 0.66, "leaks", ha="center", va="bottom", fontsize="small", color=COLOURS["sandface"])
    ends = (
        (0.0, "left", f"target face: {_face_words(medium)}", "target"),
        (1.0, "right", f"sandface and well{_well_words(medium)}", "rate"),
    )
    for x, side, words, colour in ends:
        panel.axvline(
            panel.get_xlim()[int(x)], ymin=0.06, ymax=0.8, color=COLOURS[colour], linewidth=3.0, linestyle=DASHES["target"], clip_on=False
        )
        panel.text(x, 0.98, words, transform=panel.transAxes, ha=side, va="top", fontsize="small", color=COLOURS[colour])


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
        x, at = _places(segment, length, radial)
        x_all.append(at)
        y_all.append(np.broadcast_to(np.asarray(value(segment, x), dtype=float), x.shape))
    y = np.concatenate(y_all)
    panel.plot(np.concatenate(x_all), y, color=COLOURS["target"], linestyle=DASHES["target"])
    panel.set_ylabel(words)
    if y.max() > 8.0 * y.min():
        panel.set_yscale("log")
        panel.yaxis.set_major_formatter(FuncFormatter(_plain))
        panel.yaxis.set_minor_formatter(NullFormatter())
        return
    panel.set_ylim(0.0, 1.15 * float(y.max()))
    panel.yaxis.set_major_locator(MaxNLocator(nbins=5))
    panel.yaxis.set_major_formatter(FuncFormatter(_plain))


def _plain(value: float, position: int) -> str:
    return f"{value:g}"

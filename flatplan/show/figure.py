"""Figures that show themselves in a notebook without pyplot, and the axes in them.

Loaded only when something is drawn, because it imports matplotlib.
"""

from __future__ import annotations

import io
from collections.abc import Sequence
from typing import Any

from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

from flatplan.show.style import WIDTH, house_style


class NotebookFigure(Figure):
    """A matplotlib figure that is no part of pyplot's state and still displays at the end of a notebook cell.

    Parameters
    ----------
    *args, **kwargs
        As `matplotlib.figure.Figure` takes them.

    Raises
    ------
    ValueError
        As `matplotlib.figure.Figure`.
    """

    def __init__(self, *args: Any, **kwargs: Any) -> None:
        super().__init__(*args, **kwargs)
        FigureCanvasAgg(self)

    def _repr_png_(self) -> bytes:
        return image(self, "png")


def image(figure: Figure, kind: str) -> bytes:
    """A figure as a file of this kind ("png" or "svg"); the text of an SVG is drawn as shapes."""
    out = io.BytesIO()
    with house_style():
        # a date in the file would make every run's file different
        figure.savefig(out, format=kind, metadata={"Date": None} if kind == "svg" else None)
    return out.getvalue()


def panels(axes: Any, heights: Sequence[float], height: float) -> tuple[Figure, list[Axes]]:
    """A figure and its panels above one another, time shared; or the axes that were passed in.

    Raises
    ------
    TypeError
        Something other than axes.
    ValueError
        Another number of axes than the figure has panels.
    """
    if axes is None:
        figure = NotebookFigure(figsize=(WIDTH, height), layout="constrained")
        made = figure.subplots(len(heights), 1, sharex=True, squeeze=False, gridspec_kw={"height_ratios": list(heights)})
        figure.align_ylabels(made[:, 0])
        return figure, list(made[:, 0])
    given = [axes] if isinstance(axes, Axes) else list(axes)
    for entry in given:
        if not isinstance(entry, Axes):
            raise TypeError(f"axes: got {type(entry).__name__}; it takes matplotlib axes.")
    if len(given) != len(heights):
        raise ValueError(f"axes: got {len(given)}; this figure has {len(heights)} panel{'s' if len(heights) > 1 else ''}.")
    owner = given[0].get_figure(root=True)
    if owner is None:
        raise ValueError("axes: got axes that were removed from their figure.")
    return owner, given

"""Formulas as pictures inside the page, drawn from LaTeX without anything fetched from outside."""

from __future__ import annotations

import io
from typing import Any

_SIZE = 11.0  # points
_MOST_WIDTH = 400.0  # points: what the column for formulas holds on A4
_MOST_LINES = 3
# matplotlib types the keys one by one; a plain dictionary is as good
_SETTINGS: Any = {"mathtext.fontset": "stix", "svg.fonttype": "path", "svg.hashsalt": "flatplan"}


def lines_of(expression: Any) -> list[str] | None:
    """LaTeX of an expression in lines that fit the page, broken between the terms of a sum; None where it is too long."""
    import sympy

    terms = [sympy.latex(term, ln_notation=True).replace("\\frac", "\\dfrac") for term in sympy.Add.make_args(expression)]
    signed = [term if i == 0 or term.startswith("-") else f"+ {term}" for i, term in enumerate(terms)]
    lines: list[str] = []
    for term in signed:
        longer = f"{lines[-1]} {term}" if lines else term
        if lines and _width(longer) <= _MOST_WIDTH:
            lines[-1] = longer
        elif _width(term) <= _MOST_WIDTH and len(lines) < _MOST_LINES:
            lines.append(term)
        else:
            return None
    return lines


def _width(latex: str) -> float:
    return _parsed(latex)[0]


def _parsed(latex: str) -> tuple[float, float, float]:
    """(width, height, depth) of a line in points."""
    import matplotlib as mpl
    from matplotlib.font_manager import FontProperties
    from matplotlib.mathtext import MathTextParser

    with mpl.rc_context(_SETTINGS):
        width, height, depth, *_ = MathTextParser("path").parse(f"${latex}$", dpi=72, prop=FontProperties(size=_SIZE))
    return float(width), float(height), float(depth)


def formula_svg(latex: str) -> tuple[bytes, float, float]:
    """(SVG file, width, height in points) of one line."""
    import matplotlib as mpl
    from matplotlib.figure import Figure

    from flatplan.show.style import INK

    width, height, depth = _parsed(latex)
    wide, tall = width + 2.0, height + 2.0
    out = io.BytesIO()
    with mpl.rc_context(_SETTINGS):
        figure = Figure(figsize=(wide / 72.0, tall / 72.0))
        figure.patch.set_alpha(0.0)
        figure.text(1.0 / wide, (depth + 1.0) / tall, f"${latex}$", fontsize=_SIZE, color=INK, va="baseline")
        figure.savefig(out, format="svg", metadata={"Date": None}, transparent=True)
    return out.getvalue(), wide, tall

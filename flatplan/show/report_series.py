"""Report, the series: the injection rate as a formula in the target and its derivatives, to read and to check by hand."""

from __future__ import annotations

from typing import Any

from flatplan import units
from flatplan.flat import Plan
from flatplan.show.formula import formula_svg, lines_of
from flatplan.show.numbers import reading_unit, significant
from flatplan.show.page import Markup, element, image, joined, table
from flatplan.show.quantities import zones_of
from flatplan.site import Medium

_TERMS = 4  # derivatives written out in numbers
_SYMBOLS = 3  # and in symbols, where they are short enough
_DERIVATIVES = ("y", "y\u2032", "y\u2033", "y\u2034")

_CONDUCTANCE = {
    "linear": ("conductance A k/μ", "m⁴/(Pa s)"),
    "radial": ("conductance 2π h k/μ", "m³/(Pa s)"),
    "spherical": ("conductance 4π k/μ times the share of the sphere", "m²/(Pa s)"),
}


def series_part(plan: Plan, system: str) -> Markup:
    """The first terms of the injection rate in numbers, and in symbols where they are short enough to read."""
    medium = plan.medium
    kind = "rate" if medium.face.held else "pressure"
    what = "the rate through the target face" if medium.face.held else "the change of the target pressure from its start"
    rate, wanted = reading_unit("rate", system)[1], reading_unit(kind, system)[1]
    written = symbolic_terms(medium)
    letters = ("c₀ y", "c₁ y′", "c₂ y″", "c₃ y‴")
    words = (
        f"The injection rate is Q = {' + '.join(letters)} + …, where y is {what} and each prime a time derivative. "
        f"With y in {wanted}, time in days and Q in {rate} the first coefficients are those below; medium.coefficients gives them to "
        "any order. "
        f"This plan uses derivatives up to order {plan.certificate.terms}."
    )
    head = ["term", "coefficient in numbers"] + (["coefficient in symbols"] if written else [])
    rows = [_row(k, value, written) for k, value in enumerate(coefficients(medium, system))]
    parts = [
        element("p", words),
        table(head, rows, f"The series of the injection rate, Q [{rate}]", numbers=(False, True, False), class_="narrow series"),
    ]
    if written:
        parts.append(element("p", "In symbols, all in SI units: ", *_symbols(medium, written), class_="small"))
    elif medium.uniform:
        parts.append(
            element("p", "In symbols the coefficients of this medium are too long for a page; medium.series gives them.", class_="small")
        )
    else:
        parts.append(element("p", "For a rock that varies along the path there is no closed form in symbols.", class_="small"))
    return joined(parts)


def coefficients(medium: Medium, system: str) -> list[float]:
    """The first coefficients for rates, target and days in the reader's units."""
    kind = "rate" if medium.face.held else "pressure"
    scale = reading_unit(kind, system)[0] / reading_unit("rate", system)[0]
    day = units.si("1 d", "time", "day")
    return [float(value) * scale / day**k for k, value in enumerate(medium.coefficients("injection_rate", _TERMS - 1))]


def symbolic_terms(medium: Medium) -> dict[int, tuple[Any, list[str]]]:
    """(expression, LaTeX lines) of the first coefficients that fit the page, by order; none where no line would be readable.

    Several zones, or leakage in other than linear flow, make formulas of a page and more.
    """
    zones = zones_of(medium)
    leaks = any(zone.leakage for zone in zones)
    if len(zones) > 1 or zones[0].varies or (leaks and medium.flow != "linear"):
        return {}
    found: dict[int, tuple[Any, list[str]]] = {}
    for k in range((1 if leaks else _SYMBOLS) + 1):
        expression = _shortest(_coefficient(medium, k))
        lines = lines_of(expression)
        if lines is None:
            break
        found[k] = expression, lines
    return found if len(found) > 1 else {}


def _coefficient(medium: Medium, k: int) -> Any:
    """The factor of the k-th derivative in the series of the injection rate."""
    import sympy

    t = sympy.Symbol("t")
    y = sympy.Function("y")(t)
    return medium.series("injection_rate", k).coeff(sympy.Derivative(y, (t, k)) if k else y)


def _shortest(expression: Any) -> Any:
    """As it is or with common factors taken out, whichever is shorter; logarithms stay whole."""
    import sympy

    if expression.has(sympy.log, sympy.sinh, sympy.cosh):
        return expression
    return min((expression, sympy.factor(expression)), key=lambda e: len(str(e)))


def _row(k: int, value: float, written: dict[int, tuple[Any, list[str]]]) -> list[Any]:
    cells: list[Any] = [f"c{'₀₁₂₃'[k]} {_DERIVATIVES[k]}", significant(value, 6)]
    if written:
        cells.append(_formula(*written[k]) if k in written else "longer; medium.series gives it")
    return cells


def _formula(expression: Any, lines: list[str]) -> Markup:
    """The lines one below another; the first carries the plain formula for those who cannot see it."""
    plain = str(expression).replace("**", "^")
    pictures = []
    for i, line in enumerate(lines):
        svg, wide, tall = formula_svg(line)
        pictures.append(image(svg, plain if i == 0 else "continued", f"width:{wide:.1f}pt;height:{tall:.1f}pt"))
    return joined(element("div", picture, class_="formula") for picture in pictures)


def _symbols(medium: Medium, written: dict[int, tuple[Any, list[str]]]) -> list[Any]:
    """Each symbol that occurs, with its meaning and value."""
    occur = {symbol.name for expression, _ in written.values() for symbol in expression.free_symbols}
    said: list[Any] = []
    for name, meaning, value, unit in _meanings(medium):
        if name in occur:
            letter, _, below = {"alpha": "α", "lambda": "λ", "kappa": "κ"}.get(name, name).partition("_")
            said += ["; " if said else "", element("i", letter), *([element("sub", below)] if below else [])]
            said.append(f" {meaning}, {significant(value, 5)} {unit}")
    return [*said, "."]


def _meanings(medium: Medium) -> list[tuple[str, str, float, str]]:
    """(name, meaning, value, unit) of the symbols that `Medium.series` uses for a medium of one uniform zone, SI."""
    zone, well = medium.segments[0], medium.well
    conductance, unit = _CONDUCTANCE[medium.flow]
    return [
        ("alpha", "hydraulic diffusivity k/(φ μ cₜ)", zone.diffusivity, "m²/s"),
        ("T", conductance, zone.mobility * zone.area_factor, unit),
        ("lambda", "leakage over storage", zone.leakage / zone.capacity, "1/s"),
        ("L", "length of the path", medium.length, "m"),
        ("r_0", "radius of the target face", float(zone.radius(zone.start)), "m"),
        ("r_w", "radius at the well", float(zone.radius(zone.end)), "m"),
        ("kappa", "leak through the target face", medium.face.leak, units.label("face leak")),
        ("C_f", "storage behind the target face", medium.face.storage, units.label("storage")),
        ("R", "well resistance", medium.well_resistance, units.label("resistance")),
        ("C_w", "wellbore storage", well.storage, units.label("storage")),
    ]

"""Report, figures: each as an image inside the page, with words for those who cannot see it."""

from __future__ import annotations

from typing import TYPE_CHECKING

from flatplan.decide import Verdict
from flatplan.flat import Plan
from flatplan.numeric import Check
from flatplan.show.job import Job
from flatplan.show.numbers import amount, duration, significant
from flatplan.show.page import Markup, joined, picture
from flatplan.show.plot import plot
from flatplan.show.quantities import is_radial, joins, zones_of

if TYPE_CHECKING:
    from matplotlib.figure import Figure


def plan_figures(job: Job, verdict: Verdict | None, check: Check | None, system: str) -> Markup:
    """The plan over time, and pressure along the path."""
    plan, target = job.plan, job.plan.target
    history = plot(plan, limits=verdict, steps=job.steps, check=check, units=system)
    drawn = "the rate as pumped in steps over the planned rate" if job.steps is not None else "the planned injection rate"
    goes = f"the target going from {amount(target.start, target.kind, system)} to {amount(target.level, target.kind, system)}"
    if plan.medium.face.held:
        above, below = "bottomhole and sandface pressure", f"the wanted rate through the target face, {goes}, and {drawn}"
        caption = "Pressures above, rates below; limits dash-dotted, back-flow hatched."
    else:
        above, below = f"bottomhole, sandface and wanted target pressure, {goes}", drawn
        caption = "Pressures above, injection rate below; limits dash-dotted, back-flow hatched."
    alternative = (
        f"Two panels over {duration(plan.end)}. Above: {above}. Below: {below}, at most {amount(job.highest_rate.value, 'rate', system)}."
    )
    if check is not None:
        caption += " Circles: the target as the independent model has it."
    profile = plot(plan, kind="profile", units=system)
    length = amount(plan.medium.length, "length", system)
    return joined(
        [
            _picture(history, alternative, caption),
            _picture(
                profile,
                f"Pressure along the {length} from the target face to the well, at several moments of the plan.",
                "Pressure along the path at several moments; the target face is on the left, the well on the right."
                + (" Thin upright lines: where zones join." if joins(plan.medium) else ""),
            ),
        ]
    )


def medium_figure(plan: Plan, system: str) -> Markup:
    """The sketch of the path."""
    medium = plan.medium
    zones = zones_of(medium)
    extents = [[amount(v, "length", system) for v in zone.extent(is_radial(medium))] for zone in zones]
    word = "radius" if is_radial(medium) else "distance"
    listed = "; ".join(f"zone {i} from {word} {a} to {b}" for i, (a, b) in enumerate(extents, start=1))
    alternative = (
        f"Sketch of the path from the target face on the left to the well on the right: {listed}. Below it the mobility and the "
        "storage of the rock along the path."
    )
    return _picture(plot(medium, units=system), alternative, "The path, with the mobility and the storage of its rock.")


def terms_figure(plan: Plan, system: str) -> Markup:
    """The series of the injection rate term by term."""
    terms = plan.terms()
    left_out = significant(terms.left_out / (terms.peak or 1.0), 2)
    alternative = (
        f"The terms of the injection rate over its peak, on a logarithmic axis, falling until the last one used, term {terms.cut}; all "
        f"later terms together are at most {left_out} of the peak."
    )
    caption = (
        "The series of the injection rate converges: each term (circles: its largest size over time; solid: its proven bound) is in the "
        f"end far below the one before, and behind the cut after term {terms.cut} all that is left (dashed: proven bound) is below the "
        "tolerance."
    )
    return _picture(plot(terms, units=system), alternative, caption)


def check_figures(job: Job, check: Check | None, verdict: Verdict | None, system: str) -> Markup:
    """The checks of the plan and of the rate as pumped, where they are given."""
    parts = []
    if check is not None:
        parts.append(
            _picture(
                plot(check, units=system),
                "Simulated and wanted target over time, and their difference.",
                "The plan on the independent model: the target above, its departure from what is wanted below.",
            )
        )
    if job.steps is not None and job.steps_check is not None:
        parts.append(
            _picture(
                plot(job.steps, check=job.steps_check, limits=verdict, units=system),
                "Stepped and planned rate over time, and the departure of the target that the steps cause.",
                "The rate as pumped against the plan, and what the steps cost at the target.",
            )
        )
    return joined(parts)


def _picture(figure: Figure, alternative: str, caption: str) -> Markup:
    from flatplan.show.figure import image  # matplotlib loads when something is drawn

    return picture(image(figure, "svg"), alternative, caption)

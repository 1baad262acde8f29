"""Report, figures: each as an image inside the page, with words for those who cannot see it."""

from __future__ import annotations

from typing import TYPE_CHECKING

from flatplan.decide import Verdict
from flatplan.numeric import Check
from flatplan.show.job import Job
from flatplan.show.numbers import amount, duration
from flatplan.show.page import Markup, joined, picture
from flatplan.show.plot import plot

if TYPE_CHECKING:
    from matplotlib.figure import Figure


def plan_figures(job: Job, verdict: Verdict | None, check: Check | None, system: str) -> Markup:
    """The plan over time, and pressure along the path."""
    plan, target = job.plan, job.plan.target
    history = plot(plan, limits=verdict, steps=job.steps, check=check, units=system)
    drawn = "the rate as pumped in steps over the planned rate" if job.steps is not None else "the planned injection rate"
    alternative = (
        f"Two panels over {duration(plan.end)}. Above: bottomhole, sandface and wanted target pressure, the target going from "
        f"{amount(target.start, target.kind, system)} to {amount(target.level, target.kind, system)}. "
        f"Below: {drawn}, at most {amount(job.highest_rate.value, 'rate', system)}."
    )
    caption = "Pressures above, injection rate below; limits dash-dotted, back-flow hatched."
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
                "Pressure along the path at several moments. Its slope at the well drives the flow; the target face is on the left.",
            ),
        ]
    )


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

"""`report`: the whole plan on one self-contained HTML page that prints on A4 and can be signed."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from flatplan.decide import Verdict
from flatplan.field import PumpedSteps
from flatplan.flat import Plan
from flatplan.numeric import Check
from flatplan.records import of_type, one_of
from flatplan.show.files import checked_path, write_text
from flatplan.show.job import Job
from flatplan.show.page import document, element, paragraphs, section
from flatplan.show.report_evidence import certificate_part, confirmation_part, verdict_part
from flatplan.show.report_field import cautions_part, footer, left_out_part, rate_part, signatures, sources_part, use_part
from flatplan.show.report_figures import check_figures, plan_figures, terms_figure
from flatplan.show.report_inputs import inputs_part
from flatplan.show.report_job import default_title, job_paragraph, key_numbers, standing
from flatplan.show.report_series import series_part
from flatplan.units import SYSTEMS


def report(
    plan: Plan,
    verdict: Verdict | None = None,
    check: Check | None = None,
    steps: PumpedSteps | None = None,
    *,
    steps_check: Check | None = None,
    path: Any,
    units: str = "metric",
    title: str | None = None,
    scenario: str | None = None,
    notes: str | None = None,
    every: Any = None,
) -> Path:
    """Write a plan as one HTML page: what to pump, why it is believed, and when to stop.

    Parameters
    ----------
    plan : Plan
    verdict : Verdict, optional
        Of this plan, by `flatplan.assess`; without it the page says that nothing was judged.
    check : Check, optional
        Of this plan, by `flatplan.confirm`; without it the page says that nothing was confirmed.
    steps : PumpedSteps, optional
        Of this plan, by `flatplan.steps`; they become the rate table.
    steps_check : Check, optional
        Of these steps, by ``flatplan.confirm(steps)``.
    path : str or path
        File to write, in a folder that exists. It appears whole or not at all.
    units : {"SI", "metric", "field"}
        Units of the page.
    title, scenario, notes : str, optional
        Your own words: the heading, what the job is for (before the inputs), anything to add (at the end). Plain
        text; a blank line begins a paragraph.
    every : float, str or quantity, optional
        Spacing of the rate table [s] where no steps are given; a round one by default.

    Returns
    -------
    pathlib.Path
        The file.

    Raises
    ------
    TypeError
        A plan, verdict, check, steps, path or text of another type.
    ValueError
        An unknown unit system, or a verdict, check or steps that belong to another plan; nothing is written.
    OSError
        The file cannot be written; nothing is left behind.
    """
    file = checked_path(path)
    text = report_html(
        plan, verdict, check, steps, steps_check=steps_check, units=units, title=title, scenario=scenario, notes=notes, every=every
    )
    return write_text(file, text)


def report_html(
    plan: Plan,
    verdict: Verdict | None = None,
    check: Check | None = None,
    steps: PumpedSteps | None = None,
    *,
    steps_check: Check | None = None,
    units: str = "metric",
    title: str | None = None,
    scenario: str | None = None,
    notes: str | None = None,
    every: Any = None,
) -> str:
    """The page that `report` writes, as text.

    Parameters
    ----------
    plan : Plan
    verdict : Verdict, optional
        Of this plan, by `flatplan.assess`; without it the page says that nothing was judged.
    check : Check, optional
        Of this plan, by `flatplan.confirm`; without it the page says that nothing was confirmed.
    steps : PumpedSteps, optional
        Of this plan, by `flatplan.steps`; they become the rate table.
    steps_check : Check, optional
        Of these steps, by ``flatplan.confirm(steps)``.
    units : {"SI", "metric", "field"}
        Units of the page.
    title, scenario, notes : str, optional
        Your own words: the heading, what the job is for (before the inputs), anything to add (at the end). Plain
        text; a blank line begins a paragraph.
    every : float, str or quantity, optional
        Spacing of the rate table [s] where no steps are given; a round one by default.

    Returns
    -------
    str

    Raises
    ------
    TypeError
        A plan, verdict, check, steps or text of another type.
    ValueError
        An unknown unit system, or a verdict, check or steps that belong to another plan.
    """
    of_type(plan, Plan, "plan", "a plan made by feedforward()")
    one_of(units, SYSTEMS, "units")
    _same_plan(plan, verdict, check, steps, steps_check)
    for name, text in (("title", title), ("scenario", scenario), ("notes", notes)):
        if text is not None:
            of_type(text, str, name, "text")
    if every is not None and steps is not None:
        raise ValueError("every: does not go with steps=, which have a spacing of their own.")
    job = Job(plan, steps, steps_check)
    heading = title.strip() if title and title.strip() else default_title(job, units)
    simulated = check is not None or steps_check is not None or steps is not None
    body = [
        element(
            "header",
            element("h1", heading),
            element("p", f"Planned injection rate for a wanted {plan.target.kind} at a distance", class_="small"),
        ),
        section(
            "The job",
            job_paragraph(job, units),
            key_numbers(job, verdict, units),
            standing(job, verdict, check, units),
            anchor="job",
        ),
        section("The plan over time", plan_figures(job, verdict, check, units), anchor="plan"),
        section("Verdict", verdict_part(verdict, plan.end, units), anchor="verdict"),
        section(
            "Inputs",
            *([element("h3", "Scenario"), paragraphs(scenario)] if scenario and scenario.strip() else []),
            inputs_part(plan, verdict, units),
            anchor="inputs",
        ),
        section("The series, to read", series_part(plan, units), anchor="series"),
        section("Certificate of the series", certificate_part(plan, units), terms_figure(plan, units), anchor="certificate"),
        section(
            "Confirmation",
            confirmation_part(job, check, steps_check, units),
            check_figures(job, check, verdict, units),
            anchor="confirmation",
        ),
        section("Rate table", rate_part(job, every, units), anchor="rates"),
        section("How to use it in the field", use_part(job, verdict, units), anchor="field"),
        section("Cautions", cautions_part(), anchor="cautions"),
        section("What the model leaves out", left_out_part(), anchor="left-out"),
        *([section("Notes", paragraphs(notes), anchor="notes")] if notes and notes.strip() else []),
        section("Sources", sources_part(plan, simulated), anchor="sources"),
        section("Signatures", signatures(), anchor="signatures"),
        footer(),
    ]
    return document(heading, body)


def _same_plan(plan: Plan, verdict: Any, check: Any, steps: Any, steps_check: Any) -> None:
    """All parts must speak of the plan that the page is about."""
    if verdict is not None:
        of_type(verdict, Verdict, "verdict", "what assess() gives")
    if check is not None:
        of_type(check, Check, "check", "what confirm(plan) gives")
    if steps is not None:
        of_type(steps, PumpedSteps, "steps", "what steps() gives")
    if steps_check is not None:
        of_type(steps_check, Check, "steps_check", "what confirm(steps) gives")
    for name, other in (("verdict", verdict), ("steps", steps)):
        if other is not None and other.plan is not plan and (other.plan.medium, other.plan.target) != (plan.medium, plan.target):
            raise ValueError(f"{name}: belongs to another plan; the page is about one plan.")
    for name, found, subject in (("check", check, "plan"), ("steps_check", steps_check, "steps")):
        if found is None:
            continue
        if found.subject != subject:
            raise ValueError(f"{name}: is a check of the {found.subject}; it takes confirm({subject}).")
        if found.target_change != plan.target.largest_change:
            raise ValueError(f"{name}: belongs to another plan; the page is about one plan.")

"""Report, middle part: the verdict, the certificate and the confirmation, in words and in numbers."""

from __future__ import annotations

from flatplan.channels import described
from flatplan.decide import Finding, Verdict
from flatplan.flat import Plan
from flatplan.numeric import Check
from flatplan.show.job import Job
from flatplan.show.numbers import amount, duration, moment, percent, reading_unit, significant, typeset
from flatplan.show.page import Markup, element, facts, joined, table
from flatplan.show.table_records import RESULT, check_kind

_WORDS = {True: "good-word", False: "bad-word", None: "plain-word"}
_NEGLIGIBLE = 1e-5  # of the peak rate: better than any flow meter
_MARKS = {True: "✓ ", False: "✗ ", None: ""}


def verdict_part(verdict: Verdict | None, span: float, system: str) -> Markup:
    """Every finding with its reason and remedy."""
    if verdict is None:
        return element(
            "p",
            "This plan was not assessed: no limits of pump or ground were applied to it. Assess it before anything is pumped.",
            class_="warning",
        )
    if verdict.realizable:
        lead = "Every finding that was asked for is met. Findings marked “for information” had no limit to meet."
    else:
        lead = "The plan breaks what is marked ✗. The last column says what would help, with a number where one can be given."
    rows = [_finding_row(f, span, system) for f in verdict.findings]
    head = ("judged", "result", "value", "limit", "why, and what would help")
    note = "" if system == verdict.units else f" The sentences quote {verdict.units} units."
    return joined(
        [
            element("p", lead),
            table(
                head,
                rows,
                f"Findings. Extremes are located on the zeros of the derivative, so they hold between samples.{note}",
                numbers=(False, False, True, True),
            ),
        ]
    )


def _finding_row(f: Finding, span: float, system: str) -> list[Markup | str]:
    def shown(value: float | None) -> str:
        if value is None:
            return "–"
        return amount(value, f.kind, system) if f.kind else significant(value)

    when = [element("small", f"on {moment(f.when, span)}")] if f.when is not None else []
    why: list[Markup | str] = [typeset(f.reason)]
    if f.remedy:
        why += [" ", element("strong", "Help: "), typeset(f.remedy)]
    mark = element("span", _MARKS[f.holds] + RESULT[f.holds], class_=_WORDS[f.holds])
    return [f.title, mark, joined([shown(f.value), *when]), shown(f.limit), joined(why)]


def certificate_part(plan: Plan, system: str) -> Markup:
    """What is proven about the series, in plain words, then channel by channel."""
    certificate = plan.certificate
    names = [name for name in certificate.tail if certificate.peak[name]]
    tail = max(certificate.tail[n] / certificate.peak[n] for n in names)
    rounding = max(certificate.rounding[n] / certificate.peak[n] for n in names)
    rate = certificate.tail["injection_rate"] + certificate.rounding["injection_rate"]
    outcome = (
        f"Both together stay within the tolerance that was asked for, {significant(certificate.tolerance, 2)} of each channel's peak."
        if certificate.met
        else f"Together they exceed the tolerance that was asked for, {significant(certificate.tolerance, 2)} of each channel's peak."
    )
    proven = certificate.rounding_basis == "proven"
    basis = "proven too" if proven else "a bound calibrated against exact arithmetic"
    words = (
        "The rate is the exact answer of the model described under inputs, written as a series in the derivatives of the target and cut "
        f"after derivative {certificate.terms}. What the cut leaves out is at most {significant(tail, 2)} of the peak of any "
        "channel: that "
        f"is proven. Rounding adds at most {significant(rounding, 2)}: that is {basis}. {outcome} "
        f"For the injection rate the two come to {amount(rate, 'rate', system, 2)}"
    )
    if rate < _NEGLIGIBLE * certificate.peak["injection_rate"]:
        words += (
            ", far below what a pump or meter resolves: a departure in the field would come from the data on rock, fluid and well, "
            "or from what the model leaves out, and not from the arithmetic."
        )
    else:
        words += ", to be weighed against what the pump and its meter resolve."
    converges = (
        f"The Gevrey order of the moves is {significant(certificate.order)} ({certificate.convergence}). "
        f"The smallest radius of its bound is {duration(certificate.radius)}; the arithmetic was made in {certificate.digits} "
        "decimal digits."
    )
    rows = []
    for name in certificate.tail:
        kind, title = described(name, certificate.target_kind)
        factor, unit = reading_unit(kind, system)
        label = f"{title}{', change' if kind == 'pressure' else ''} [{unit}]"
        peak, low, high = (getattr(certificate, what)[name] / factor for what in ("peak", "tail", "rounding"))
        rows.append((label, significant(peak), significant(low, 2), significant(high, 2), significant(certificate.cancellation[name], 3)))
    head = ("channel", "peak", "left out, at most (proven)", f"rounding, at most ({certificate.rounding_basis})", "cancellation")
    return joined(
        [
            element("p", words),
            element("p", converges),
            table(
                head,
                rows,
                "Error of the series, channel by channel. Cancellation: sum of the sizes of the terms over the peak.",
                numbers=(False, True, True, True, True),
            ),
        ]
    )


def confirmation_part(job: Job, check: Check | None, steps_check: Check | None, system: str) -> Markup:
    """What the independent model says of the plan and of the rate as pumped."""
    parts: list[Markup] = [
        element(
            "p",
            "A second model of the same medium, which shares no formula with the plan, was driven by the rate and asked what the "
            "target does. It solves the "
            "diffusion equation on a mesh that is refined until its own error is known to be small. Agreement of the two means "
            "that the rate is right for "
            "the medium as stated; it does not mean that the ground is as stated.",
        )
    ]
    for found, what in ((check, "the plan"), (steps_check, "the rate as pumped")):
        if found is not None:
            parts += [
                element("h3", f"Confirmation of {what}"),
                _check_words(found, job.plan.end, what, system),
                _check_numbers(found, job.plan.end, what, system),
            ]
    if check is None and steps_check is None:
        parts = [
            element(
                "p",
                "Neither the plan nor the rate as pumped was run on the independent model. Do so before anything is pumped.",
                class_="warning",
            )
        ]
    elif check is None:
        parts.append(element("p", "The smooth plan itself was not run on the independent model."))
    elif steps_check is None and job.steps is not None:
        parts.append(
            element("p", "The rate as pumped was not compared with the target over time; what stepping costs there is not stated.")
        )
    return joined(parts)


def _check_words(check: Check, span: float, what: str, system: str) -> Markup:
    kind = check_kind(check)
    share = check.target_error / check.target_change
    ok = "Confirmed." if check.confirmed else "Not confirmed."
    text = (
        f" Driven by {what}, the target departs from what is wanted by at most {amount(check.target_error, kind, system, 3)} (on "
        f"{moment(check.when, span)}), "
        f"{percent(share)} of the change asked for; {percent(check.allowed)} is allowed. When the target ends it is off by "
        f"{amount(check.settling_error, kind, system, 3)}."
    )
    if check.subject == "steps" and not check.confirmed:
        text += " Shorter steps bring it down."
    return element("p", element("span", ok, class_=_WORDS[check.confirmed]), text)


def _check_numbers(check: Check, span: float, what: str, system: str) -> Markup:
    kind = check_kind(check)

    def error(value: float) -> str:
        return f"{amount(value, kind, system, 3)} ({significant(value / check.target_change, 2)} of the change)"

    return facts(
        [
            ("largest departure of the target", f"{error(check.target_error)}, on {moment(check.when, span)}"),
            ("allowed", error(check.allowed * check.target_change)),
            ("departure when the target ends", error(check.settling_error)),
            ("error of the model itself at the target, estimated", error(check.grid_error)),
            ("error of the model itself at the well, estimated", f"{significant(check.other_error, 2)} of the pressure changes there"),
            ("volume balance: injected less leaked less stored", f"{significant(check.mass_balance, 2)} of the injected volume"),
            ("modes of the model", str(check.modes)),
        ],
        f"The independent model, driven by {what}",
    )

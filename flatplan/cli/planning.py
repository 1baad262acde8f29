"""The main job from a case: plan, confirm, assess, steps, and the files that go to the field."""

from __future__ import annotations

import json
from collections.abc import Callable
from dataclasses import dataclass
from io import BytesIO
from pathlib import Path
from typing import Any

from flatplan import __version__
from flatplan.cli.case import Case
from flatplan.decide import Verdict, assess
from flatplan.field import PumpedSteps, steps
from flatplan.flat import Plan, feedforward
from flatplan.numeric import Check, confirm
from flatplan.show import plot, report_html, table
from flatplan.show.files import write_all


@dataclass(frozen=True)
class Outcome:
    """What came of a case.

    Attributes
    ----------
    plan : Plan
    verdict : Verdict
    check : Check
        Confirmation of the plan.
    pumped : PumpedSteps or None
    pumped_check : Check or None
        Confirmation of the steps.
    """

    plan: Plan
    verdict: Verdict
    check: Check
    pumped: PumpedSteps | None
    pumped_check: Check | None

    @property
    def good(self) -> bool:
        """Realizable and confirmed."""
        return bool(self.verdict.realizable and self.check.confirmed)


def run(case: Case, step: Callable[[str], None] = lambda words: None) -> Outcome:
    """Plan, assess, confirm and turn into steps; ``step`` is told what is being done."""
    step("planning")
    plan = feedforward(case.medium, case.target, tolerance=case.tolerance)
    step("judging")
    verdict = assess(plan, case.limits, units=case.units)
    step("confirming on the independent model")
    check = confirm(plan)
    pumped = pumped_check = None
    if case.every is not None:
        step("making the pumped steps")
        pumped = steps(plan, every=case.every)
        pumped_check = confirm(pumped)
    return Outcome(plan, verdict, check, pumped, pumped_check)


def write_outputs(case: Case, outcome: Outcome, folder: Path) -> list[Path]:
    """Write every file of an outcome under ``folder``; all of them are made before the first is written.

    Returns
    -------
    list of Path
        What was written, in the order of the names below.
    """
    files: dict[str, bytes] = {
        "report.html": report_html(
            outcome.plan,
            outcome.verdict,
            outcome.check,
            outcome.pumped,
            steps_check=outcome.pumped_check,
            units=case.units,
            title=case.title,
            scenario=case.scenario,
        ).encode(),
        "channels.csv": _csv(table(outcome.plan, units=case.units)),
        "verdict.csv": _csv(table(outcome.verdict, units=case.units)),
        "certificate.csv": _csv(table(outcome.plan.certificate, units=case.units)),
        "plan.png": _png(plot(outcome.plan, limits=case.limits, units=case.units)),
        "summary.json": (json.dumps(summary(outcome), indent=2) + "\n").encode(),
    }
    if outcome.pumped is not None:
        files["rates.csv"] = _csv(table(outcome.pumped, units=case.units))
        files["rates.png"] = _png(plot(outcome.pumped, units=case.units))
    return write_all(folder, files)


def summary(outcome: Outcome) -> dict:
    """The outcome for scripts: plain numbers in SI."""
    certificate = outcome.plan.certificate
    said = {
        "flatplan": __version__,
        "realizable": outcome.verdict.realizable,
        "confirmed": bool(outcome.check.confirmed),
        "duration_s": outcome.plan.end,
        "peak_injection_rate_m3_per_s": certificate.peak["injection_rate"],
        "terms": certificate.terms,
        "digits": certificate.digits,
        "tail": certificate.tail,
        "rounding": certificate.rounding,
        "target_error_Pa": float(outcome.check.target_error),
        "grid_error_Pa": float(outcome.check.grid_error),
        "other_grid_error": float(outcome.check.other_error),
        "mass_balance": float(outcome.check.mass_balance),
        "findings": [
            {
                "name": f.name,
                "holds": f.holds,
                "value": f.value,
                "limit": f.limit,
                "margin": f.margin,
                "when_s": f.when,
                "reason": f.reason,
                "remedy": f.remedy,
            }
            for f in outcome.verdict.findings
        ],
    }
    if outcome.pumped_check is not None:
        said["pumped_target_error_Pa"] = float(outcome.pumped_check.target_error)
    return said


def _csv(frame: Any) -> bytes:
    return frame.to_csv(index=False, lineterminator="\n").encode()


def _png(figure: Any) -> bytes:
    buffer = BytesIO()
    figure.savefig(buffer, format="png", dpi=150)
    return buffer.getvalue()

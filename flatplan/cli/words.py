"""What the command line says at its end."""

from __future__ import annotations

from pathlib import Path

from flatplan import units
from flatplan.cli.case import Case
from flatplan.cli.planning import Outcome
from flatplan.show.cautions import CAUTIONS


def closing(case: Case, outcome: Outcome, written: list[Path]) -> str:
    """Verdict, confirmation, files and cautions, as text."""
    system = case.units
    change = outcome.plan.target.largest_change
    check = outcome.check
    highest = outcome.verdict["max_bottomhole_pressure"].value or 0.0
    lines = [
        case.title,
        f"  {'realizable' if outcome.verdict.realizable else 'NOT realizable'}: "
        f"peak rate {units.text(outcome.plan.certificate.peak['injection_rate'], 'rate', system)}, "
        f"highest bottomhole pressure {units.text(highest, 'pressure', system)}",
        *(f"    fails: {f.reason} {f.remedy}" for f in outcome.verdict.failing),
        f"  {'confirmed' if check.confirmed else 'NOT confirmed'} on the independent model: target within "
        f"{check.target_error / change:.1e} of the change, mass balance {check.mass_balance:.1e}",
    ]
    kind = outcome.plan.target.kind
    if outcome.pumped is not None and outcome.pumped_check is not None:
        lines.append(
            f"  pumped in steps of {units.text(outcome.pumped.every, 'time', system)}: target within "
            f"{units.text(outcome.pumped_check.target_error, kind, system)} "
            f"({outcome.pumped_check.target_error / change:.2%} of the change)"
        )
    lines.append(f"  written: {', '.join(path.name for path in written)} in {written[0].parent}")
    lines.append("")
    lines.extend(f"  {caution}" for caution in CAUTIONS)
    return "\n".join(lines)

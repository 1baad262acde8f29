"""Tables of records that are no history: verdict, certificate, check, medium, target, limits."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np

from flatplan import units
from flatplan.channels import described
from flatplan.decide import LIMITS, Limits, Verdict
from flatplan.flat import Certificate, Target
from flatplan.numeric import Check
from flatplan.show.quantities import medium_quantities
from flatplan.show.table_histories import Column, frame
from flatplan.site import Medium

if TYPE_CHECKING:
    import pandas as pd

RESULT = {True: "met", False: "not met", None: "for information"}


def _unit(kind: str | None, system: str) -> str:
    return units.label(kind, system) or "-" if kind else "-"


def _shown(value: float | None, kind: str | None, system: str) -> float:
    if value is None:
        return np.nan
    return units.shown(value, kind, system)[0] if kind else value


def verdict_table(verdict: Verdict, system: str) -> pd.DataFrame:
    """One row a finding; values, limits and margins in the unit of their row, named in it."""
    found = verdict.findings
    return frame(
        [
            Column("finding", None, [f.title for f in found]),
            Column("group", None, [f.group for f in found]),
            Column("result", None, [RESULT[f.holds] for f in found]),
            Column("value", None, [_shown(f.value, f.kind, system) for f in found]),
            Column("limit", None, [_shown(f.limit, f.kind, system) for f in found]),
            Column("margin", None, [_shown(f.margin, f.kind, system) for f in found]),
            Column("unit", None, [_unit(f.kind, system) for f in found]),
            Column("when", "time", np.array([np.nan if f.when is None else f.when for f in found])),
            Column("reason", None, [f.reason for f in found]),
            Column("remedy", None, [f.remedy for f in found]),
        ],
        system,
    )


def certificate_table(certificate: Certificate, system: str) -> pd.DataFrame:
    """One row a channel: peak, proven tail, estimated rounding, and their sum as a share of the peak."""
    names = list(certificate.tail)
    described_as = [described(name, certificate.target_kind) for name in names]
    kinds = [kind for kind, _ in described_as]
    rows = {
        what: [_shown(getattr(certificate, what)[name], kind, system) for name, kind in zip(names, kinds, strict=True)]
        for what in ("peak", "tail", "rounding")
    }
    peak, total = np.array(rows["peak"]), np.array(rows["tail"]) + np.array(rows["rounding"])
    share = np.divide(total, peak, out=np.zeros_like(total), where=peak > 0.0)
    return frame(
        [
            Column(
                "channel",
                None,
                [words + (" (change)" if kind == "pressure" else "") for kind, words in described_as],
            ),
            Column("peak", None, rows["peak"]),
            Column("tail bound", None, rows["tail"]),
            Column("rounding bound", None, rows["rounding"]),
            Column("unit", None, [_unit(kind, system) for kind in kinds]),
            Column("tail and rounding over peak", "fraction", share),
            Column("tolerance", "fraction", np.full(len(names), certificate.tolerance)),
            Column("cancellation", "fraction", np.array([certificate.cancellation[name] for name in names])),
        ],
        system,
    )


def check_table(check: Check, system: str) -> pd.DataFrame:
    """Each number of a check with its unit and, for errors, its share of the change asked for."""
    kind = check_kind(check)
    rows: list[tuple[str, Any, str | None, bool]] = [
        ("largest departure of the target", check.target_error, kind, True),
        ("time of the largest departure", check.when, "time", False),
        ("departure allowed", check.allowed * check.target_change, kind, True),
        ("departure at the end", check.settling_error, kind, True),
        ("error estimate of the model at the target", check.grid_error, kind, True),
        ("largest change asked for", check.target_change, kind, True),
        ("error estimate of the model at the well, over the changes there", check.other_error, "fraction", False),
        ("mass balance error over injected volume", check.mass_balance, "fraction", False),
        ("modes of the model", float(check.modes), "fraction", False),
        ("confirmed (1 yes, 0 no)", float(check.confirmed), "fraction", False),
    ]
    share = [value / check.target_change if errors else np.nan for _, value, _, errors in rows]
    return frame(
        [
            *_quantities([(words, value, k) for words, value, k, _ in rows], system),
            Column("share of the change", "fraction", np.array(share)),
        ],
        system,
    )


def check_kind(check: Check) -> str:
    """Kind of number the target of a check is: a pressure, or a rate where the face is held."""
    return getattr(check, "_kind", "pressure")


def medium_table(medium: Medium, system: str) -> pd.DataFrame:
    """Every stated and derived quantity of a medium with its part and unit."""
    rows = medium_quantities(medium, system)
    return frame(
        [Column("part", None, [row.part for row in rows]), *_quantities([(row.words, row.value, row.kind) for row in rows], system)],
        system,
    )


def _quantities(rows: Sequence[tuple[str, Any, str | None]], system: str) -> list[Column]:
    return [
        Column("quantity", None, [words for words, _, _ in rows]),
        Column("value", None, [_shown(value, kind, system) for _, value, kind in rows]),
        Column("unit", None, [_unit(kind, system) for _, _, kind in rows]),
    ]


def limits_table(limits: Limits, system: str) -> pd.DataFrame:
    """One row a limit; those that are not stated have no value."""
    return frame(_quantities([(words, getattr(limits, name), kind) for name, (kind, _, words) in LIMITS.items()], system), system)


def target_table(target: Target, system: str) -> pd.DataFrame:
    """One row a move, in order, and one for each hold between and after them."""
    rows = []
    at, level = 0.0, target.start
    for move in sorted(target.moves, key=lambda m: m.start):
        if move.start > at:
            rows.append(("hold", at, move.start, level, level, np.nan, np.nan))
        rows.append(("move", move.start, move.end, level, level + move.change, move.order, move.easing))
        at, level = max(at, move.end), level + move.change
    if target.end > at:
        rows.append(("hold", at, target.end, level, level, np.nan, np.nan))
    what, start, end, before, after, order, easing = (
        (list(values) for values in zip(*rows, strict=True)) if rows else ([] for _ in range(7))
    )
    begin, finish = np.array(start, dtype=float), np.array(end, dtype=float)
    low, high = np.array(before, dtype=float), np.array(after, dtype=float)
    word = "target pressure" if target.kind == "pressure" else "rate through the target face"
    return frame(
        [
            Column("what", None, what),
            Column("start", "time", begin),
            Column("end", "time", finish),
            Column("duration", "time", finish - begin),
            Column(f"{word} before", target.kind, low),
            Column(f"{word} after", target.kind, high),
            Column("change", target.kind, high - low),
            Column("Gevrey order", "fraction", np.array(order, dtype=float)),
            Column("easing", "fraction", np.array(easing, dtype=float)),
        ],
        system,
    )

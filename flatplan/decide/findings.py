"""The verdict on a plan: one finding for each thing that was judged."""

from __future__ import annotations

import html
from collections.abc import Iterable
from dataclasses import dataclass

from flatplan import units
from flatplan.decide.limits import Limits
from flatplan.flat import Plan
from flatplan.records import Record


@dataclass(frozen=True, repr=False)
class Finding(Record):
    """One thing judged.

    Attributes
    ----------
    name : str
        Short name, such as "max_rate".
    title : str
        In words.
    group : str
        "mathematical" or "physical".
    holds : bool or None
        Whether it is satisfied; None where nothing was asked (for information).
    value, limit, margin : float or None
        SI; a margin below zero is missing.
    kind : str or None
        Kind of number, a key of `flatplan.units.KINDS`.
    when : float or None
        Time of the value [s].
    reason : str
        Why it holds or not, one or two sentences.
    remedy : str
        What would help, with a number where one can be given; empty where nothing is needed.
    """

    name: str
    title: str
    group: str
    holds: bool | None
    value: float | None
    limit: float | None
    margin: float | None
    kind: str | None
    when: float | None
    reason: str
    remedy: str = ""

    @property
    def mark(self) -> str:
        """ "ok", "fails" or "info"."""
        return {True: "ok", False: "fails", None: "info"}[self.holds]

    def _title(self) -> str:
        return f"{self.title}: {self.mark}"

    def _rows(self) -> Iterable[tuple[str, str]]:
        if self.value is not None and self.kind is not None:
            yield "value", units.text(self.value, self.kind)
        if self.limit is not None and self.kind is not None:
            yield "limit", units.text(self.limit, self.kind)
        if self.when is not None:
            yield "when", units.text(self.when, "time")
        yield "reason", self.reason
        if self.remedy:
            yield "remedy", self.remedy


@dataclass(frozen=True, repr=False)
class Verdict(Record):
    """Whether a plan is realizable, and why.

    A plan is realizable when no finding fails; findings for information do not count.

    Attributes
    ----------
    plan : Plan
    limits : Limits
    findings : tuple of Finding
    units : str
        Unit system of the findings' sentences: "SI", "metric" or "field".
    """

    plan: Plan
    limits: Limits
    findings: tuple[Finding, ...]
    units: str = "metric"

    @property
    def realizable(self) -> bool:
        """No finding fails."""
        return all(f.holds is not False for f in self.findings)

    @property
    def failing(self) -> tuple[Finding, ...]:
        """The findings that fail."""
        return tuple(f for f in self.findings if f.holds is False)

    def __getitem__(self, name: str) -> Finding:
        for finding in self.findings:
            if finding.name == name:
                return finding
        raise KeyError(f"no finding {name!r}; there are {', '.join(f.name for f in self.findings)}")

    def _title(self) -> str:
        failing = len(self.failing)
        return (
            "Realizable"
            if self.realizable
            else f"Not realizable: {failing} finding{'s' if failing > 1 else ''} fail{'' if failing > 1 else 's'}"
        )

    def _rows(self) -> Iterable[tuple[str, str]]:
        for f in self.findings:
            yield f"{f.mark:<5} {f.title}", f"{f.reason} {f.remedy}".strip()

    def _repr_html_(self) -> str:
        def cell(words: str) -> str:
            return f'<td style="text-align:left">{html.escape(words)}</td>'

        rows = "".join(f"<tr>{cell(f.mark)}{cell(f.title)}{cell(f.reason)}{cell(f.remedy)}</tr>" for f in self.findings)
        head = "".join(f'<th scope="col" style="text-align:left">{word}</th>' for word in ("", "judged", "why", "what would help"))
        return f"<table><caption>{html.escape(self._title())}</caption><tr>{head}</tr>{rows}</table>"

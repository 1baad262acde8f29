"""Draw cases, check them, and keep count."""

from __future__ import annotations

import time
from collections import Counter
from dataclasses import dataclass, field

from hypothesis import HealthCheck, Phase, given, reject, seed, settings
from tqdm import tqdm

from .cases import Case, cases, simpler
from .check import Outcome, check


@dataclass
class Tally:
    """Counts of what came of the cases, and the largest shares of what is certified, by path.

    Attributes
    ----------
    counts : Counter
        By kind of outcome.
    violations : list of (Case, Outcome)
        Those with a channel farther off than certified.
    faults : list of (Case, str)
        Cases in which something was raised.
    largest : dict
        (path, of what) to (share, channel, Case).
    slowest : (float, str)
        Processor time [s], and the case.
    """

    counts: Counter = field(default_factory=Counter)
    paths: Counter = field(default_factory=Counter)
    violations: list[tuple[Case, Outcome]] = field(default_factory=list)
    faults: list[tuple[Case, str]] = field(default_factory=list)
    largest: dict[tuple[str, str], tuple[float, str, Case]] = field(default_factory=dict)
    slowest: tuple[float, str] = (0.0, "")

    def add(self, case: Case, outcome: Outcome) -> None:
        """Count one."""
        self.counts[outcome.kind] += 1
        if outcome.kind != "checked":
            return
        path = "double" if outcome.digits == 16 else "extended"
        self.paths[path] += 1
        if outcome.violations:
            self.violations.append((case, outcome))
        target = {name: share for name, share in outcome.shares.items() if name == "target_pressure"}
        series = {name: share for name, share in outcome.shares.items() if name != "target_pressure"}
        of = {"tail + rounding": series, "rounding, tail negligible": outcome.rounding_shares, "rounding of the target": target}
        for what, shares in of.items():
            for channel, share in shares.items():
                if share > self.largest.get((path, what), (-1.0,))[0]:
                    self.largest[path, what] = (share, channel, case)

    def text(self) -> str:
        """The figures, and every violation as the call that makes it again."""
        lines = [
            f"cases: {self.counts['checked']} ({self.paths['double']} in double precision, {self.paths['extended']} in more digits)",
            f"refused: {self.counts['refused']}, too long for the reference: {self.counts['too long']}",
            f"violations: {len(self.violations)}, faults: {len(self.faults)}",
        ]
        for (path, what), (share, channel, case) in sorted(self.largest.items(), key=lambda item: item[0]):
            lines.append(f"largest share, {path}, of {what}: {share:.3g} ({channel}) in {case!r}")
        lines.append(f"slowest: {self.slowest[0]:.1f} s of processor time, {self.slowest[1]}")
        for case, outcome in self.violations:
            shares = {name: float(f"{share:.4g}") for name, share in outcome.violations.items()}
            lines.append(f"VIOLATION {shares} ({outcome.digits} digits, {outcome.terms} terms): check({case!r})")
        seen: set[str] = set()
        for case, outcome in self.violations:
            channel = max(outcome.violations, key=outcome.violations.__getitem__)
            if channel not in seen:  # one of each kind
                seen.add(channel)
                small, share = shrunk(case, channel)
                lines.append(f"SHRUNK to {share:.4g} ({channel}): check({small!r})")
        lines += [f"FAULT {words}: check({case!r})" for case, words in self.faults]
        return "\n".join(lines)


def shrunk(case: Case, channel: str) -> tuple[Case, float]:
    """The simplest case found in which the channel is still farther off than certified, and its share."""

    def share(candidate: Case) -> float:
        try:
            return check(candidate).shares.get(channel, 0.0)
        except (ValueError, AssertionError):
            return 0.0

    found, going = share(case), True
    while going:
        going = False
        for candidate in simpler(case):
            value = share(candidate)
            if value > 1.0:
                case, found, going = candidate, value, True
                break
    return case, found


def run(wanted: int, start: int, tally: Tally, minutes: float | None = None) -> None:
    """Check ``wanted`` random cases, without stopping at a violation."""
    begin = time.monotonic()
    with tqdm(total=wanted, unit="case", mininterval=5.0) as bar:

        @seed(start)
        @settings(
            max_examples=wanted, phases=[Phase.generate], database=None, deadline=None, derandomize=False,
            suppress_health_check=list(HealthCheck),
        )  # fmt: skip
        @given(case=cases())
        def one(case: Case) -> None:
            if tally.counts["checked"] >= wanted or (minutes is not None and time.monotonic() - begin > 60.0 * minutes):
                return
            before = time.process_time()
            try:
                outcome = check(case)
            except Exception as fault:  # of whatever kind: it is printed and counted, the run goes on, and ends with an error
                tally.faults.append((case, f"{type(fault).__name__}: {fault}"))
                tqdm.write(f"FAULT {tally.faults[-1][1]}: {case!r}")
                return
            tally.add(case, outcome)
            tally.slowest = max(tally.slowest, (time.process_time() - before, repr(case)))
            if outcome.violations:
                tqdm.write(f"VIOLATION {outcome.violations}: {case!r}")
            bar.set_postfix(refused=tally.counts["refused"], long=tally.counts["too long"], violations=len(tally.violations), refresh=False)
            if outcome.kind != "checked":
                reject()
            bar.update()

        one()

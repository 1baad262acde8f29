"""The TOML case: read as data, checked key by key, turned into records."""

from __future__ import annotations

import tomllib
from dataclasses import dataclass, field
from importlib import resources
from pathlib import Path
from typing import Any

from flatplan import units
from flatplan.cli.case_site import read_medium
from flatplan.cli.reading import CaseError, Reader
from flatplan.decide import LIMITS, Limits
from flatplan.flat import Target
from flatplan.site import Medium

EXAMPLE = "example"
_LARGEST = 1_000_000  # bytes; a case is a page of text


@dataclass(frozen=True)
class Case:
    """Everything a case file says.

    Attributes
    ----------
    title, scenario : str
    medium : Medium
    target : Target
    limits : Limits
    tolerance : float
        Of each channel's peak.
    every : float or None
        Length of a pumped step [s].
    units : str
        Unit system of the output.
    reader : Reader
        The file, for refusals that only the run can find.
    """

    title: str
    scenario: str
    medium: Medium
    target: Target
    limits: Limits
    tolerance: float
    every: float | None
    units: str
    reader: Reader = field(repr=False)

    def refused(self, error: Exception) -> CaseError:
        """A refusal met after reading, carried to the table and key that its first word names."""
        word = str(error).split(":", 1)[0]
        section, key = next(((section, word) for section, keys in _LATE.items() if word in keys), ("", word))
        return self.reader.fail(section, key, str(error))


# what is refused only when the plan is made, by table
_LATE = {"target": ("target",), "plan": ("tolerance",), "pumping": ("every",), "limits": tuple(LIMITS)}
_TOP = ("title", "scenario", "site", "target", "limits", "plan", "pumping", "output")
_STAGE = ("to", "by", "over", "order", "easing", "hold")


def example_text() -> str:
    """The shipped example, to run or to start a case from."""
    return resources.files("flatplan.cli").joinpath("example.toml").read_text(encoding="utf-8")


def read_case(source: str | Path) -> Case:
    """Read a case file, or the shipped example by the name "example".

    Parameters
    ----------
    source : str or path
        A TOML file, or "example".

    Returns
    -------
    Case

    Raises
    ------
    CaseError
        A file that cannot be read or is not TOML, an unknown or missing key, a value that is refused; one
        sentence with the file, the line and the key.
    """
    if str(source) == EXAMPLE:
        return parse_case(example_text(), "example.toml")
    path = Path(source)
    try:
        if path.stat().st_size > _LARGEST:
            raise CaseError(f"{path.name}: is larger than {_LARGEST // 1000} kB; a case is a page of text.")
        text = path.read_text(encoding="utf-8")
    except OSError as error:
        raise CaseError(f"{path}: cannot be read ({error.strerror}).") from None
    except UnicodeDecodeError:
        raise CaseError(f"{path.name}: is not UTF-8 text.") from None
    return parse_case(text, path.name)


def parse_case(text: str, name: str) -> Case:
    """The case in ``text``; ``name`` is used in errors."""
    try:
        data = tomllib.loads(text)
    except ValueError as error:  # TOMLDecodeError is one; a whole number of thousands of digits is another
        raise CaseError(f"{name}: is not valid TOML: {error}.") from None
    except RecursionError:
        raise CaseError(f"{name}: is not valid TOML: its brackets are nested too deeply.") from None
    return _case(Reader(text, name), data)


def _case(reader: Reader, data: dict) -> Case:
    reader.known("", data, _TOP)
    for key in ("title", "scenario"):
        if not isinstance(data.get(key, ""), str):
            raise reader.fail("", key, f"{key}: got {data[key]!r}; it takes text.")
    plan = reader.known("plan", data.get("plan", {}), ("tolerance",))
    pumping = reader.known("pumping", data.get("pumping", {}), ("every",))
    output = reader.known("output", data.get("output", {}), ("units",))
    limits = reader.known("limits", data.get("limits", {}), tuple(LIMITS))
    system = output.get("units", "metric")
    if system not in units.SYSTEMS:
        raise reader.fail("output", "units", f"units: got {system!r}; it takes one of {', '.join(map(repr, units.SYSTEMS))}.")
    every = None
    if "every" in pumping:
        every = reader.call("pumping", lambda every: units.si(every, "time", "every", "positive"), pumping)
    return Case(
        title=data.get("title", "Injection plan"),
        scenario=data.get("scenario", "").strip(),
        medium=read_medium(reader, reader.need("", data, "site")),
        target=_target(reader, reader.need("", data, "target")),
        limits=reader.call("limits", Limits, limits),
        tolerance=reader.call("plan", lambda tolerance=1e-9: units.si(tolerance, "fraction", "tolerance", "positive"), plan),
        every=every,
        units=system,
        reader=reader,
    )


def _target(reader: Reader, table: Any) -> Target:
    reader.known("target", table, ("start", "stage"))
    target = reader.call("target", Target, {"start": reader.need("target", table, "start")})
    stages = table.get("stage", [])
    if not isinstance(stages, list) or not stages:
        raise reader.fail("target", "stage", "stage: is missing; add at least one [[target.stage]] with to= and over=, or hold=.")
    for index, stage in enumerate(stages):
        reader.known("target.stage", stage, _STAGE, index)
        if "hold" in stage:
            if len(stage) > 1:
                raise reader.fail("target.stage", "hold", "hold: stands alone in its stage; put a move in a stage of its own.", index)
            target = reader.call("target.stage", lambda hold, so_far=target: so_far.hold(hold), stage, index)
        else:
            reader.need("target.stage", stage, "over", index)
            target = reader.call("target.stage", target.move, stage, index)
    return target

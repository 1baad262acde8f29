"""Tables over time: a plan, channels, a rate in steps, a rate as pumped."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from flatplan import units
from flatplan.channels import Channels, described
from flatplan.field import PumpedSteps
from flatplan.flat import Plan
from flatplan.flat.volumes import Volumes
from flatplan.numeric import Steps, simulate
from flatplan.show.numbers import column
from flatplan.show.times import even_times

if TYPE_CHECKING:
    import pandas as pd

# What is read first stands first.
_ORDER = ("target_pressure", "injection_rate", "bottomhole_pressure", "sandface_pressure", "sandface_rate", "injected_volume")


@dataclass(frozen=True)
class Column:
    """One column: its words, its kind of number (None: no number with a unit) and its values in SI."""

    words: str
    kind: str | None
    values: Any


def frame(columns: list[Column], system: str) -> pd.DataFrame:
    """The columns as a DataFrame, each in the unit of ``system`` and in full precision."""
    import pandas as pd

    data = {
        c.words if c.kind is None else column(c.words, c.kind, system): c.values
        if c.kind is None
        else units.shown(c.values, c.kind, system)[0]
        for c in columns
    }
    return pd.DataFrame(data)


def relative(plan: Plan) -> bool:
    """Whether a plan's pressures are changes: its face is held at a pressure that is not stated."""
    return plan.medium.face.held and plan.target.rest_pressure == 0.0


def plan_columns(plan: Plan, every: Any) -> list[Column]:
    """Every channel of a plan at even times and at its end."""
    return _channel_columns(plan.at(even_times(plan.end, every)), plan)


def channels_columns(channels: Channels) -> list[Column]:
    """Every channel at its own times."""
    return _channel_columns(channels, None)


def _channel_columns(channels: Channels, plan: Plan | None) -> list[Column]:
    columns = [Column("time", "time", channels.times)]
    for name in _ORDER:
        kind, words = described(name, channels.target_kind)
        if plan is not None and relative(plan) and kind == "pressure":
            words = f"{words} change"
        columns.append(Column(words, kind, getattr(channels, name)))
    return columns


def volumes_columns(volumes: Volumes) -> list[Column]:
    """Injected, stored and leaked volume since the start."""
    return [
        Column("time", "time", volumes.times),
        Column("injected volume", "volume", volumes.injected),
        Column("stored volume", "volume", volumes.stored),
        Column("leaked volume", "volume", volumes.leaked),
    ]


def steps_columns(steps: Steps) -> list[Column]:
    """Each step with its times, rate and volumes."""
    volumes = steps.rates * np.diff(steps.edges)
    return [
        Column("step", None, np.arange(1, len(steps.rates) + 1)),
        Column("step start", "time", steps.edges[:-1]),
        Column("step end", "time", steps.edges[1:]),
        Column("injection rate", "rate", steps.rates),
        Column("volume", "volume", volumes),
        Column("cumulative volume", "volume", np.cumsum(volumes)),
    ]


def pumped_columns(steps: PumpedSteps) -> list[Column]:
    """As `steps_columns`, with the pressures to expect when each step ends."""
    expected = expected_at_step_ends(steps)
    kind, words = described("target_pressure", expected.target_kind)
    change = " change" if relative(steps.plan) else ""
    return [
        *steps_columns(steps),
        Column(f"expected bottomhole pressure{change} at step end", "pressure", expected.bottomhole_pressure),
        Column(f"expected {words} at step end", kind, expected.target_pressure),
        Column(f"wanted {words} at step end", kind, steps.target.pressure(steps.edges[1:])),
    ]


def expected_at_step_ends(steps: PumpedSteps) -> Channels:
    """What the gauges should read just before each step ends, if the steps are pumped.

    The plan's own pressures would mislead there: its rate is smooth, and at the end of a step the constant rate
    differs from it by half a step's change. The independent model is driven by the steps instead.
    """
    lengths = np.diff(steps.edges)
    # at the edge itself the next rate counts already, and skin makes bottomhole pressure jump with the rate
    just_before = steps.edges[1:] - 1e-9 * lengths
    return simulate(steps.medium, steps, just_before, steps.target.rest_pressure)

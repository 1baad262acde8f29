"""`table`: any record as a pandas DataFrame, with the unit in every column name."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from flatplan.channels import Channels
from flatplan.decide import Limits, Verdict
from flatplan.field import PumpedSteps
from flatplan.flat import Certificate, Plan, Target
from flatplan.flat.terms import Terms
from flatplan.flat.volumes import Volumes
from flatplan.numeric import Check, Steps
from flatplan.records import one_of
from flatplan.show.table_histories import channels_columns, frame, plan_columns, pumped_columns, steps_columns, volumes_columns
from flatplan.show.table_records import certificate_table, check_table, limits_table, medium_table, target_table, verdict_table
from flatplan.show.table_terms import terms_columns
from flatplan.site import Medium
from flatplan.units import SYSTEMS

if TYPE_CHECKING:
    import pandas as pd

_TAKES = "a plan, channels, steps, a verdict, a certificate, terms, a check, a medium, a target, limits or volumes"
# PumpedSteps are Steps too, so they stand first
_TABLES: tuple[tuple[type, Any], ...] = (
    (PumpedSteps, lambda thing, system: frame(pumped_columns(thing), system)),
    (Steps, lambda thing, system: frame(steps_columns(thing), system)),
    (Channels, lambda thing, system: frame(channels_columns(thing), system)),
    (Verdict, verdict_table),
    (Certificate, certificate_table),
    (Terms, lambda thing, system: frame(terms_columns(thing), system)),
    (Check, check_table),
    (Medium, medium_table),
    (Target, target_table),
    (Limits, limits_table),
    (Volumes, lambda thing, system: frame(volumes_columns(thing), system)),
)


def table(thing: Any, *, every: Any = None, units: str = "SI") -> pd.DataFrame:
    """Any record as a table, in full precision (display is what rounds).

    Parameters
    ----------
    thing : Plan, PumpedSteps, Steps, Channels, Verdict, Certificate, Terms, Check, Medium, Target, Limits or Volumes
        A plan is read at even times and at its end; steps give the rate table that goes to the field, with the
        pressures that the independent model expects when each step ends; a verdict gives one row a finding; a
        certificate one row a channel; the terms of a channel (``plan.terms("bottomhole_pressure")``) one row a term; a medium
        its path, zones with rock, fluid and leakage, the places of a varying rock, target face and well.
    every : float, str or quantity, optional
        Spacing of a plan's rows [s]; by default a round one that makes at most about 60 rows.
    units : {"SI", "metric", "field"}
        In which units; each column name carries its own, and where rows differ in kind a column "unit" says it.

    Returns
    -------
    pandas.DataFrame

    Raises
    ------
    TypeError
        A thing that has no table.
    ValueError
        An unknown unit system, a spacing that is not above zero or makes too many rows, a spacing for a thing
        that is not a plan.

    Examples
    --------
    >>> import flatplan as fp
    >>> limits = fp.Limits(max_rate="3 L/s", max_bottomhole_pressure="27 MPa")
    >>> print(table(limits, units="metric").dropna().to_string(index=False))
                       quantity  value unit
         largest injection rate   10.8 m³/h
    largest bottomhole pressure  270.0  bar
    """
    one_of(units, SYSTEMS, "units")
    if isinstance(thing, Plan):
        return frame(plan_columns(thing, every), units)
    if every is not None:
        raise ValueError(f"every: got {every!r} for {type(thing).__name__}; only a plan is read at a spacing of one's own.")
    for kind, build in _TABLES:
        if isinstance(thing, kind):
            return build(thing, units)
    raise TypeError(f"thing: got {type(thing).__name__}; it takes {_TAKES}.")

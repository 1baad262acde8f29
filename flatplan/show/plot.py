"""`plot`: any record that has a curve, as a matplotlib figure in one style."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from flatplan.channels import Channels
from flatplan.decide import Limits, Verdict
from flatplan.field import PumpedSteps
from flatplan.flat import Plan
from flatplan.flat.terms import Terms
from flatplan.numeric import Check, Steps
from flatplan.records import of_type, one_of
from flatplan.show.style import house_style
from flatplan.site import Medium
from flatplan.units import SYSTEMS

if TYPE_CHECKING:
    from matplotlib.figure import Figure

KINDS = ("history", "profile")
_TAKES = "a medium, a plan, terms, steps, channels or a check"


def plot(
    thing: Any,
    *,
    kind: str = "history",
    limits: Limits | Verdict | None = None,
    steps: Steps | None = None,
    check: Check | None = None,
    times: Any = None,
    units: str = "metric",
    axes: Any = None,
    title: str | None = None,
) -> Figure:
    """A figure of a medium, of a plan, of its series term by term, of the rate as pumped, of channels or of a check.

    Parameters
    ----------
    thing : Medium, Plan, Terms, PumpedSteps, Steps, Channels or Check
        A medium: its zones, mobility and storage along the path. A plan: pressures above, rates below. Terms
        (``plan.terms()``): the size of each, its bound and the bound on all later ones, over the peak. Steps: the
        stairs against the plan, and the departure of the target below. A check: the simulated target on the wanted
        one, and the departure below.
    kind : {"history", "profile"}
        For a plan: over time, or pressure along the path at several moments.
    limits : Limits or Verdict, optional
        Limits of rate and bottomhole pressure to draw; one far off the axis is named at its edge.
    steps : Steps, optional
        For a plan over time: the rate as pumped, drawn over it.
    check : Check, optional
        For a plan over time: the target as simulated. For steps: their check; by default it is made here.
    times : array_like, optional
        For a profile: at most 12 moments [s]; by default the turning points of the largest moves.
    units : {"SI", "metric", "field"}
        Units of the axes; on axes "SI" uses MPa and L/s. Time is in days, hours or minutes, by its length.
    axes : matplotlib axes, or a list of them, optional
        Where to draw: two (upper, lower), for a medium three, for a profile, terms or steps without a plan one. By
        default a new figure.
    title : str, optional
        Above the upper panel.

    Returns
    -------
    matplotlib.figure.Figure
        The one drawn on. A new one does not belong to pyplot; in a notebook it shows itself.

    Raises
    ------
    TypeError
        A thing that has no figure, or an overlay of another type.
    ValueError
        An unknown kind or unit system, an overlay that does not go with the thing, a wrong number of axes.

    Examples
    --------
    >>> import flatplan as fp
    >>> figure = plot(fp.Steps(edges=["0 h", "6 h", "1 d"], rates=["2 L/s", "0.5 L/s"]), units="SI")
    >>> figure.axes[0].get_xlabel(), figure.axes[0].get_ylabel()
    ('time since start [h]', 'injection rate [L/s]')
    """
    one_of(units, SYSTEMS, "units")
    one_of(kind, KINDS, "kind")
    if not isinstance(thing, (Medium, Plan, Terms, Steps, Channels, Check)):
        raise TypeError(f"thing: got {type(thing).__name__}; it takes {_TAKES}.")
    if title is not None:
        of_type(title, str, "title", "text")
    drawn = {
        "limits": _limits(limits),
        "steps": _optional(steps, Steps, "steps", "the steps of a plan"),
        "check": _optional(check, Check, "check", "a check"),
    }
    _refuse_what_does_not_go(thing, kind, {**drawn, "times": times})
    with house_style():
        figure = _draw(thing, kind, drawn["limits"], drawn["steps"], drawn["check"], times, units, axes)
        if title is not None:
            (figure.axes if axes is None else axes if isinstance(axes, (list, tuple)) else [axes])[0].set_title(title)
    return figure


def _limits(limits: Any) -> Limits | None:
    if isinstance(limits, Verdict):
        return limits.limits
    return _optional(limits, Limits, "limits", "Limits or a verdict")


def _optional(value: Any, kind: type, name: str, takes: str) -> Any:
    return None if value is None else of_type(value, kind, name, takes)


def _goes_with(thing: Any, kind: str) -> set[str]:
    """Names of the arguments that mean something for this figure."""
    if isinstance(thing, Plan):
        return {"times"} if kind == "profile" else {"limits", "steps", "check"}
    if isinstance(thing, PumpedSteps):
        return {"limits", "check"}
    return set() if isinstance(thing, (Check, Medium, Terms)) else {"limits"}


def _refuse_what_does_not_go(thing: Any, kind: str, given: dict[str, Any]) -> None:
    """An argument that would be ignored is refused: the reader would think that it was drawn."""
    if kind == "profile" and not isinstance(thing, Plan):
        raise ValueError(f"kind: got 'profile' for {type(thing).__name__}; only a plan has a profile.")
    allowed = _goes_with(thing, kind)
    for name, value in given.items():
        if value is not None and name not in allowed:
            words = f"a {kind} of a plan" if isinstance(thing, Plan) else f"a figure of {type(thing).__name__}"
            raise ValueError(f"{name}: does not go with {words}; it takes {', '.join(sorted(allowed)) or 'none of the overlays'}.")
    steps, check = given["steps"], given["check"]
    if isinstance(steps, PumpedSteps) and steps.plan.target != thing.target:
        raise ValueError("steps: belong to a plan of another target.")
    if isinstance(thing, PumpedSteps) and check is not None and check.subject != "steps":
        raise ValueError("check: is one of the plan; for steps it takes a check of the steps, confirm(steps).")


def _draw(thing: Any, kind: str, limits: Any, steps: Any, check: Any, times: Any, system: str, axes: Any) -> Figure:
    # matplotlib loads here and not with the package
    from flatplan.show.plot_check import plot_check
    from flatplan.show.plot_history import plot_channels, plot_plan
    from flatplan.show.plot_medium import plot_medium
    from flatplan.show.plot_profile import plot_profile
    from flatplan.show.plot_steps import plot_pumped, plot_steps
    from flatplan.show.plot_terms import plot_terms

    if isinstance(thing, Medium):
        return plot_medium(thing, system, axes)
    if isinstance(thing, Terms):
        return plot_terms(thing, axes)
    if isinstance(thing, Plan):
        return plot_profile(thing, times, system, axes) if kind == "profile" else plot_plan(thing, limits, steps, check, system, axes)
    if isinstance(thing, PumpedSteps):
        return plot_pumped(thing, limits, check, system, axes)
    if isinstance(thing, Steps):
        return plot_steps(thing, limits, system, axes)
    return plot_check(thing, system, axes) if isinstance(thing, Check) else plot_channels(thing, limits, system, axes)

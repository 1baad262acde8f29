"""What every plan must be read with: cautions, what the model leaves out, and how to use a plan in the field."""

from __future__ import annotations

__all__ = ["CAUTIONS", "IN_THE_FIELD", "LEFT_OUT", "STOP_WHEN"]

# Short sentences, each complete alone: the report, the command line and the README print the same ones.
CAUTIONS: tuple[str, ...] = (
    "A plan is not a permit. Whether, where and how much may be injected is decided by the responsible licensed engineers and by "
    "the regulator.",
    "Stay below the fracture pressure, with the margin that the local rules set. The limit belongs to the bottomhole pressure, "
    "near the well, "
    "where pressure is highest while injecting; state it as a limit of the plan.",
    "Raising pore pressure can reactivate faults and induce earthquakes. Monitor pressure, rate, volume and seismicity throughout, "
    "and slow down or stop by the local traffic-light protocol, which overrides this plan at any time.",
    "Pressure does not stop where pumping stops: after a shut-in the fluid stored near the well goes on spreading, so pressure at "
    "a distance "
    "can still rise and stays raised as long as nothing leaks.",
    "The plan is as good as its inputs. Calibrate permeability, compressibility and skin on measured pressure and rate before "
    "relying on it, "
    "and plan again when the measurements depart from it.",
    "Water quality, well integrity, corrosion, surface equipment and the handling of back-flow are outside this plan.",
)

LEFT_OUT: tuple[str, ...] = (
    "One fluid phase, slightly compressible: no gas, no oil and water moving together, no change of viscosity or density with pressure.",
    "Rock and fluid properties that do not change with time or pressure: no opening or closing of fractures, no plugging, no "
    "swelling clay.",
    "No gravity: pressures are read as changes at one depth.",
    "No temperature effects, although the injected fluid may be colder than the rock.",
    "No coupling to stress: the model says nothing on fracturing, fault slip, heave or induced earthquakes; only the pressure "
    "limit that is stated guards the rock.",
    "One path from the well to the target face, of one geometry; what lies beside it, and other wells, are not in the model.",
    "The far boundary is as stated (sealed, leaking, or holding its pressure) and the well is the other end of the path: nothing "
    "flows past either.",
)

IN_THE_FIELD: tuple[str, ...] = (
    "Before the start, make sure that the reservoir is at rest at the start pressure; the plan assumes it. A trend in the gauge "
    "means it is not.",
    "Hold each rate for the whole of its step. If a rate cannot be held, keep the volume of the step and note the times: the "
    "volume counts more than the rate.",
    "At the end of each step compare bottomhole pressure and cumulative volume with the expected ones, and record the target "
    "pressure where it is measured.",
    "A negative rate is back-flow: the well is let flow at that rate, into surface facilities that are ready for it.",
)

STOP_WHEN: tuple[str, ...] = (
    "bottomhole pressure reaches its limit, or rises faster than expected at a steady rate (a sign of plugging) or suddenly falls "
    "(a sign of fracturing or of a leak);",
    "measured pressure leaves the expected one by more than the tolerance agreed before the start: calibrate and plan again from "
    "the present state;",
    "the local traffic-light protocol asks for it, for whatever reason;",
    "pump, gauge or well integrity is in doubt, or contact with the person responsible is lost.",
)

"""Floor 3, the independent model: what a medium does under any rate history.

It knows media and rate histories and nothing of series, so that agreement with a plan is evidence. Spectral elements
(Galerkin) turn ``S p_t = (T p_x)_x - Λ p`` into ``M p' + K p = b Q``; its decaying modes are found once per
medium, and each mode is advanced exactly under a rate that is polynomial by pieces.

A rate history goes in, channels come out; `run` also says how accurate they are:

>>> import numpy as np
>>> from flatplan.numeric import Steps, run, simulate
>>> from flatplan.site import Fluid, Rock, slab
>>> rock = Rock(permeability="40 mD", porosity=0.12, compressibility="5e-10 1/Pa")
>>> water = Fluid(viscosity="0.5 cP", compressibility="4.5e-10 1/Pa")
>>> medium = slab(length="140 m", area="6000 m^2", rock=rock, fluid=water)
>>> pumped = Steps(edges=["0 h", "6 h", "1 d"], rates=["2 L/s", "0.5 L/s"])
>>> result = run(medium, pumped, np.linspace(0.0, 2 * 86400.0, 300), start="21 MPa")
>>> result.converged, bool(result.grid_error < 1e-8 * result.largest_change), bool(result.mass_balance < 1e-12)
(True, True, True)
>>> float(result.channels.injected_volume[-1])
75.6

It can go on from where it stopped, here without a rate:

>>> after = simulate(medium, Steps(edges=["2 d", "3 d"], rates=[0.0]), ["9 d"], start="21 MPa", initial=result.state)
>>> settled = 21e6 + 75.6 / result.model.assembly.mass[0, 0]
>>> bool(abs(after.target_pressure[0] - settled) < 1.0)
True

What each of many stops leads to comes from the modes at once:

>>> stops = result.amplitudes()                                     # (300, modes)
>>> after = np.linspace(0.0, 5 * 86400.0, 50)
>>> result.model.free("target_pressure", stops, after).shape      # target pressure change after each stop
(300, 50)

`confirm` drives the model with a plan's own rate and compares the target pressure with the target.
"""

from flatplan.numeric.confirmation import Check, confirm
from flatplan.numeric.elements import Mesh
from flatplan.numeric.model import DiscreteModel, Readout, discrete_model
from flatplan.numeric.panels import Panels
from flatplan.numeric.simulation import Simulation, run, simulate
from flatplan.numeric.state import State
from flatplan.numeric.steps import Steps

__all__ = [
    "Check",
    "DiscreteModel",
    "Mesh",
    "Panels",
    "Readout",
    "Simulation",
    "State",
    "Steps",
    "confirm",
    "discrete_model",
    "run",
    "simulate",
]

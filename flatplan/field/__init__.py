"""Floor 5, in the field: the rate as it is pumped.

>>> from flatplan.site import Rock, Fluid, slab
>>> from flatplan.flat import Target, feedforward
>>> rock = Rock(permeability="40 mD", porosity=0.12, compressibility="5e-10 1/Pa")
>>> water = Fluid(viscosity="0.5 cP", compressibility="4.5e-10 1/Pa")
>>> medium = slab(length="140 m", area="6000 m^2", rock=rock, fluid=water)
>>> plan = feedforward(medium, Target(start="21 MPa").move(to="22.5 MPa", over="75 h", order=1.8, easing=0.3))
>>> pumped = steps(plan, every="6 h")
>>> len(pumped.rates), float(pumped.edges[-1]) / 3600, float(pumped.edges[-1] - pumped.edges[-2]) / 3600
(13, 75.0, 3.0)
"""

from flatplan.field.pumped import PumpedSteps, steps

__all__ = ["PumpedSteps", "steps"]

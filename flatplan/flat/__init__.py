"""Floor 2, the symbolic core: from a medium and a target to a plan and its certificate.

``generating`` gives every output as one sequence of coefficients, ``bump``/``rise``/``target`` give the wanted
history and its derivatives, ``bounds``/``coefficient_bounds``/``tail`` prove where the series may be cut, and
``planner`` brings them together in a ``plan``.

>>> from flatplan.site import Rock, Fluid, slab
>>> rock = Rock(permeability="40 mD", porosity=0.12, compressibility="5e-10 1/Pa")
>>> water = Fluid(viscosity="0.5 cP", compressibility="4.5e-10 1/Pa")
>>> medium = slab(length="140 m", area="6000 m^2", rock=rock, fluid=water)
>>> plan = feedforward(medium, Target(start="21 MPa").move(to="22.5 MPa", over="3 d", order=1.8, easing=0.3))
>>> round(plan.certificate.peak["injection_rate"] * 3600, 2)   # m³/h
2.86
"""

from flatplan.flat.certificate import Certificate
from flatplan.flat.plan import Plan
from flatplan.flat.planner import feedforward
from flatplan.flat.target import Move, Target

__all__ = ["Certificate", "Move", "Plan", "Target", "feedforward"]

"""Floor 4, is it realizable: limits, extremes of a plan, findings and the verdict.

>>> from flatplan.site import Rock, Fluid, slab
>>> from flatplan.flat import Target, feedforward
>>> rock = Rock(permeability="40 mD", porosity=0.12, compressibility="5e-10 1/Pa")
>>> water = Fluid(viscosity="0.5 cP", compressibility="4.5e-10 1/Pa")
>>> medium = slab(length="140 m", area="6000 m^2", rock=rock, fluid=water)
>>> plan = feedforward(medium, Target(start="21 MPa").move(to="22.5 MPa", over="3 d", order=1.8, easing=0.3))
>>> verdict = assess(plan, Limits(max_rate="2 m^3/h", min_rate="-0.2 m^3/h"))
>>> verdict.realizable
False
>>> verdict["max_rate"].remedy
'4.281 d instead of 3 d would do.'
"""

from flatplan.decide.assessment import assess
from flatplan.decide.findings import Finding, Verdict
from flatplan.decide.limits import LIMITS, Limits

__all__ = ["LIMITS", "Finding", "Limits", "Verdict", "assess"]

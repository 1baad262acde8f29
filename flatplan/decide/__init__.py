"""Floor 4, is it realizable, and how fast could it be: limits, extremes of a plan, the verdict, the quickest plan, the closest one.

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

How fast could it be, and what stands in the way of faster:

>>> best = quickest(medium, Target(start="21 MPa").move(to="22.5 MPa", over="3 d"), Limits(max_rate="2 m^3/h", min_rate="-0.2 m^3/h"))
>>> best.verdict.realizable, best.binding
(True, (('max_rate',),))
>>> round(best.duration / 86400, 2), round(best.physical_limit / 86400, 2)      # days
(3.48, 3.11)

And what comes nearest to a curve that cannot be had:

>>> jump = (["0 d", "4 d", "4.1 d", "8 d"], ["21 MPa", "21 MPa", "22 MPa", "22 MPa"])
>>> near = closest(medium, jump, Limits(max_rate="2 m^3/h", min_rate="-1 m^3/h"), steps=24)
>>> near.verdict.realizable, bool(4e5 < near.deviation < 7e5)
(True, True)
"""

from flatplan.decide.assessment import assess
from flatplan.decide.closest import Closest, Wanted, closest
from flatplan.decide.findings import Finding, Verdict
from flatplan.decide.limits import LIMITS, Limits
from flatplan.decide.quickest import Quickest, quickest

__all__ = ["LIMITS", "Closest", "Finding", "Limits", "Quickest", "Verdict", "Wanted", "assess", "closest", "quickest"]

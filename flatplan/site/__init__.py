"""Floor 1, the ground and the well: rock, fluid, faces and well become a medium.

The path coordinate ``x`` runs from the target face (``x = 0``) to the sandface (``x = L``); ``p`` is
the pressure change from the equilibrium that holds at the start::

    S(x) p_t = (T(x) p_x)_x - Λ(x) p,        A = flow area,  S = A φ c_t,  T = A k / μ

>>> from flatplan.site import Rock, Fluid, slab
>>> rock = Rock(permeability="40 mD", porosity=0.12, compressibility="5e-10 1/Pa")
>>> water = Fluid(viscosity="0.5 cP", compressibility="4.5e-10 1/Pa")
>>> medium = slab(length="140 m", area="6000 m^2", rock=rock, fluid=water)
>>> round(medium.travel_time / 3600, 2)   # hours
7.86
"""

from flatplan.site.face import ConfiningBed, Face
from flatplan.site.medium import Equilibrium, Medium
from flatplan.site.profile import RockProfile
from flatplan.site.properties import Fluid, Rock
from flatplan.site.radial import radial
from flatplan.site.segment import Segment
from flatplan.site.slab import slab
from flatplan.site.spherical import spherical
from flatplan.site.well import Well
from flatplan.site.zoned import Zone, zoned

__all__ = [
    "ConfiningBed",
    "Equilibrium",
    "Face",
    "Fluid",
    "Medium",
    "Rock",
    "RockProfile",
    "Segment",
    "Well",
    "Zone",
    "radial",
    "slab",
    "spherical",
    "zoned",
]

"""Floor 6, what people read: tables, figures and the report.

>>> from flatplan.site import Rock, Fluid, slab
>>> from flatplan.flat import Target, feedforward
>>> from flatplan.field import steps
>>> rock = Rock(permeability="40 mD", porosity=0.12, compressibility="5e-10 1/Pa")
>>> water = Fluid(viscosity="0.5 cP", compressibility="4.5e-10 1/Pa")
>>> medium = slab(length="140 m", area="6000 m^2", rock=rock, fluid=water)
>>> plan = feedforward(medium, Target(start="21 MPa").move(to="22.5 MPa", over="3 d", order=1.8, easing=0.3))
>>> rates = table(steps(plan, every="12 h"), units="metric")
>>> rates["injection rate [m³/h]"].round(2).tolist()
[0.63, 2.82, 2.85, 2.85, 2.62, 0.21]
>>> [axes.get_ylabel() for axes in plot(plan).axes]
['pressure [bar]', 'injection rate [m³/h]']
"""

from flatplan.show.plot import plot
from flatplan.show.report import report, report_html
from flatplan.show.table import table

__all__ = ["plot", "report", "report_html", "table"]

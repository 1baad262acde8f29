"""The sources behind a plan, in one line each, for the report; references.md says how far each was consulted."""

from __future__ import annotations

from flatplan.flat import Plan

# key in references.md -> line for the report
SOURCES: dict[str, str] = {
    "Dake1978": "L. P. Dake, Fundamentals of Reservoir Engineering, Elsevier, 1978: total compressibility, Darcy's law.",
    "FliessLevineMartinRouchon1995": "M. Fliess, J. Lévine, P. Martin and P. Rouchon, International Journal of Control 61(6), "
    "1327-1361, 1995: flat outputs.",
    "Gevrey1918": "M. Gevrey, Annales scientifiques de l'École normale supérieure (3) 35, 129-190, 1918: functions between smooth "
    "and analytic.",
    "HantushJacob1955": "M. S. Hantush and C. E. Jacob, Transactions, American Geophysical Union 36(1), 95-100, 1955: leakage "
    "through a confining bed.",
    "LarocheMartinRouchon2000": "B. Laroche, P. Martin and P. Rouchon, International Journal of Robust and Nonlinear Control 10, "
    "629-643, 2000: "
    "the series of a diffusing field and when it converges.",
    "MolerVanLoan2003": "C. Moler and C. Van Loan, SIAM Review 45(1), 3-49, 2003: advancing the discretised model exactly in time.",
    "NISTSP811": "A. Thompson and B. N. Taylor, NIST Special Publication 811, 2008: conversion factors.",
    "Patera1984": "A. T. Patera, Journal of Computational Physics 54(3), 468-488, 1984: the discretised model.",
    "Ramey1970": "R. G. Agarwal, R. Al-Hussainy and H. J. Ramey, Society of Petroleum Engineers Journal 10(3), 279-290, 1970: "
    "wellbore storage.",
    "vanEverdingen1953": "A. F. van Everdingen, Petroleum Transactions, AIME 198, 171-176, 1953: skin.",
}


def sources_of(plan: Plan, simulated: bool) -> dict[str, str]:
    """Those sources that this plan rests on, by key."""
    medium = plan.medium
    keys = {"Dake1978", "FliessLevineMartinRouchon1995", "Gevrey1918", "LarocheMartinRouchon2000", "NISTSP811"}
    if simulated:
        keys |= {"MolerVanLoan2003", "Patera1984"}
    if medium.well_resistance:
        keys.add("vanEverdingen1953")
    if medium.well.storage:
        keys.add("Ramey1970")
    if any(s.leakage for s in medium.segments):
        keys.add("HantushJacob1955")
    return {key: SOURCES[key] for key in sorted(keys, key=str.lower)}

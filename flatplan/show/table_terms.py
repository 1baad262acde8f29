"""Table of a plan's series: one row a term."""

from __future__ import annotations

import numpy as np

from flatplan.flat.terms import Terms
from flatplan.show.table_histories import Column


def terms_columns(terms: Terms) -> list[Column]:
    """Each term with its size, its bound and the bound on all later ones, in the channel's unit and over its peak."""
    peak = terms.peak or 1.0
    change = " (change)" if terms.kind == "pressure" else ""
    measured = {"largest size": terms.size, "bound": terms.bound, "bound on all later terms": terms.tail}
    in_some = np.where(terms.order <= terms.cut, "used in some moves", "not used")
    return [
        Column("term [-]", None, terms.order),  # whole numbers, which no unit converts
        *(Column(f"{terms.words}{change}, {words}", terms.kind, values) for words, values in measured.items()),
        *(Column(f"{words} over peak", "fraction", values / peak) for words, values in measured.items()),
        Column("in the plan", None, np.where(terms.order <= terms.fewest, "used", in_some).tolist()),
    ]

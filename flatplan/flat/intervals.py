"""Numbers rounded outwards, for the few scalars on which every bound rests (mpmath's interval arithmetic)."""

from __future__ import annotations

import math

from mpmath.ctx_iv import MPIntervalContext

# A context of its own: the precision of mpmath's shared one is the user's.
IV = MPIntervalContext()
IV.prec = 100


def upper(value: object) -> float:
    """The least double not below an interval."""
    return math.nextafter(float(IV.mpf(value).b), math.inf)


def lower(value: object) -> float:
    """The largest double not above an interval."""
    return math.nextafter(float(IV.mpf(value).a), -math.inf)

"""How far an error of the injection rate can move the target: a bound from three coefficients.

With ``C(s) = Σ c_k s^k`` of the injection rate, the flat output answers a rate error δQ with ``δQ/C(s)``. C has
only real negative zeros (the modes of a passive chain of storage and conductance, driven at one end and watched at
the other) and is entire of order 1/2, so ``C(s) = c_0 Π(1 + s/λ_n)`` or, with nothing lost, ``c_1 s Π(1 + s/λ_n)``: 1/C
is a convolution of falling exponentials of area one, times 1/c_0 or a step of height 1/c_1. Hence, with δV = ∫ δQ,

    |δy| ≤ max|δQ|/c_0,       |δy| ≤ max|δV|/c_1 where c_0 = 0,       |δy| ≤ 2 max|δV| c_1/(c_1² - 2c_0c_2).

The second, as the answer to an impulse rises to 1/c_1; the third, as it is log-concave, so rises once and falls once,
and is nowhere above λ_0/c_0 (a convolution is not above its slowest part), where Σ λ_n^-2 ≤ λ_0^-1 Σ λ_n^-1
and Newton's sums c_1/c_0 and (c_1² - 2c_0c_2)/c_0² give 1/λ_0. Factorisation: Hadamard; log-concavity: Ibragimov [Ibragimov1956].
"""

from __future__ import annotations

import math
from dataclasses import dataclass

from flatplan.flat.generating import scaled_coefficients
from flatplan.site import Medium


@dataclass(frozen=True)
class TargetAnswer:
    """What the target moves at most for each unit of an error of the rate, or of its integral.

    Attributes
    ----------
    by_rate : float
        1/c_0 [Pa s/m³] (held face: none), inf where nothing is lost.
    by_volume : float
        [Pa/m³] (held face: [1/s]).
    impulse : float
        Largest answer to a unit of volume [same unit].
    """

    by_rate: float
    by_volume: float
    impulse: float

    @classmethod
    def of(cls, medium: Medium) -> TargetAnswer:
        """Of a medium. (A negative skin with wellbore storage would be no passive chain; such a well is refused by the media.)"""
        hats = scaled_coefficients(medium, "injection_rate", 2)
        t_d = medium.travel_time
        c0, c1, c2 = float(hats[0]), float(hats[1]) * t_d / 2.0, float(hats[2]) * t_d**2 / 24.0
        if c0 == 0.0:
            return cls(math.inf, 1.0 / c1, 1.0 / c1)
        spread = c1 * c1 - 2.0 * c0 * c2
        impulse = c1 / spread if spread > 1e-9 * c1 * c1 else math.inf
        return cls(1.0 / c0, 2.0 * impulse, impulse)

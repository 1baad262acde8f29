"""Decay integrals against 40-digit arithmetic."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest

from flatplan.numeric.exponential import decay_moments

DECAYS = [1e-300, 1e-12, 1e-6, 0.01, 0.7, 3.99, 4.01, 8.0, 20.0, 60.0, 84.4, 84.6, 128.0, 129.0, 300.0, 1e4, 1e8, 1e12]


def exact(decay, j):
    """``½ ∫ e^(-y (1 - v)) P_j(v) dv = sqrt(π/(2y)) e^-y I_(j+½)(y)``, y = decay/2 [AbramowitzStegun1964] 10.2.2, 10.2.36."""
    with mpmath.workdps(40):
        y = mpmath.mpf(decay) / 2
        return mpmath.sqrt(mpmath.pi / (2 * y)) * mpmath.exp(-y) * mpmath.besseli(j + mpmath.mpf(1) / 2, y)


@pytest.mark.parametrize("degree", [1, 5, 13, 16])
@pytest.mark.parametrize("decay", DECAYS)
def test_moments_are_exact_relative_to_themselves(decay, degree):
    moments = decay_moments(np.array([decay]), degree)[:, 0]
    for j in range(degree + 1):
        reference = exact(decay, j)
        if reference > mpmath.mpf("1e-280"):
            assert abs(moments[j] / reference - 1) < 1e-14, j
        else:
            assert 0.0 <= moments[j] < 1e-279


@pytest.mark.parametrize("decay", [0.3, 7.0, 55.0])
def test_moments_are_the_integrals_they_stand_for(decay):
    """The same by quadrature of the definition, for a power instead of a Legendre polynomial: τ³ on (0, 1)."""
    with mpmath.workdps(30):
        reference = mpmath.quad(lambda u: mpmath.exp(-decay * (1 - u)) * u**3, [0, 0.5, 1])
    # u³ = (5 P0 + 9 P1 + 5 P2 + P3)/20 with P_j(2u - 1)
    assert decay_moments(np.array([decay]), 3)[:, 0] @ np.array([5, 9, 5, 1]) / 20 == pytest.approx(float(reference), rel=1e-14)


def test_no_decay_keeps_the_mean_only():
    moments = decay_moments(np.zeros((2, 3)), 4)
    assert moments.shape == (5, 2, 3)
    assert np.all(moments[0] == 1.0)
    assert np.all(moments[1:] == 0.0)


def test_degree_zero_is_the_plain_integral():
    decay = np.array([0.0, 1e-9, 2.0, 1e12])
    np.testing.assert_allclose(decay_moments(decay, 0)[0], [1.0, 1.0 - 5e-10, -np.expm1(-2.0) / 2.0, 1e-12], rtol=1e-15)

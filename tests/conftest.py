"""What every test shares: one worked site, quiet plotting, and guards on settings that leak from test to test."""

from __future__ import annotations

import os
import sys

os.environ.setdefault("MPLBACKEND", "Agg")
for _threads in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ.setdefault(_threads, "1")  # the tests run in parallel already

import numpy as np
import pytest
from hypothesis import HealthCheck, settings

settings.register_profile("flatplan", deadline=None, max_examples=60, derandomize=True, suppress_health_check=[HealthCheck.too_slow])
settings.load_profile("flatplan")


def _shared_settings() -> dict[str, object]:
    """Settings of numerical packages that are global, of those packages that are loaded."""
    found: dict[str, object] = {"numpy errors": np.geterr()}
    if "mpmath" in sys.modules:
        found["mpmath precision"] = sys.modules["mpmath"].mp.prec
        found["mpmath interval precision"] = sys.modules["mpmath"].iv.prec
    if "flint" in sys.modules:
        found["flint precision"] = sys.modules["flint"].ctx.prec
    return found


@pytest.fixture(autouse=True)
def _no_setting_leaks():
    """A test that leaves a working precision or numpy's error handling changed fails, and is put right."""
    before = _shared_settings()
    yield
    after = _shared_settings()
    changed = {name: (value, after[name]) for name, value in before.items() if after[name] != value}
    np.seterr(**before["numpy errors"])
    if "mpmath precision" in before:
        sys.modules["mpmath"].mp.prec = before["mpmath precision"]
        sys.modules["mpmath"].iv.prec = before["mpmath interval precision"]
    if "flint precision" in before:
        sys.modules["flint"].ctx.prec = before["flint precision"]
    assert not changed, f"left changed (before, after): {changed}"


@pytest.fixture
def rock():
    from flatplan.site import Rock

    return Rock(permeability="40 mD", porosity=0.12, compressibility="5e-10 1/Pa")


@pytest.fixture
def fluid():
    from flatplan.site import Fluid

    return Fluid(viscosity="0.5 cP", compressibility="4.5e-10 1/Pa")


@pytest.fixture
def medium(rock, fluid):
    """The sealed layer of the worked example: travel time about 7.9 hours."""
    from flatplan.site import slab

    return slab(length="140 m", area="6000 m^2", rock=rock, fluid=fluid)

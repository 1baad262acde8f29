"""Where a record finds the part of its behaviour that lives on a higher floor.

Imports run one way (floors are listed in DEVELOPERS.md), yet ``medium.coefficients`` is a method of
a floor-1 record computed on floor 2. The package face names the module for each role once; a record
asks for the role and never knows the module. Nothing loads before it is used.
"""

from __future__ import annotations

import importlib
from types import ModuleType

_MODULES: dict[str, str] = {}


def provide(role: str, module: str) -> None:
    """Say which module plays ``role``."""
    _MODULES[role] = module


def provider(role: str) -> ModuleType:
    """The module that plays ``role``, loaded on first use."""
    return importlib.import_module(_MODULES[role])

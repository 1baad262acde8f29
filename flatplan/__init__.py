"""flatplan: the injection rate that makes pressure at a distant boundary follow a wanted history.

The public names below load when first used, so that ``import flatplan`` stays quick.
"""

from __future__ import annotations

import importlib
from typing import Any

from flatplan.wiring import provide

__version__ = "0.1.0"

# name -> the room it lives in
_ROOMS = {
    "Rock": "site", "Fluid": "site", "Well": "site", "Face": "site", "ConfiningBed": "site", "Zone": "site", "RockProfile": "site",
    "slab": "site", "radial": "site", "spherical": "site", "zoned": "site",
    "Target": "flat", "feedforward": "flat",
    "Steps": "numeric", "simulate": "numeric", "confirm": "numeric",
    "Limits": "decide", "assess": "decide", "quickest": "decide", "closest": "decide",
    "steps": "field",
    "table": "show", "plot": "show", "report": "show",
}  # fmt: skip
__all__ = sorted(_ROOMS)

# Records of a lower floor find their series here without importing upwards.
provide("series", "flatplan.flat.generating")
provide("exact forms", "flatplan.flat.exact")


def __getattr__(name: str) -> Any:
    if name in _ROOMS:
        value = getattr(importlib.import_module(f"flatplan.{_ROOMS[name]}"), name)
        globals()[name] = value
        return value
    raise AttributeError(f"module 'flatplan' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted([*__all__, "__version__"])

"""rayloom: 3-D velocity models from arrival picks of distant earthquakes.

The names below are the public face; each is imported when first used, so that
``import rayloom`` stays fast.
"""

from __future__ import annotations

import importlib
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from rayloom.earth import ReferenceEarth
    from rayloom.forward import trace, trace_distant
    from rayloom.inversion import InversionSettings, invert
    from rayloom.model import BlockGrid, Frame, SlownessModel
    from rayloom.residuals import compute_residuals, read_residuals
    from rayloom.survey import read_survey

_ROOMS = {
    "ReferenceEarth": "rayloom.earth",
    "trace": "rayloom.forward",
    "trace_distant": "rayloom.forward",
    "InversionSettings": "rayloom.inversion",
    "invert": "rayloom.inversion",
    "BlockGrid": "rayloom.model",
    "Frame": "rayloom.model",
    "SlownessModel": "rayloom.model",
    "compute_residuals": "rayloom.residuals",
    "read_residuals": "rayloom.residuals",
    "read_survey": "rayloom.survey",
}

__all__ = [
    "BlockGrid",
    "Frame",
    "InversionSettings",
    "ReferenceEarth",
    "SlownessModel",
    "compute_residuals",
    "invert",
    "read_residuals",
    "read_survey",
    "trace",
    "trace_distant",
]

__version__ = "0.1.0"


def __getattr__(name: str) -> Any:
    if name in _ROOMS:
        return getattr(importlib.import_module(_ROOMS[name]), name)
    raise AttributeError(f"module 'rayloom' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted([*globals(), *_ROOMS])

"""Forward: rays through a block model, their times and their sensitivities."""

from rayloom.forward.bound_check import BoundCheck
from rayloom.forward.checking import RayCheck, check_rays
from rayloom.forward.distant import trace_distant
from rayloom.forward.local import trace
from rayloom.forward.rays import Rays
from rayloom.forward.settings import ForwardSettings

__all__ = [
    "BoundCheck",
    "ForwardSettings",
    "RayCheck",
    "Rays",
    "check_rays",
    "trace",
    "trace_distant",
]

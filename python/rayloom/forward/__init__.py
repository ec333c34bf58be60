"""Forward: rays through a block model, their times and their sensitivities."""

from rayloom.forward.distant import trace_distant
from rayloom.forward.local import trace
from rayloom.forward.rays import Rays
from rayloom.forward.settings import ForwardSettings

__all__ = ["ForwardSettings", "Rays", "trace", "trace_distant"]

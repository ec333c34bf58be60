"""Relative arrival times: delays between pairs of stations, adjusted to one time each.

The main types are :class:`Delays`, what was measured, and :class:`RelativeTimes`, what it
comes to; :func:`residuals_of_delays` turns the latter into residuals.
"""

from rayloom.residuals.delays.adjustment import Adjustment, adjust
from rayloom.residuals.delays.relative_times import RelativeTimes, relative_times
from rayloom.residuals.delays.residuals import (
    compute_delay_residuals,
    readings_of_times,
    residuals_of_delays,
)
from rayloom.residuals.delays.table import Delays, read_delays

__all__ = [
    "Adjustment",
    "Delays",
    "RelativeTimes",
    "adjust",
    "compute_delay_residuals",
    "read_delays",
    "readings_of_times",
    "relative_times",
    "residuals_of_delays",
]

"""Residuals: observed minus predicted arrival times, and what was left out.

The main type is :class:`Residuals`; :func:`compute_residuals` makes it from a
survey, :func:`read_residuals` from residuals that others computed. Latitudes
turn geocentric here.
"""

from __future__ import annotations

from rayloom.residuals.assembly import compute_residuals, read_residuals
from rayloom.residuals.crust import StationCrust, crust_files, read_crust
from rayloom.residuals.crust_listing import crust_frame
from rayloom.residuals.exclusions import Exclusions
from rayloom.residuals.settings import ResidualSettings
from rayloom.residuals.summary_rays import SummaryRays, summarise_rays
from rayloom.residuals.table import Residuals

__all__ = [
    "Exclusions",
    "ResidualSettings",
    "Residuals",
    "StationCrust",
    "SummaryRays",
    "compute_residuals",
    "crust_files",
    "crust_frame",
    "read_crust",
    "read_residuals",
    "summarise_rays",
]

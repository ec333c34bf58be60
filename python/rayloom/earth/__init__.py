"""One-dimensional Earth: travel times, their corrections, and geodesy.

:class:`ReferenceEarth` is the main type: a radial model with travel times,
ray parameters and corrections for ellipticity and elevation.
"""

from rayloom.earth.geodesy import (
    DistanceAzimuth,
    distance_azimuth_deg,
    geocentric_latitude_deg,
    geographic_latitude_deg,
)
from rayloom.earth.local_column import LocalColumn, column_delay_s, moho_km
from rayloom.earth.model_table import LARGEST_VS_OVER_VP, ModelTable
from rayloom.earth.phases import PHASES, phase_wave, standard_phase
from rayloom.earth.reference import ReferenceEarth
from rayloom.earth.time_table import TimeTable

__all__ = [
    "LARGEST_VS_OVER_VP",
    "PHASES",
    "DistanceAzimuth",
    "LocalColumn",
    "ModelTable",
    "ReferenceEarth",
    "TimeTable",
    "column_delay_s",
    "distance_azimuth_deg",
    "geocentric_latitude_deg",
    "geographic_latitude_deg",
    "moho_km",
    "phase_wave",
    "standard_phase",
]

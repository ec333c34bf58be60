"""Constants and unit conversions used throughout, each with its source."""

from __future__ import annotations

from typing import Final

EARTH_RADIUS_KM: Final = 6371.0
"""Radius of the spherical Earth of ak135 and iasp91 (Kennett & Engdahl 1991)."""

WGS84_FLATTENING: Final = 1.0 / 298.257223563
"""Flattening of the reference ellipsoid (World Geodetic System 1984)."""

KM_PER_DEGREE: Final = EARTH_RADIUS_KM * 3.141592653589793 / 180.0
"""Arc length of one degree on the spherical Earth's surface."""

M_PER_KM: Final = 1000.0

"""What coordinates of stations and events may be."""

from __future__ import annotations

from typing import Final

from rayloom.survey.columns import Span

LATITUDE: Final = Span(-90.0, 90.0, "degrees north", "latitude and longitude swapped?")
LONGITUDE: Final = Span(-180.0, 360.0, "degrees east")
ELEVATION: Final = Span(-11_000.0, 9_000.0, "m", "in metres above sea level")
BURIAL: Final = Span(0.0, 11_000.0, "m", "in metres below the surface")
SENSOR_ELEVATION: Final = Span(-22_000.0, 9_000.0, "m", "in metres above sea level")
SENSOR_DEPTH: Final = Span(-9_000.0, 11_000.0, "m", "in metres below the surface")

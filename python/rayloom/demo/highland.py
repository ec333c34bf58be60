"""Geography of the invented Vessandra Highland: its map and its network.

Positions are map kilometres east and north of the highland's centre: arc
lengths at the Earth's surface in a frame whose local axes point east and north.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from rayloom.demo.places import NETWORK, PLACES
from rayloom.errors import InputError
from rayloom.model import Frame
from rayloom.survey import Stations
from rayloom.units import KM_PER_DEGREE

HIGHLAND = "Vessandra Highland"
CENTRE_LONGITUDE_DEG = 86.5
CENTRE_LATITUDE_DEG = -43.2

Floats = NDArray[np.float64]


def highland_frame() -> Frame:
    """Frame at the highland's centre, x east and y north."""
    return Frame(longitude=CENTRE_LONGITUDE_DEG, latitude=CENTRE_LATITUDE_DEG)


def to_geographic(east_km: Floats, north_km: Floats) -> tuple[Floats, Floats]:
    """Longitude and geographic latitude (degrees) of map positions (km)."""
    longitude_deg, latitude_deg = highland_frame().geographic_coordinates(
        np.asarray(east_km) / KM_PER_DEGREE, np.asarray(north_km) / KM_PER_DEGREE
    )
    return longitude_deg, latitude_deg


def to_map_km(longitude_deg: Floats, latitude_deg: Floats) -> tuple[Floats, Floats]:
    """Map positions east and north (km) of geographic coordinates (degrees)."""
    x, y = highland_frame().local_coordinates(longitude_deg, latitude_deg)
    return x * KM_PER_DEGREE, y * KM_PER_DEGREE


def polar_to_geographic(azimuth_deg: Floats, distance_deg: Floats) -> tuple[Floats, Floats]:
    """Longitude and geographic latitude (degrees) of points seen from the centre.

    Parameters
    ----------
    azimuth_deg : array
        Azimuth at the highland's centre, clockwise from north.
    distance_deg : array
        Angular distance from the centre.
    """
    azimuth, distance = np.radians(azimuth_deg), np.radians(distance_deg)
    x = np.arctan2(np.sin(distance) * np.sin(azimuth), np.cos(distance))
    y = np.arcsin(np.sin(distance) * np.cos(azimuth))
    longitude_deg, latitude_deg = highland_frame().geographic_coordinates(
        np.degrees(x), np.degrees(y)
    )
    return longitude_deg, latitude_deg


def highland_stations(count: int = len(PLACES)) -> Stations:
    """Return the network, or a smaller one of the same width.

    Parameters
    ----------
    count : int
        Number of stations, 3 to 60.

    Raises
    ------
    InputError
        If the highland has not that many places.
    """
    if not 3 <= count <= len(PLACES):
        raise InputError(f"the highland has 3 to {len(PLACES)} stations; {count} were asked for")
    places = PLACES[:count]
    longitude_deg, latitude_deg = to_geographic(
        np.array([place.east_km for place in places]),
        np.array([place.north_km for place in places]),
    )
    return Stations(
        network=np.array([NETWORK] * count),
        station=np.array([place.code for place in places]),
        latitude_deg=np.round(latitude_deg, 5),
        longitude_deg=np.round(longitude_deg, 5),
        elevation_m=np.array([place.elevation_m for place in places]),
    )

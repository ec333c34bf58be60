"""Latitudes, distances and azimuths on the sphere of seismology."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from rayloom.earth.checks import broadcast
from rayloom.errors import InputError
from rayloom.units import WGS84_FLATTENING

_AXIS_RATIO_SQUARED = (1.0 - WGS84_FLATTENING) ** 2


@dataclass(frozen=True)
class DistanceAzimuth:
    """Great-circle distance and directions between pairs of points.

    Attributes
    ----------
    distance_deg : ndarray
        Angle at the Earth's centre, degrees.
    azimuth_deg : ndarray
        Direction at the first point towards the second, clockwise from north,
        degrees in 0 to 360.
    back_azimuth_deg : ndarray
        Direction at the second point towards the first, likewise.
    """

    distance_deg: NDArray[np.float64]
    azimuth_deg: NDArray[np.float64]
    back_azimuth_deg: NDArray[np.float64]


def geocentric_latitude_deg(geographic_deg: ArrayLike) -> NDArray[np.float64]:
    """Geocentric latitude of a point on the WGS84 ellipsoid.

    Parameters
    ----------
    geographic_deg : array_like
        Geographic (geodetic) latitude, degrees.

    Returns
    -------
    ndarray
        Geocentric latitude, degrees, of the same shape.

    Raises
    ------
    InputError
        If a latitude lies outside −90 to 90 degrees.

    Notes
    -----
    tan(geocentric) = (1 − f)² tan(geographic).

    References
    ----------
    Snyder, J.P. (1987). Map projections: a working manual. USGS Professional
    Paper 1395, equation 3-28.
    """
    latitude = np.radians(checked_latitude_deg(geographic_deg))
    return np.degrees(np.arctan2(_AXIS_RATIO_SQUARED * np.sin(latitude), np.cos(latitude)))


def geographic_latitude_deg(geocentric_deg: ArrayLike) -> NDArray[np.float64]:
    """Geographic latitude of a point on the WGS84 ellipsoid.

    Parameters
    ----------
    geocentric_deg : array_like
        Geocentric latitude, degrees.

    Returns
    -------
    ndarray
        Geographic (geodetic) latitude, degrees, of the same shape.

    Raises
    ------
    InputError
        If a latitude lies outside −90 to 90 degrees.
    """
    latitude = np.radians(checked_latitude_deg(geocentric_deg))
    return np.degrees(np.arctan2(np.sin(latitude), _AXIS_RATIO_SQUARED * np.cos(latitude)))


def distance_azimuth_deg(
    latitude_1_deg: ArrayLike,
    longitude_1_deg: ArrayLike,
    latitude_2_deg: ArrayLike,
    longitude_2_deg: ArrayLike,
) -> DistanceAzimuth:
    """Distance and azimuths between pairs of points on the sphere.

    Parameters
    ----------
    latitude_1_deg, longitude_1_deg : array_like
        First points: geocentric latitude and longitude, degrees.
    latitude_2_deg, longitude_2_deg : array_like
        Second points, likewise; all four are broadcast against each other.

    Returns
    -------
    DistanceAzimuth

    Raises
    ------
    InputError
        If a latitude lies outside −90 to 90 degrees or the shapes do not
        broadcast.

    Notes
    -----
    Both distance and azimuths come from an arctangent of two components, so
    that they are accurate at every distance.
    """
    first, longitude_1, second, longitude_2 = (
        np.radians(values)
        for values in broadcast(
            latitude_1_deg=checked_latitude_deg(latitude_1_deg),
            longitude_1_deg=longitude_1_deg,
            latitude_2_deg=checked_latitude_deg(latitude_2_deg),
            longitude_2_deg=longitude_2_deg,
        )
    )
    east = longitude_2 - longitude_1
    across = np.cos(second) * np.sin(east)
    north = np.cos(first) * np.sin(second) - np.sin(first) * np.cos(second) * np.cos(east)
    along = np.sin(first) * np.sin(second) + np.cos(first) * np.cos(second) * np.cos(east)
    back_across = -np.cos(first) * np.sin(east)
    back_north = np.cos(second) * np.sin(first) - np.sin(second) * np.cos(first) * np.cos(east)
    return DistanceAzimuth(
        distance_deg=np.degrees(np.arctan2(np.hypot(across, north), along)),
        azimuth_deg=np.degrees(np.arctan2(across, north)) % 360.0,
        back_azimuth_deg=np.degrees(np.arctan2(back_across, back_north)) % 360.0,
    )


def checked_latitude_deg(latitude_deg: ArrayLike) -> NDArray[np.float64]:
    """Latitudes as an array, after a check of their range.

    Parameters
    ----------
    latitude_deg : array_like
        Latitudes, degrees.

    Returns
    -------
    ndarray

    Raises
    ------
    InputError
        If a latitude lies outside −90 to 90 degrees.
    """
    (latitude,) = broadcast(latitude_deg=latitude_deg)
    outside = np.abs(latitude) > 90.0
    if np.any(outside):
        raise InputError(
            f"latitude {latitude[outside].flat[0]} lies outside -90 to 90 degrees; "
            "are latitude and longitude exchanged?"
        )
    return latitude

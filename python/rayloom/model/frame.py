"""The frame: local coordinates on a rotated sphere, or in a flat box."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final, Self

import numpy as np
from numpy.typing import ArrayLike, NDArray

from rayloom.earth import geocentric_latitude_deg, geographic_latitude_deg
from rayloom.errors import InputError
from rayloom.units import EARTH_RADIUS_KM

Floats = NDArray[np.float64]

COINCIDENT_POLES_RAD: Final = 1e-12
"""Two poles nearer to each other than this are taken as one."""


@dataclass(frozen=True)
class RotatedPole:
    """A rotated sphere as a map projection names it (CF-1.8, appendix F).

    Attributes
    ----------
    latitude_deg, longitude_deg : float
        Where the frame's pole (y = 90°) lies on the Earth, degrees; the latitude is
        geocentric.
    north_pole_x_deg : float
        Rotated longitude x of the Earth's north pole, degrees.
    """

    latitude_deg: float
    longitude_deg: float
    north_pole_x_deg: float


@dataclass(frozen=True, init=False)
class Frame:
    """Local coordinates x, y and depth on a rotated sphere, or flat in km.

    The sphere is turned so that the centre has x = y = 0; x is the rotated
    longitude and y the rotated latitude, both in degrees of arc, so that blocks
    near the centre are nearly square at any latitude. At the centre the y axis
    points to the azimuth ``azimuth_deg`` and the x axis to ``azimuth_deg`` + 90:
    with the default of 0, x is east and y is north there. Away from the centre
    the y axis is *not* geographic north; see :meth:`y_axis_azimuth_deg`.

    Latitudes are geographic (WGS84) in every argument and every result. Inside,
    directions are geocentric: tan φ′ = (1 − f)² tan φ. Depth is in km below sea
    level, positive down, on the sphere of radius 6371 km.

    Parameters
    ----------
    longitude, latitude : float
        Centre of the frame, degrees east and degrees north (geographic).
    azimuth_deg : float, optional
        Azimuth of the y axis at the centre, degrees clockwise from north.

    Attributes
    ----------
    longitude_deg, latitude_deg, azimuth_deg : float
        As given; all three are zero and without meaning in a flat frame.
    is_flat : bool
        Whether x and y are km in a flat box without geography.

    Raises
    ------
    InputError
        If a value is not finite or the latitude is outside −90° … 90°.

    References
    ----------
    Torge, W. & Müller, J. (2012). Geodesy, 4th ed., de Gruyter (geocentric latitude).
    """

    longitude_deg: float
    latitude_deg: float
    azimuth_deg: float
    is_flat: bool

    def __init__(self, *, longitude: float, latitude: float, azimuth_deg: float = 0.0) -> None:
        for name, value in (
            ("longitude", longitude),
            ("latitude", latitude),
            ("azimuth_deg", azimuth_deg),
        ):
            if not np.isfinite(value):
                raise InputError(f"expected a finite number of degrees, got {value}", where=name)
        if abs(latitude) > 90.0:
            raise InputError(f"expected −90 … 90 degrees, got {latitude:g}", where="latitude")
        self._set(float(longitude), float(latitude), float(azimuth_deg), is_flat=False)

    def _set(self, longitude: float, latitude: float, azimuth: float, *, is_flat: bool) -> None:
        object.__setattr__(self, "longitude_deg", longitude)
        object.__setattr__(self, "latitude_deg", latitude)
        object.__setattr__(self, "azimuth_deg", azimuth)
        object.__setattr__(self, "is_flat", is_flat)

    @classmethod
    def flat(cls) -> Self:
        """Return a flat frame: x, y and depth in km, no geography.

        Returns
        -------
        Frame
        """
        frame = cls.__new__(cls)
        frame._set(0.0, 0.0, 0.0, is_flat=True)
        return frame

    @property
    def coordinate_unit(self) -> str:
        """Unit of x and y: ``"degrees"`` on the sphere, ``"km"`` in a flat frame."""
        return "km" if self.is_flat else "degrees"

    @property
    def axes(self) -> Floats:
        """Unit vectors of the frame on the Earth, geocentric and Earth-fixed.

        Returns
        -------
        ndarray, shape (3, 3)
            Rows: up at the centre, the x axis and the y axis there; columns: the
            directions of (0° N, 0° E), (0° N, 90° E) and the north pole.
        """
        self._require_sphere()
        latitude = np.radians(geocentric_latitude_deg(self.latitude_deg))
        longitude, azimuth = np.radians([self.longitude_deg, self.azimuth_deg])
        up = _unit_vectors(longitude, latitude)
        east = np.array([-np.sin(longitude), np.cos(longitude), 0.0])
        north = np.cross(up, east)
        x_axis = np.cos(azimuth) * east - np.sin(azimuth) * north
        y_axis = np.cos(azimuth) * north + np.sin(azimuth) * east
        return np.stack([up, x_axis, y_axis])

    def rotated_pole(self) -> RotatedPole:
        """Describe the frame by its pole.

        Returns
        -------
        RotatedPole
            Where both poles coincide the north pole has no x of its own; it is then
            taken as 0 and the pole's longitude carries the whole turn.

        Raises
        ------
        InputError
            If the frame is flat.
        """
        axes = self.axes
        centre, _, pole = axes
        longitude, latitude = (float(value) for value in _longitude_latitude_deg(pole))
        north_pole_x = float(np.degrees(np.arctan2(axes[1, 2], axes[0, 2])))
        if np.hypot(pole[0], pole[1]) < COINCIDENT_POLES_RAD:
            towards_centre = np.copysign(1.0, -pole[2]) * centre
            longitude, north_pole_x = float(_longitude_latitude_deg(towards_centre)[0]), 0.0
        return RotatedPole(latitude, longitude, north_pole_x)

    def local_coordinates(
        self, longitude_deg: ArrayLike, latitude_deg: ArrayLike
    ) -> tuple[Floats, Floats]:
        """Turn geographic longitudes and latitudes into frame coordinates.

        Parameters
        ----------
        longitude_deg, latitude_deg : array_like
            Degrees east and degrees north (geographic); they broadcast. Longitudes
            of any turn are welcome (190 is −170).

        Returns
        -------
        x, y : ndarray
            Rotated longitude (−180 … 180) and rotated latitude, degrees of arc.

        Raises
        ------
        InputError
            If a value is not finite, a latitude is outside −90° … 90°, or the frame is flat.
        """
        longitude, latitude = _geographic(longitude_deg, latitude_deg)
        geocentric = np.radians(geocentric_latitude_deg(latitude))
        local = _unit_vectors(np.radians(longitude), geocentric) @ self.axes.T
        return _longitude_latitude_deg(local)

    def geographic_coordinates(self, x: ArrayLike, y: ArrayLike) -> tuple[Floats, Floats]:
        """Turn frame coordinates into geographic longitudes and latitudes.

        Parameters
        ----------
        x, y : array_like
            Rotated longitude and latitude, degrees of arc; they broadcast.

        Returns
        -------
        longitude_deg, latitude_deg : ndarray
            Degrees east (−180 … 180) and degrees north (geographic).

        Raises
        ------
        InputError
            If the frame is flat.
        """
        earth = self.unit_vectors(x, y) @ self.axes
        longitude, geocentric = _longitude_latitude_deg(earth)
        return longitude, geographic_latitude_deg(geocentric)

    def unit_vectors(self, x: ArrayLike, y: ArrayLike) -> Floats:
        """Directions from the Earth's centre, in the frame's own Cartesian axes.

        Parameters
        ----------
        x, y : array_like
            Rotated longitude and latitude, degrees of arc; they broadcast.

        Returns
        -------
        ndarray, shape (..., 3)
            (cos y cos x, cos y sin x, sin y): up at the centre, along x, along y.

        Raises
        ------
        InputError
            If the frame is flat.
        """
        self._require_sphere()
        return _unit_vectors(np.radians(np.asarray(x)), np.radians(np.asarray(y)))

    def cartesian_km(self, points: ArrayLike) -> Floats:
        """Straight Cartesian positions of points, in km.

        Parameters
        ----------
        points : array_like, shape (..., 3)
            x, y (degrees of arc, or km in a flat frame) and depth (km).

        Returns
        -------
        ndarray, shape (..., 3)
            On the sphere r·(cos y cos x, cos y sin x, sin y) with r = 6371 km − depth;
            in a flat frame x, y and −depth.
        """
        xyz = _points(points)
        x, y, depth = xyz[..., 0], xyz[..., 1], xyz[..., 2]
        if self.is_flat:
            return np.stack([x, y, -depth], axis=-1)
        return (EARTH_RADIUS_KM - depth)[..., None] * self.unit_vectors(x, y)

    def enu_km(self, points: ArrayLike) -> Floats:
        """Place points in true, curved space: km east, north and up of the centre.

        The origin is the frame's centre at sea level; east and north are geographic
        there whatever the frame's azimuth, and up is away from the Earth's centre.

        Parameters
        ----------
        points : array_like, shape (..., 3)
            x, y (degrees of arc, or km in a flat frame) and depth (km).

        Returns
        -------
        ndarray, shape (..., 3)
            East, north and up in km; in a flat frame x, y and −depth.
        """
        cartesian = self.cartesian_km(points)
        if self.is_flat:
            return cartesian
        up, along_x, along_y = np.moveaxis(cartesian, -1, 0)
        cosine, sine = np.cos(np.radians(self.azimuth_deg)), np.sin(np.radians(self.azimuth_deg))
        east = cosine * along_x + sine * along_y
        north = cosine * along_y - sine * along_x
        return np.stack([east, north, up - EARTH_RADIUS_KM], axis=-1)

    def chord_km(self, start: ArrayLike, end: ArrayLike) -> Floats:
        """Lengths of the straight lines between points, in km.

        Parameters
        ----------
        start, end : array_like, shape (..., 3)
            x, y and depth of both ends; they broadcast.

        Returns
        -------
        ndarray, shape (...)
            Distance through the Earth, km.
        """
        difference = self.cartesian_km(end) - self.cartesian_km(start)
        return np.asarray(np.linalg.norm(difference, axis=-1), dtype=np.float64)

    def y_axis_azimuth_deg(self, x: ArrayLike, y: ArrayLike) -> Floats:
        """Azimuth of the local y axis ("grid north") at points of the sphere.

        Parameters
        ----------
        x, y : array_like
            Rotated longitude and latitude, degrees of arc; they broadcast.

        Returns
        -------
        ndarray
            Degrees clockwise from north, −180 … 180; ``azimuth_deg`` at the centre.

        Raises
        ------
        InputError
            If the frame is flat.
        """
        x, y = np.broadcast_arrays(np.radians(np.asarray(x)), np.radians(np.asarray(y)))
        towards_y = np.stack([-np.sin(y) * np.cos(x), -np.sin(y) * np.sin(x), np.cos(y)], axis=-1)
        towards_x = np.stack([-np.sin(x), np.cos(x), np.zeros_like(x)], axis=-1)
        pole = self.axes[:, 2]
        return np.asarray(np.degrees(np.arctan2(-(towards_x @ pole), towards_y @ pole)))

    def grid_direction_deg(self, x: ArrayLike, y: ArrayLike, azimuth_deg: ArrayLike) -> Floats:
        """Turn azimuths at points into directions in the frame.

        Parameters
        ----------
        x, y : array_like
            Where, degrees of arc; they broadcast with the azimuths.
        azimuth_deg : array_like
            Degrees clockwise from geographic north.

        Returns
        -------
        ndarray
            Degrees clockwise from the local y axis, 0 … 360: the direction moves
            along x as its sine and along y as its cosine.

        Raises
        ------
        InputError
            If the frame is flat.
        """
        turned = np.asarray(azimuth_deg, dtype=np.float64) - self.y_axis_azimuth_deg(x, y)
        return np.asarray(np.mod(turned, 360.0))

    def _require_sphere(self) -> None:
        if self.is_flat:
            raise InputError(
                "a flat frame has no longitudes, latitudes or azimuths; "
                "use Frame(longitude=…, latitude=…) for a place on the Earth",
                where="frame",
            )


def _unit_vectors(longitude_rad: ArrayLike, latitude_rad: ArrayLike) -> Floats:
    longitude, latitude = np.broadcast_arrays(longitude_rad, latitude_rad)
    across = np.cos(latitude)
    return np.stack(
        [across * np.cos(longitude), across * np.sin(longitude), np.sin(latitude)], axis=-1
    )


def _longitude_latitude_deg(vectors: Floats) -> tuple[Floats, Floats]:
    first, second, third = np.moveaxis(vectors, -1, 0)
    longitude = np.degrees(np.arctan2(second, first))
    latitude = np.degrees(np.arctan2(third, np.hypot(first, second)))
    return np.asarray(longitude), np.asarray(latitude)


def _geographic(longitude_deg: ArrayLike, latitude_deg: ArrayLike) -> tuple[Floats, Floats]:
    longitude = np.asarray(longitude_deg, dtype=np.float64)
    latitude = np.asarray(latitude_deg, dtype=np.float64)
    if not np.all(np.isfinite(longitude)):
        raise InputError("expected finite degrees in every row", where="longitude_deg")
    if not np.all(np.abs(latitude) <= 90.0):
        raise InputError("expected −90 … 90 degrees in every row", where="latitude_deg")
    return longitude, latitude


def _points(points: ArrayLike) -> Floats:
    array = np.asarray(points, dtype=np.float64)
    if array.ndim == 0 or array.shape[-1] != 3:
        raise InputError(
            f"expected x, y and depth_km along the last axis, got the shape {array.shape}",
            where="points",
        )
    return array

"""What the stations of a survey ask of a grid: where it lies and how fine it can be."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np
from numpy.typing import NDArray

from rayloom.errors import InputError
from rayloom.model.frame import Frame
from rayloom.units import EARTH_RADIUS_KM, KM_PER_DEGREE

if TYPE_CHECKING:
    from rayloom.survey import Survey

Floats = NDArray[np.float64]

FEWEST_SITES: Final = 3

SAME_SITE_KM: Final = 1.0
"""Stations nearer to each other than this count as one site."""

WIDEST_HALF_EXTENT_DEG: Final = 45.0
"""Networks wider than twice this have no regional frame."""


@dataclass(frozen=True)
class NetworkExtent:
    """Place and size of the stations that have picks.

    Attributes
    ----------
    frame : Frame
        Frame centred on the rectangle around the stations.
    half_x_deg, half_y_deg : float
        Greatest distance of a station from the centre along either axis, degrees of arc.
    spacing_km : float
        Median distance of a site to its nearest neighbour, km.
    highest_km : float
        Elevation of the highest sensor, km above sea level.
    site_count : int
        Number of sites.
    """

    frame: Frame
    half_x_deg: float
    half_y_deg: float
    spacing_km: float
    highest_km: float
    site_count: int

    @property
    def aperture_km(self) -> float:
        """Longer side of the rectangle around the stations, km."""
        return 2.0 * max(self.half_x_deg, self.half_y_deg) * KM_PER_DEGREE


def network_extent(survey: Survey, *, azimuth_deg: float = 0.0) -> NetworkExtent:
    """Measure the network of stations that have picks.

    Parameters
    ----------
    survey : Survey
        Stations and picks.
    azimuth_deg : float, optional
        Azimuth of the frame's y axis, degrees.

    Returns
    -------
    NetworkExtent
        Place and size; the centre is rounded to 0.01°.

    Raises
    ------
    InputError
        If fewer than three sites have picks, or they span most of the globe.
    """
    used = np.unique(survey.picks.station_index)
    stations = survey.stations
    longitude, latitude = stations.longitude_deg[used], stations.latitude_deg[used]
    if not used.size:
        raise InputError("no station has picks, so there is nothing to cover", where="picks")
    frame = _central_frame(longitude, latitude, azimuth_deg)
    x, y = frame.local_coordinates(longitude, latitude)
    half_x, half_y = float(np.abs(x).max()), float(np.abs(y).max())
    if max(half_x, half_y) > WIDEST_HALF_EXTENT_DEG:
        raise InputError(
            f"the stations with picks span {2 * max(half_x, half_y):.0f}°; a grid covers at most "
            f"{2 * WIDEST_HALF_EXTENT_DEG:.0f}°. Check their coordinates or keep one region",
            where="stations",
        )
    nearest_km = _nearest_km(frame.unit_vectors(x, y))
    return NetworkExtent(
        frame=frame,
        half_x_deg=half_x,
        half_y_deg=half_y,
        spacing_km=float(np.median(nearest_km)),
        highest_km=float(-stations.depth_km[used].min()),
        site_count=nearest_km.size,
    )


def _central_frame(longitude_deg: Floats, latitude_deg: Floats, azimuth_deg: float) -> Frame:
    anywhere = Frame(longitude=float(longitude_deg[0]), latitude=float(latitude_deg[0]))
    x, y = anywhere.local_coordinates(longitude_deg, latitude_deg)
    mean = anywhere.unit_vectors(x, y).mean(axis=0)
    mean_x = np.degrees(np.arctan2(mean[1], mean[0]))
    mean_y = np.degrees(np.arctan2(mean[2], np.hypot(mean[0], mean[1])))
    frame = _moved(anywhere, mean_x, mean_y, azimuth_deg)
    x, y = frame.local_coordinates(longitude_deg, latitude_deg)
    return _moved(frame, 0.5 * (x.min() + x.max()), 0.5 * (y.min() + y.max()), azimuth_deg)


def _moved(frame: Frame, x_deg: float, y_deg: float, azimuth_deg: float) -> Frame:
    longitude, latitude = frame.geographic_coordinates(x_deg, y_deg)
    return Frame(
        longitude=round(float(longitude), 2),
        latitude=round(float(latitude), 2),
        azimuth_deg=azimuth_deg,
    )


def _nearest_km(directions: Floats) -> Floats:
    from scipy.spatial import cKDTree

    sites = _distinct(directions)
    if len(sites) < FEWEST_SITES:
        raise InputError(
            f"{len(sites)} site(s) have picks; a grid is suggested from {FEWEST_SITES} or more",
            where="stations",
        )
    chords = np.asarray(cKDTree(sites).query(sites, k=2)[0])[:, 1]
    return np.asarray(2.0 * EARTH_RADIUS_KM * np.arcsin(0.5 * chords))


def _distinct(directions: Floats) -> Floats:
    from scipy.spatial import cKDTree

    pairs = cKDTree(directions).query_pairs(SAME_SITE_KM / EARTH_RADIUS_KM, output_type="ndarray")
    repeated = np.unique(pairs.max(axis=1)) if pairs.size else np.zeros(0, dtype=np.int64)
    return np.delete(directions, repeated, axis=0)

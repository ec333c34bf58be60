"""Predicted arrival times in a one-dimensional Earth, with their corrections."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from rayloom.earth import ReferenceEarth, distance_azimuth_deg, geocentric_latitude_deg
from rayloom.residuals.crust import StationCrust
from rayloom.survey import Events, Stations
from rayloom.survey.tables import ColumnTable, FloatArray, IndexArray, TextArray, no_floats


@dataclass(frozen=True, eq=False)
class Geometry(ColumnTable):
    """Distance and directions of event-station pairs on geocentric latitudes.

    Parameters
    ----------
    distance_deg, azimuth_deg, back_azimuth_deg : (n,) float arrays
        Epicentral distance, azimuth at the event, azimuth at the station; degrees.
    """

    distance_deg: FloatArray
    azimuth_deg: FloatArray
    back_azimuth_deg: FloatArray


@dataclass(frozen=True, eq=False)
class Prediction(ColumnTable):
    """Parts of the predicted travel time.

    Parameters
    ----------
    travel_s, ellipticity_s, elevation_s : (n,) float arrays
        Time in the spherical Earth from the event's depth to sea level; what
        ellipticity adds; what elevation and burial add; s.
    crust_s : (n,) float array, optional
        What the local crust adds, s; 0 if not given.
    """

    travel_s: FloatArray
    ellipticity_s: FloatArray
    elevation_s: FloatArray
    crust_s: FloatArray = field(default_factory=no_floats)

    def __post_init__(self) -> None:
        if not len(self.crust_s):
            object.__setattr__(self, "crust_s", np.zeros(len(self.travel_s)))
        super().__post_init__()

    @property
    def total_s(self) -> FloatArray:
        """Predicted travel time, s, shape (n,); NaN where there is no arrival."""
        return np.asarray(self.travel_s + self.ellipticity_s + self.elevation_s + self.crust_s)


def pair_geometry(
    events: Events, stations: Stations, event_index: IndexArray, station_index: IndexArray
) -> Geometry:
    """Return the geometry of pairs given by rows of the two tables.

    Geographic latitudes are converted to geocentric ones here.
    """
    event_latitude_deg = geocentric_latitude_deg(events.latitude_deg)
    station_latitude_deg = geocentric_latitude_deg(stations.latitude_deg)
    pair = distance_azimuth_deg(
        event_latitude_deg[event_index],
        events.longitude_deg[event_index],
        station_latitude_deg[station_index],
        stations.longitude_deg[station_index],
    )
    return Geometry(pair.distance_deg, pair.azimuth_deg, pair.back_azimuth_deg)


def predict(
    earth: ReferenceEarth,
    events: Events,
    stations: Stations,
    event_index: IndexArray,
    station_index: IndexArray,
    phase: TextArray,
    geometry: Geometry,
    *,
    ellipticity: bool,
    elevation: bool,
    crust: StationCrust | None = None,
) -> Prediction:
    """Predict travel times of event-station pairs.

    The time to sea level below the station comes first; elevation and burial
    h then add h sqrt(1/v^2 - p^2/R^2), so that each part is listed by itself.

    Parameters
    ----------
    earth : ReferenceEarth
        The Earth.
    events, stations : Events, Stations
        The tables that the indices point into.
    event_index, station_index : (n,) int arrays
        The pairs.
    phase : (n,) str array
        Phase of each pair.
    geometry : Geometry
        Distance and directions of the pairs.
    ellipticity, elevation : bool
        Whether these parts are computed; they are 0 otherwise.
    crust : StationCrust, optional
        Crust below stations that replaces that of the Earth.

    Returns
    -------
    Prediction
        NaN where the phase does not arrive.
    """
    parts = np.zeros((4, len(phase)))
    latitude_deg = geocentric_latitude_deg(events.latitude_deg)[event_index]
    depth_km = events.depth_km[event_index]
    height_km = -stations.depth_km[station_index]
    for name in np.unique(phase).tolist():
        rows = np.flatnonzero(phase == name)
        distance_deg, source_km = geometry.distance_deg[rows], depth_km[rows]
        parts[0, rows] = earth.travel_time(name, distance_deg, source_km)
        if ellipticity:
            parts[1, rows] = earth.ellipticity_s(
                name, distance_deg, source_km, latitude_deg[rows], geometry.azimuth_deg[rows]
            )
        if elevation:
            parts[2, rows] = earth.elevation_s(name, distance_deg, source_km, height_km[rows])
        if crust is not None:
            parameter_s = earth.ray_parameter(name, distance_deg, source_km)
            parts[3, rows] = crust.delay_s(earth, stations, station_index[rows], name, parameter_s)
    return Prediction(*parts)

"""Arrival times through the true structure, from the true hypocentres."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from rayloom.earth import ReferenceEarth, distance_azimuth_deg, geocentric_latitude_deg
from rayloom.forward import trace_distant
from rayloom.forward.settings import DistantMethod
from rayloom.model import SlownessModel
from rayloom.survey import Events, Stations
from rayloom.units import M_PER_KM

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]
Progress = Callable[[int, int], None]

PHASE = "P"


def standard_time_s(
    earth: ReferenceEarth,
    events: Events,
    stations: Stations,
    pairs: Integers,
) -> Floats:
    """Travel times of the one-dimensional Earth with ellipticity and elevation, in seconds.

    Parameters
    ----------
    earth : ReferenceEarth
        The reference.
    events, stations : Events, Stations
        Sources and receivers.
    pairs : (k, 2) int array
        Rows of event and station.
    """
    event_index, station_index = pairs.T
    event_latitude_deg = geocentric_latitude_deg(events.latitude_deg)[event_index]
    station_latitude_deg = geocentric_latitude_deg(stations.latitude_deg)[station_index]
    path = distance_azimuth_deg(
        event_latitude_deg,
        events.longitude_deg[event_index],
        station_latitude_deg,
        stations.longitude_deg[station_index],
    )
    depth_km = events.depth_km[event_index]
    elevation_km = stations.elevation_m[station_index] / M_PER_KM
    sphere_s = earth.travel_time(PHASE, path.distance_deg, depth_km)
    ellipticity_s = earth.ellipticity_s(
        PHASE, path.distance_deg, depth_km, event_latitude_deg, path.azimuth_deg
    )
    elevation_s = earth.elevation_s(PHASE, path.distance_deg, depth_km, elevation_km)
    return np.asarray(sphere_s + ellipticity_s + elevation_s)


def structure_delay_s(
    model: SlownessModel,
    earth: ReferenceEarth,
    events: Events,
    stations: Stations,
    pairs: Integers,
    *,
    method: DistantMethod = "bent",
    threads: int | None = None,
    progress: Progress | None = None,
) -> Floats:
    """Time through the model minus time through its reference, in the same blocks.

    Parameters
    ----------
    model : SlownessModel
        The true structure.
    earth : ReferenceEarth
        The Earth outside the blocks.
    events, stations : Events, Stations
        Sources and receivers.
    pairs : (k, 2) int array
        Rows of event and station.
    method : {"bent", "reference", "straight"}
        How rays are traced.
    threads : int, optional
        Number of threads; all by default.
    progress : callable, optional
        Called with rays done and rays in all; bent rays are traced in both models.

    Returns
    -------
    (k,) array
        Delays in seconds, late positive; NaN where no ray exists.
    """
    count = len(pairs)
    models = [model]
    if method == "bent":
        models.append(model.with_slowness(model.reference))
    rays = []
    for number, traced in enumerate(models):
        rays.append(
            trace_distant(
                traced,
                earth,
                events,
                stations,
                pairs=pairs,
                phases=PHASE,
                method=method,
                threads=threads,
                progress=_part(progress, number * count, len(models) * count),
            )
        )
    reference_s = rays[1].time_s if method == "bent" else rays[0].predict_s(model.reference)
    return np.asarray(rays[0].time_s - reference_s)


def _part(progress: Progress | None, before: int, total: int) -> Progress | None:
    """Report one part of the work as part of the whole."""
    if progress is None:
        return None
    return lambda done, _part_total: progress(before + done, total)

"""Distant earthquakes around the highland, and how a catalogue mislocates them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rayloom.demo.highland import polar_to_geographic
from rayloom.survey import Events
from rayloom.units import KM_PER_DEGREE

Floats = NDArray[np.float64]

NEAREST_DEG, FARTHEST_DEG = 30.2, 92.8
"""Distances from the highland's centre that keep every station at 28° to 95°."""

HORIZONTAL_ERROR_KM = 7.0
DEPTH_ERROR_KM = 7.0
ORIGIN_ERROR_S = 0.6
ORIGIN_PER_DEPTH_S_PER_KM = 0.1
"""A hypocentre put too deep has its origin put too late: the usual trade-off."""


@dataclass(frozen=True)
class Belt:
    """A seismic belt as seen from the highland.

    Parameters
    ----------
    name : str
        Invented name.
    share : float
        Share of all events.
    azimuth_deg : pair
        Azimuths of its two ends.
    distance_deg : pair
        Distances of its two ends.
    width_deg : float
        Scatter across it (standard deviation).
    deep_share : float
        Share of its events below 60 km.
    deepest_km : float
        Depth of its deepest events.
    dip_deg : float
        Dip of the plane they lie on, away from the highland if positive.
    """

    name: str
    share: float
    azimuth_deg: tuple[float, float]
    distance_deg: tuple[float, float]
    width_deg: float
    deep_share: float = 0.0
    deepest_km: float = 60.0
    dip_deg: float = 45.0


BELTS = (
    Belt("Ashgrave Trench", 0.33, (42.0, 78.0), (38.0, 62.0), 1.2, 0.45, 600.0, 50.0),
    Belt("Sunderline Arc", 0.24, (96.0, 124.0), (88.0, 66.0), 1.0, 0.40, 480.0, -55.0),
    Belt("Meridane Ridge", 0.14, (188.0, 236.0), (31.0, 47.0), 0.7),
    Belt("Hollin Fold Belt", 0.12, (296.0, 322.0), (48.0, 74.0), 2.5, 0.15, 210.0, 60.0),
    Belt("Carrowane Arc", 0.10, (250.0, 266.0), (80.0, 91.0), 0.8, 0.35, 330.0, 50.0),
    Belt("elsewhere", 0.07, (0.0, 360.0), (40.0, 85.0), 12.0),
)


@dataclass(frozen=True)
class Seismicity:
    """Events as they were and as the catalogue has them, row by row.

    Parameters
    ----------
    true : Events
        True hypocentres and origin times.
    catalogue : Events
        What the user of the survey is given.
    region : (n,) array of str
        Belt of each event.
    """

    true: Events
    catalogue: Events
    region: NDArray[np.str_]


def draw_seismicity(count: int, rng: np.random.Generator) -> Seismicity:
    """Draw earthquakes on the belts, in order of time, and mislocate them.

    Parameters
    ----------
    count : int
        Number of events.
    rng : numpy.random.Generator
        Source of chance.
    """
    shares = np.array([belt.share for belt in BELTS])
    belt_of = rng.choice(len(BELTS), size=count, p=shares / shares.sum())
    polar = np.array([_on_belt(BELTS[index], rng) for index in belt_of]).reshape(count, 3)
    longitude_deg, latitude_deg = polar_to_geographic(polar[:, 0], polar[:, 1])
    day_s = 86400.0
    offset_s = np.sort(rng.uniform(0.0, 540.0 * day_s, count))
    true = Events(
        event=np.array([f"V{number:03d}" for number in range(1, count + 1)]),
        time=_later(np.full(count, np.datetime64("2017-03-01", "ns")), offset_s),
        latitude_deg=latitude_deg,
        longitude_deg=longitude_deg,
        depth_km=polar[:, 2],
        magnitude=np.round(_magnitudes(count, rng), 1),
    )
    region = np.array([BELTS[index].name for index in belt_of])
    return Seismicity(true, _mislocated(true, rng), region)


def _on_belt(belt: Belt, rng: np.random.Generator) -> tuple[float, float, float]:
    """Azimuth (degrees), distance (degrees) and depth (km) of one event."""
    along = rng.uniform()
    azimuth_deg = belt.azimuth_deg[0] + along * (belt.azimuth_deg[1] - belt.azimuth_deg[0])
    distance_deg = belt.distance_deg[0] + along * (belt.distance_deg[1] - belt.distance_deg[0])
    if belt.deep_share and rng.uniform() < belt.deep_share:
        depth_km = rng.uniform(60.0, belt.deepest_km)
        distance_deg += depth_km / np.tan(np.radians(belt.dip_deg)) / KM_PER_DEGREE
    else:
        depth_km = 5.0 + min(rng.exponential(14.0), 50.0)
    distance_deg += rng.normal(0.0, belt.width_deg)
    return azimuth_deg, float(np.clip(distance_deg, NEAREST_DEG, FARTHEST_DEG)), depth_km


def _magnitudes(count: int, rng: np.random.Generator) -> Floats:
    """Magnitudes of 5.4 to 7.6 whose logarithmic number falls by one per unit."""
    return np.minimum(5.4 - np.log10(1.0 - rng.uniform(0.0, 1.0, count)), 7.6)


def _mislocated(true: Events, rng: np.random.Generator) -> Events:
    """Give hypocentres and origin times the usual errors of a catalogue."""
    count = len(true.event)
    east_km, north_km = rng.normal(0.0, HORIZONTAL_ERROR_KM, (2, count))
    depth_km: Floats = true.depth_km + rng.normal(0.0, DEPTH_ERROR_KM, count)
    depth_km = np.maximum(np.round(depth_km, 1), 1.0).astype(np.float64)
    origin_s = rng.normal(0.0, ORIGIN_ERROR_S, count)
    origin_s += ORIGIN_PER_DEPTH_S_PER_KM * (depth_km - true.depth_km)
    latitude_deg = true.latitude_deg + north_km / KM_PER_DEGREE
    parallel_km = KM_PER_DEGREE * np.cos(np.radians(true.latitude_deg))
    longitude_deg = (true.longitude_deg + east_km / parallel_km + 180.0) % 360.0 - 180.0
    return Events(
        event=true.event,
        time=_later(true.time, np.round(origin_s, 2)),
        latitude_deg=np.round(latitude_deg, 3),
        longitude_deg=np.round(longitude_deg, 3),
        depth_km=depth_km,
        magnitude=true.magnitude,
    )


def _later(time: NDArray[np.datetime64], shift_s: Floats) -> NDArray[np.datetime64]:
    """Shift times by seconds."""
    return np.asarray(time + np.round(shift_s * 1e9).astype("timedelta64[ns]"))

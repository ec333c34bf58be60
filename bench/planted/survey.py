"""Clean surveys: lateral structure, station terms, noise and catalogue errors, no fault.

Structure is a sum of smooth random delays at the points where rays cross four depths, so
that neighbouring rays are delayed alike; no ray is traced through blocks.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from functools import cache, lru_cache

import numpy as np
from numpy.typing import NDArray

from rayloom.earth import ReferenceEarth
from rayloom.residuals import ResidualSettings
from rayloom.residuals.assembly import Screened
from rayloom.residuals.exclusions import Selection
from rayloom.residuals.prediction import Geometry, Prediction, pair_geometry, predict
from rayloom.residuals.readings import Readings
from rayloom.residuals.screening import (
    screen_arrivals,
    screen_distances,
    screen_phases,
    screen_residuals,
)
from rayloom.residuals.screens.evidence import Evidence, evidence_of_screened
from rayloom.survey import Events, Stations
from rayloom.units import EARTH_RADIUS_KM, KM_PER_DEGREE

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]

GEOMETRIES = 12
"""Networks and events; structure, noise, times and who recorded what are drawn per survey."""

CENTRES_DEG = ((-8.0, 33.0), (38.0, 140.0), (62.0, -150.0), (-35.0, -68.0))
STRUCTURE_RMS_S = (0.3, 0.5)
STATION_TERM_S = 0.2
NOISE_S = (0.06, 0.09, 0.14)
NOISE_SHARES = (0.45, 0.35, 0.20)
DEPTHS_KM = np.array([40.0, 120.0, 210.0, 320.0])
CORRELATION_KM = (60.0, 120.0)
WAVES = 60
ORIGIN_ERROR_S = 0.6
EPICENTRE_ERROR_KM = 7.0
DEPTH_ERROR_KM = 7.0
VERTICAL_SLOWNESS_S_PER_KM = 0.1
MANTLE_KM_S = 8.1
YEARS = 2.0


@cache
def earth() -> ReferenceEarth:
    """Return the Earth of all invented surveys."""
    return ReferenceEarth("ak135")


@dataclass(frozen=True, eq=False)
class Draft:
    """A survey in the making: what was recorded, and what the tables say.

    ``travel_s`` follows from the truth; stations, events and ``predicted_s`` are those of the
    tables. Faults change one or the other.
    """

    stations: Stations
    events: Events
    event_index: Integers
    station_index: Integers
    phase: NDArray[np.str_]
    travel_s: Floats
    uncertainty_s: Floats
    predicted_s: Floats
    slowness_s_per_km: Floats
    left_out: tuple[str, ...] = field(default=())

    def select(self, rows: NDArray[np.generic]) -> Draft:
        """Keep some picks."""
        names = ("event_index", "station_index", "phase", "travel_s", "uncertainty_s")
        columns = {name: getattr(self, name)[rows] for name in names}
        predictions = ("predicted_s", "slowness_s_per_km")
        return replace(
            self, **columns, **{name: getattr(self, name)[rows] for name in predictions}
        )

    def repredicted(self, rows: NDArray[np.generic]) -> Draft:
        """Predict some rows anew from the tables as they are now."""
        predicted_s = self.predicted_s.copy()
        predicted_s[rows] = _predicted_s(
            self.stations,
            self.events,
            self.event_index[rows],
            self.station_index[rows],
            self.phase[rows],
        )
        return replace(self, predicted_s=predicted_s)

    def evidence(self, settings: ResidualSettings | None = None) -> Evidence:
        """Screen the picks as the residuals step does."""
        settings = settings or ResidualSettings()
        readings = Readings(
            self.event_index,
            self.station_index,
            self.phase,
            self.travel_s,
            self.uncertainty_s,
        )
        geometry = pair_geometry(self.events, self.stations, self.event_index, self.station_index)
        residual_s = self.travel_s - self.predicted_s
        selection = Selection(len(readings))
        screen_phases(selection, self.phase, settings)
        screen_distances(selection, self.phase, geometry.distance_deg, settings)
        screen_arrivals(selection, self.phase, geometry.distance_deg, self.predicted_s)
        screen_residuals(
            selection, self.event_index, self.station_index, self.phase, residual_s, settings
        )
        nothing = np.zeros(len(readings))
        screened = Screened(
            selection, geometry, Prediction(self.predicted_s, nothing, nothing), residual_s
        )
        return evidence_of_screened(
            readings, screened, self.stations, self.events, earth(), settings
        )


@lru_cache(maxsize=64)
def clean_survey(seed: int) -> Draft:
    """Draw a survey without faults.

    Its network and events are one of a dozen; all else depends on the seed alone.
    """
    random = np.random.default_rng([seed, 41])
    draft, geometry = _whole(seed % GEOMETRIES)
    recorded = random.uniform(size=len(draft.travel_s)) < _recorded_share(draft, random)
    delays_s = structure_s(draft, geometry, random) + _catalogue_s(draft, geometry, random)
    terms_s = random.normal(0.0, STATION_TERM_S, len(draft.stations))
    uncertainty_s = random.choice(NOISE_S, len(delays_s), p=NOISE_SHARES)
    noise_s = uncertainty_s * random.normal(size=len(delays_s))
    late_s = delays_s + terms_s[draft.station_index] + noise_s
    draft = replace(
        draft,
        events=_at_times(draft.events, random),
        travel_s=np.round(draft.predicted_s + late_s, 4),
        uncertainty_s=uncertainty_s,
    )
    return draft.select(recorded)


def _recorded_share(draft: Draft, random: np.random.Generator) -> Floats:
    """Share of picks of each pair: events and stations differ."""
    event = random.uniform(0.55, 1.0, len(draft.events))
    station = random.uniform(0.7, 1.0, len(draft.stations))
    return np.asarray(event[draft.event_index] * station[draft.station_index])


def _at_times(events: Events, random: np.random.Generator) -> Events:
    days = np.sort(random.uniform(0.0, 365.25 * YEARS, len(events)))
    late = np.round(days * 86400e3).astype("timedelta64[ms]")
    return replace(events, time=np.datetime64("2018-05-01", "ns") + late)


def structure_s(draft: Draft, geometry: Geometry, random: np.random.Generator) -> Floats:
    """Smooth random delays, RMS of 0.3 to 0.5 s about the mean of each event."""
    wanted_s = random.uniform(*STRUCTURE_RMS_S)
    points_km = _crossings_km(draft, geometry)
    delay_s = np.zeros(len(draft.travel_s))
    for depth in range(len(DEPTHS_KM)):
        correlation_km = random.uniform(*CORRELATION_KM)
        waves = random.normal(0.0, 1.0 / correlation_km, (WAVES, 2))
        phases = random.uniform(0.0, 2.0 * np.pi, WAVES)
        delay_s += np.cos(points_km[depth] @ waves.T + phases).sum(axis=1)
    means = np.bincount(draft.event_index, delay_s) / np.bincount(draft.event_index)
    delay_s -= delay_s.mean()
    return delay_s * wanted_s / float(np.std(delay_s - means[draft.event_index] + delay_s.mean()))


def _crossings_km(draft: Draft, geometry: Geometry) -> Floats:
    """East and north of the points where rays cross each depth, shape (depths, n, 2)."""
    stations = draft.stations
    latitude_deg = float(np.median(stations.latitude_deg))
    scale = np.cos(np.radians(latitude_deg))
    apart_deg = stations.longitude_deg - np.median(stations.longitude_deg)
    east = KM_PER_DEGREE * scale * ((apart_deg + 180.0) % 360.0 - 180.0)
    north = KM_PER_DEGREE * (stations.latitude_deg - latitude_deg)
    place = np.stack([east, north], axis=1)[draft.station_index]
    sine = draft.slowness_s_per_km * MANTLE_KM_S
    tangent = sine / np.sqrt(1.0 - sine**2)
    angle = np.radians(geometry.back_azimuth_deg)
    lean = tangent[:, np.newaxis] * np.stack([np.sin(angle), np.cos(angle)], axis=1)
    return np.asarray(place + DEPTHS_KM[:, np.newaxis, np.newaxis] * lean)


def _catalogue_s(draft: Draft, geometry: Geometry, random: np.random.Generator) -> Floats:
    """Delays due to the usual errors of a catalogue, to first order."""
    count = len(draft.events)
    east_km, north_km = random.normal(0.0, EPICENTRE_ERROR_KM, (2, count))
    down_km = random.normal(0.0, DEPTH_ERROR_KM, count)
    origin_s = random.normal(0.0, ORIGIN_ERROR_S, count)
    event = draft.event_index
    azimuth = np.radians(geometry.azimuth_deg)
    towards_km = east_km[event] * np.sin(azimuth) + north_km[event] * np.cos(azimuth)
    late_s = origin_s[event] - VERTICAL_SLOWNESS_S_PER_KM * down_km[event]
    return np.asarray(late_s - draft.slowness_s_per_km * towards_km)


@cache
def _whole(number: int) -> tuple[Draft, Geometry]:
    """One of the geometries, every station recording every event, without any delay."""
    random = np.random.default_rng([number, 43])
    stations = _network(*CENTRES_DEG[number % len(CENTRES_DEG)], random)
    events = _events(*CENTRES_DEG[number % len(CENTRES_DEG)], random)
    pairs = np.indices((len(events), len(stations)))
    event_index, station_index = (index.ravel() for index in pairs)
    phase = np.full(len(event_index), "P")
    geometry = pair_geometry(events, stations, event_index, station_index)
    predicted_s = _predicted_s(stations, events, event_index, station_index, phase)
    parameter = earth().ray_parameter("P", geometry.distance_deg, 33.0)
    draft = Draft(
        stations=stations,
        events=events,
        event_index=event_index,
        station_index=station_index,
        phase=phase,
        travel_s=predicted_s,
        uncertainty_s=np.full(len(phase), 0.1),
        predicted_s=predicted_s,
        slowness_s_per_km=parameter / EARTH_RADIUS_KM,
    )
    return draft, geometry


def _network(latitude_deg: float, longitude_deg: float, random: np.random.Generator) -> Stations:
    """Draw a jittered grid of 45 to 80 stations, some 55 km apart."""
    columns, rows = random.integers(7, 10), random.integers(6, 9)
    x, y = (index.ravel().astype(float) for index in np.indices((columns, rows)))
    east = 0.5 * (x - x.mean() + random.uniform(-0.35, 0.35, len(x)))
    north = 0.5 * (y - y.mean() + random.uniform(-0.35, 0.35, len(x)))
    return Stations(
        network=np.full(len(x), "QX"),
        station=np.array([f"S{number:02d}" for number in range(len(x))]),
        latitude_deg=np.round(latitude_deg + north, 4),
        longitude_deg=np.round(longitude_deg + east / np.cos(np.radians(latitude_deg)), 4),
        elevation_m=np.round(random.uniform(0.0, 2000.0, len(x))),
    )


def _events(latitude_deg: float, longitude_deg: float, random: np.random.Generator) -> Events:
    """90 to 130 events, two thirds on five belts, the others anywhere."""
    count = int(random.integers(90, 131))
    belt = np.where(random.uniform(size=count) < 0.66, random.integers(0, 5, count), -1)
    first, along = random.uniform(0.0, 360.0, 5), random.uniform(25.0, 45.0, 5)
    near, farther = random.uniform(36.0, 75.0, 5), random.uniform(-10.0, 12.0, 5)
    share = random.uniform(size=count)
    azimuth_deg = np.where(
        belt >= 0, first[belt] + share * along[belt], random.uniform(0.0, 360.0, count)
    )
    distance_deg = np.where(
        belt >= 0, near[belt] + share * farther[belt], random.uniform(34.0, 88.0, count)
    )
    distance_deg = np.clip(distance_deg + random.normal(0.0, 1.5, count), 33.0, 90.0)
    longitude, latitude = _at(latitude_deg, longitude_deg, azimuth_deg, distance_deg)
    deep = random.uniform(size=count) < 0.3
    return Events(
        event=np.array([f"E{number:03d}" for number in range(count)]),
        time=np.full(count, np.datetime64("2018-05-01", "ns")),
        latitude_deg=np.round(latitude, 3),
        longitude_deg=np.round(longitude, 3),
        depth_km=np.round(
            np.where(deep, random.uniform(60.0, 600.0, count), random.uniform(5.0, 50.0, count)),
            1,
        ),
    )


def _at(
    latitude_deg: float, longitude_deg: float, azimuth_deg: Floats, distance_deg: Floats
) -> tuple[Floats, Floats]:
    """Longitude and latitude at an azimuth and a distance."""
    start, angle, arc = np.radians(latitude_deg), np.radians(azimuth_deg), np.radians(distance_deg)
    sine = np.sin(start) * np.cos(arc) + np.cos(start) * np.sin(arc) * np.cos(angle)
    east = np.arctan2(
        np.sin(angle) * np.sin(arc) * np.cos(start), np.cos(arc) - np.sin(start) * sine
    )
    longitude = (longitude_deg + np.degrees(east) + 180.0) % 360.0 - 180.0
    return longitude, np.degrees(np.arcsin(sine))


def _predicted_s(
    stations: Stations,
    events: Events,
    event_index: Integers,
    station_index: Integers,
    phase: NDArray[np.str_],
) -> Floats:
    geometry = pair_geometry(events, stations, event_index, station_index)
    parts = predict(
        earth(),
        events,
        stations,
        event_index,
        station_index,
        phase,
        geometry,
        ellipticity=True,
        elevation=True,
    )
    return parts.total_s

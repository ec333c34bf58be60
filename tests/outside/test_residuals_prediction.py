"""Predicted times against references that share no code with the package."""

from __future__ import annotations

import warnings

import numpy as np
import pytest

from rayloom.earth import ReferenceEarth
from rayloom.residuals import Residuals, ResidualSettings, compute_residuals
from rayloom.survey import Events, Picks, Stations, Survey

with warnings.catch_warnings():
    warnings.simplefilter("ignore", DeprecationWarning)
    from ellipticipy import ellipticity_correction
    from obspy.geodetics import locations2degrees
    from obspy.taup import TauPyModel

STATIONS = Stations(
    network=np.full(4, "XA"),
    station=np.array(["HIGH", "SEA", "DEEP", "PLAIN"]),
    latitude_deg=np.array([-31.0, 12.4, 62.3, 40.0]),
    longitude_deg=np.array([12.0, 140.2, -150.4, -100.0]),
    elevation_m=np.array([4200.0, -5300.0, 800.0, 0.0]),
    burial_m=np.array([0.0, 0.0, 1500.0, 0.0]),
)
EVENTS = Events(
    event=np.array(["a", "b", "c", "d", "e"]),
    time=np.full(5, np.datetime64("2019-03-07T04:05:04", "ns")),
    latitude_deg=np.array([-6.1438, 51.7697, -29.1363, -17.9867, 41.7914]),
    longitude_deg=np.array([-79.034, -175.4021, -72.4157, -178.0502, 146.9]),
    depth_km=np.array([0.0, 59.0, 16.9, 522.1, 213.3]),
)
SURFACE_KM_S = {"P": 5.8, "S": 3.46}
EARTH_RADIUS_KM = 6371.0


def geocentric_deg(geographic_deg: np.ndarray) -> np.ndarray:
    """tan(geocentric) = (1 - f)^2 tan(geographic), f of WGS84 (textbook formula)."""
    shrink = (1.0 - 1.0 / 298.257223563) ** 2
    return np.degrees(np.arctan(shrink * np.tan(np.radians(geographic_deg))))


def azimuth_deg(from_lat: float, from_lon: float, to_lat: float, to_lon: float) -> float:
    """Spherical azimuth by the textbook four-parts formula."""
    one, other, step = np.radians([from_lat, to_lat, to_lon - from_lon])
    east = np.sin(step) * np.cos(other)
    north = np.cos(one) * np.sin(other) - np.sin(one) * np.cos(other) * np.cos(step)
    return float(np.degrees(np.arctan2(east, north)) % 360.0)


@pytest.fixture(scope="module")
def residuals() -> Residuals:
    """P and S of all pairs inside the usual windows, all picked 900 s after the origin."""
    event_index = np.repeat(np.arange(5), 8)
    station_index = np.tile(np.repeat(np.arange(4), 2), 5)
    picks = Picks(
        event_index=event_index,
        station_index=station_index,
        phase=np.tile(["P", "S"], 20),
        time=EVENTS.time[event_index] + np.timedelta64(900, "s"),
        uncertainty_s=np.full(40, 0.1),
    )
    settings = ResidualSettings(min_picks_per_event=2, max_residual_s=1e4)
    return compute_residuals(Survey(STATIONS, EVENTS, picks), ReferenceEarth("ak135"), settings)


@pytest.fixture(scope="module")
def reference() -> TauPyModel:
    return TauPyModel("ak135")


def test_distances_and_azimuths(residuals: Residuals) -> None:
    """Distance of obspy.geodetics.locations2degrees on geocentric latitudes."""
    event_lat, station_lat = (
        geocentric_deg(EVENTS.latitude_deg),
        geocentric_deg(STATIONS.latitude_deg),
    )
    assert len(residuals) >= 12
    for row, (event, station) in enumerate(
        zip(residuals.event_index, residuals.station_index, strict=True)
    ):
        ends = (
            event_lat[event],
            EVENTS.longitude_deg[event],
            station_lat[station],
            STATIONS.longitude_deg[station],
        )
        assert residuals.distance_deg[row] == pytest.approx(locations2degrees(*ends), abs=1e-6)
        there, back = azimuth_deg(*ends), azimuth_deg(*ends[2:], *ends[:2])
        assert residuals.azimuth_deg[row] % 360.0 == pytest.approx(there, abs=1e-8)
        assert residuals.back_azimuth_deg[row] % 360.0 == pytest.approx(back, abs=1e-8)


def test_predicted_times_within_10_ms(residuals: Residuals, reference: TauPyModel) -> None:
    """obspy.taup (ak135) + ellipticipy + h sqrt(1/v^2 - p^2/R^2), together within 10 ms."""
    for row in range(len(residuals)):
        event = residuals.event_index[row]
        phase = str(residuals.phase[row])
        arrival = reference.get_ray_paths(
            source_depth_in_km=EVENTS.depth_km[event],
            distance_in_degree=residuals.distance_deg[row],
            phase_list=[phase],
        )[0]
        ellipticity_s = ellipticity_correction(
            arrival,
            azimuth=residuals.azimuth_deg[row],
            source_latitude=float(geocentric_deg(EVENTS.latitude_deg[event])),
        )
        slowness = np.sqrt(
            1.0 / SURFACE_KM_S[phase] ** 2 - (arrival.ray_param / EARTH_RADIUS_KM) ** 2
        )
        station = residuals.station_index[row]
        height_km = (STATIONS.elevation_m[station] - STATIONS.burial_m[station]) / 1000.0
        expected_s = arrival.time + ellipticity_s + height_km * slowness
        assert residuals.ellipticity_s[row] == pytest.approx(ellipticity_s, abs=0.01)
        assert residuals.elevation_s[row] == pytest.approx(height_km * slowness, abs=0.002)
        assert residuals.predicted_s[row] == pytest.approx(expected_s, abs=0.01)
        assert residuals.residual_s[row] == pytest.approx(900.0 - expected_s, abs=0.01)


def test_elevation_term_equals_a_ray_traced_to_a_buried_receiver(
    residuals: Residuals, reference: TauPyModel
) -> None:
    """obspy.taup's receiver depth, for the two sensors below sea level, within 10 ms."""
    checked = 0
    for row in range(len(residuals)):
        depth_km = STATIONS.depth_km[residuals.station_index[row]]
        if depth_km <= 0.0:
            continue
        arrival = reference.get_travel_times(
            source_depth_in_km=EVENTS.depth_km[residuals.event_index[row]],
            distance_in_degree=residuals.distance_deg[row],
            phase_list=[str(residuals.phase[row])],
            receiver_depth_in_km=depth_km,
        )[0]
        sphere_s = residuals.predicted_s[row] - residuals.ellipticity_s[row]
        assert sphere_s == pytest.approx(arrival.time, abs=0.01)
        checked += 1
    assert checked >= 6

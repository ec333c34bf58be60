"""Stations that stand far from the network are pointed at, ordinary ones are not."""

from __future__ import annotations

import warnings

import numpy as np
import pytest

from rayloom.survey import Stations
from rayloom.survey.network import remote_stations
from rayloom.units import KM_PER_DEGREE

with warnings.catch_warnings():
    warnings.simplefilter("ignore", DeprecationWarning)
    from obspy.geodetics import locations2degrees


def network(
    seed: int, count: int, *, span_deg: float = 5.0, latitude_deg: float = 40.0
) -> Stations:
    random = np.random.default_rng(seed)
    return Stations(
        network=np.full(count, "XA"),
        station=np.array([f"S{number:03d}" for number in range(count)]),
        latitude_deg=latitude_deg + random.uniform(0.0, span_deg, count),
        longitude_deg=random.uniform(0.0, span_deg, count) / np.cos(np.radians(latitude_deg)),
        elevation_m=np.zeros(count),
    )


def with_stray(stations: Stations, latitude_deg: float, longitude_deg: float) -> Stations:
    return Stations(
        network=np.append(stations.network, "XB"),
        station=np.append(stations.station, "FAR"),
        latitude_deg=np.append(stations.latitude_deg, latitude_deg),
        longitude_deg=np.append(stations.longitude_deg, longitude_deg),
        elevation_m=np.append(stations.elevation_m, 0.0),
    )


@pytest.mark.parametrize(("count", "span_deg"), [(12, 2.0), (60, 5.0), (300, 5.0)])
def test_station_400_km_outside_is_named_with_its_distance(count: int, span_deg: float) -> None:
    """The distance printed is that of obspy.geodetics.locations2degrees."""
    stations = network(1, count, span_deg=span_deg)
    stray = with_stray(stations, 40.0 + span_deg + 400.0 / KM_PER_DEGREE, 0.6 * span_deg)
    notices = remote_stations(stray)
    assert [notice.who for notice in notices] == ["XB.FAR"]
    nearest_deg = locations2degrees(
        stray.latitude_deg[-1],
        stray.longitude_deg[-1],
        stations.latitude_deg,
        stations.longitude_deg,
    ).min()
    assert f"lies {nearest_deg * KM_PER_DEGREE:.0f} km from its nearest" in notices[0].detail
    assert notices[0].severity == "warning"


def test_zero_coordinates_are_named() -> None:
    assert len(remote_stations(with_stray(network(2, 40), 0.0, 0.0))) == 1


@pytest.mark.parametrize("latitude_deg", [-85.0, 0.0, 60.0, 84.0])
def test_ordinary_networks_raise_no_remark(latitude_deg: float) -> None:
    remarks = [
        remote_stations(network(seed, count, latitude_deg=latitude_deg))
        for seed in range(10)
        for count in (3, 10, 60, 400)
    ]
    assert not any(remarks)


def test_network_across_the_date_line_is_one() -> None:
    stations = network(3, 50, latitude_deg=10.0)
    longitude_deg = (stations.longitude_deg + 177.0 + 180.0) % 360.0 - 180.0
    assert longitude_deg.min() < 0.0 < longitude_deg.max()
    moved = Stations(
        network=stations.network,
        station=stations.station,
        latitude_deg=stations.latitude_deg,
        longitude_deg=longitude_deg,
        elevation_m=stations.elevation_m,
    )
    assert remote_stations(moved) == []


def test_epochs_at_one_place_count_as_one_site() -> None:
    stations = network(4, 30)
    twice = stations.select(np.repeat(np.arange(30), 2))
    assert remote_stations(twice) == []
    stray = with_stray(twice, 60.0, 3.0)
    assert [notice.who for notice in remote_stations(stray)] == ["XB.FAR"]

"""The highland's network and its earthquakes are as announced.

Distances are checked with obspy.geodetics (WGS84 geodesics and great circles),
which shares no code with the frame that placed the points.
"""

from __future__ import annotations

import warnings

import numpy as np
import pytest

from rayloom.demo.highland import (
    CENTRE_LATITUDE_DEG,
    CENTRE_LONGITUDE_DEG,
    highland_stations,
    to_geographic,
    to_map_km,
)
from rayloom.demo.places import PLACES
from rayloom.demo.seismicity import BELTS, draw_seismicity
from rayloom.errors import InputError

with warnings.catch_warnings():
    warnings.simplefilter("ignore", DeprecationWarning)
    from obspy.geodetics import gps2dist_azimuth, locations2degrees


@pytest.fixture(scope="module")
def seismicity():
    return draw_seismicity(120, np.random.default_rng(11))


def geodesic_km(latitude_1, longitude_1, latitude_2, longitude_2):
    return gps2dist_azimuth(latitude_1, longitude_1, latitude_2, longitude_2)[0] / 1000.0


def test_codes_and_names_are_unique():
    assert len(PLACES) == 60
    assert len({place.code for place in PLACES}) == 60
    assert len({place.name for place in PLACES}) == 60
    assert all(3 <= len(place.code) <= 5 for place in PLACES)


def test_aperture_is_300_to_400_km():
    stations = highland_stations()
    sites = list(zip(stations.latitude_deg, stations.longitude_deg, strict=True))
    aperture_km = max(geodesic_km(*a, *b) for a in sites for b in sites)
    assert 300.0 < aperture_km < 400.0


def test_map_positions_are_distances_on_the_ground():
    stations = highland_stations()
    for place, latitude, longitude in zip(
        PLACES, stations.latitude_deg, stations.longitude_deg, strict=True
    ):
        from_centre_km = geodesic_km(
            CENTRE_LATITUDE_DEG, CENTRE_LONGITUDE_DEG, latitude, longitude
        )
        # The ellipsoid differs from the sphere by at most its flattening, 1/298.
        assert from_centre_km == pytest.approx(np.hypot(place.east_km, place.north_km), rel=0.006)


def test_east_and_north_point_east_and_north():
    longitude, latitude = to_geographic(np.array([0.0, 100.0]), np.array([100.0, 0.0]))
    assert longitude[0] == pytest.approx(CENTRE_LONGITUDE_DEG)
    assert latitude[0] > CENTRE_LATITUDE_DEG + 0.8
    assert longitude[1] > CENTRE_LONGITUDE_DEG + 1.1
    assert latitude[1] == pytest.approx(CENTRE_LATITUDE_DEG, abs=0.02)
    east_km, north_km = to_map_km(longitude, latitude)
    np.testing.assert_allclose(east_km, [0.0, 100.0], atol=1e-6)
    np.testing.assert_allclose(north_km, [100.0, 0.0], atol=1e-6)


def test_land_is_uneven():
    """The bay in the south-west is empty, the volcano is surrounded."""
    east = np.array([place.east_km for place in PLACES])
    north = np.array([place.north_km for place in PLACES])
    assert not np.any((east < -95.0) & (north < -30.0))
    near_volcano = np.hypot(east - PLACES[0].east_km, north - PLACES[0].north_km) < 60.0
    assert near_volcano.sum() >= 12
    assert PLACES[0].elevation_m == max(place.elevation_m for place in PLACES)


def test_small_network_keeps_the_width():
    stations = highland_stations(14)
    east_km, north_km = to_map_km(stations.longitude_deg, stations.latitude_deg)
    assert len(stations) == 14
    assert np.ptp(east_km) > 280.0
    assert np.ptp(north_km) > 280.0


@pytest.mark.parametrize("count", [0, 2, 61])
def test_wrong_station_count_is_refused(count):
    with pytest.raises(InputError, match="3 to 60 stations"):
        highland_stations(count)


def test_every_station_sees_every_event_between_28_and_95_degrees(seismicity):
    stations, true = highland_stations(), seismicity.true
    distance_deg = locations2degrees(
        true.latitude_deg[:, np.newaxis],
        true.longitude_deg[:, np.newaxis],
        stations.latitude_deg,
        stations.longitude_deg,
    )
    assert distance_deg.min() >= 28.0
    assert distance_deg.max() <= 95.0


def test_events_are_uneven_in_azimuth_and_depth(seismicity):
    true = seismicity.true
    azimuth_deg = np.array(
        [
            gps2dist_azimuth(CENTRE_LATITUDE_DEG, CENTRE_LONGITUDE_DEG, latitude, longitude)[1]
            for latitude, longitude in zip(true.latitude_deg, true.longitude_deg, strict=True)
        ]
    )
    quarters, _ = np.histogram(azimuth_deg, bins=4, range=(0.0, 360.0))
    assert quarters.max() > 3 * quarters.min()
    assert quarters.min() >= 5
    assert true.depth_km.min() >= 5.0
    assert 400.0 < true.depth_km.max() <= 600.0
    assert set(seismicity.region) == {belt.name for belt in BELTS}


def test_events_come_in_order_of_time_with_unique_names(seismicity):
    assert np.all(np.diff(seismicity.true.time) > np.timedelta64(0, "ns"))
    assert len(set(seismicity.true.event)) == 120
    np.testing.assert_array_equal(seismicity.true.event, seismicity.catalogue.event)


def test_catalogue_errors_have_the_announced_size():
    """Over 2,000 events; bounds are 5 standard errors of a normal sample's deviation."""
    drawn = draw_seismicity(2000, np.random.default_rng(5))
    true, catalogue = drawn.true, drawn.catalogue
    off_km = np.array(
        [
            geodesic_km(*row)
            for row in zip(
                true.latitude_deg,
                true.longitude_deg,
                catalogue.latitude_deg,
                catalogue.longitude_deg,
                strict=True,
            )
        ]
    )
    assert np.sqrt(np.mean(off_km**2)) == pytest.approx(7.0 * np.sqrt(2.0), rel=0.08)
    origin_s = (catalogue.time - true.time) / np.timedelta64(1, "s")
    assert origin_s.std() == pytest.approx(np.hypot(0.6, 0.7), rel=0.09)
    deeper_km = catalogue.depth_km - true.depth_km
    assert deeper_km[true.depth_km > 60.0].std() == pytest.approx(7.0, rel=0.16)
    assert np.all(catalogue.depth_km >= 1.0)
    assert np.corrcoef(deeper_km, origin_s)[0, 1] > 0.5

"""Frame against spherical trigonometry, published constants and obspy."""

import numpy as np
import pytest

from rayloom.model import Frame

obspy_geodetics = pytest.importorskip("obspy.geodetics")

WGS84_A_M, WGS84_B_M = 6378137.0, 6356752.314245
RADIUS_KM = 6371.0
TURNED = Frame(longitude=-150.0, latitude=70.0, azimuth_deg=25.0)


def geocentric_deg(latitude_deg):
    """Geocentric latitude, tan φ′ = (b/a)² tan φ (any textbook of geodesy), WGS84 axes."""
    return np.degrees(np.arctan((WGS84_B_M / WGS84_A_M) ** 2 * np.tan(np.radians(latitude_deg))))


def azimuth_deg(longitude, latitude, to_longitude, to_latitude):
    """Return the azimuth of a great circle (four-part formula, any textbook), in degrees."""
    degrees = np.broadcast_arrays(longitude, latitude, to_longitude, to_latitude)
    lon, lat, lon2, lat2 = np.radians(degrees)
    east = np.sin(lon2 - lon) * np.cos(lat2)
    north = np.cos(lat) * np.sin(lat2) - np.sin(lat) * np.cos(lat2) * np.cos(lon2 - lon)
    return np.degrees(np.arctan2(east, north))


def wrapped(degrees):
    return np.mod(np.asarray(degrees) + 180.0, 360.0) - 180.0


def scattered(frame, count=40, reach=12.0):
    generator = np.random.default_rng(5)
    x, y = generator.uniform(-reach, reach, (2, count))
    longitude, latitude = frame.geographic_coordinates(x, y)
    return x, y, longitude, geocentric_deg(latitude)


def test_geocentric_latitude_differs_by_11_5_minutes_at_45_degrees():
    """Largest difference of geographic and geocentric latitude: 11.5′ near 45° (Torge 2001)."""
    _, y = Frame(longitude=0.0, latitude=0.0).local_coordinates(0.0, 45.0)
    assert (45.0 - y) * 60.0 == pytest.approx(11.5, abs=0.05)
    assert y == pytest.approx(geocentric_deg(45.0), abs=1e-10)


@pytest.mark.parametrize("latitude", [-31.0, 0.0, 70.0])
def test_distances_from_the_centre_agree_with_obspy(latitude):
    """obspy.geodetics.locations2degrees, given geocentric latitudes."""
    frame = Frame(longitude=179.0, latitude=latitude, azimuth_deg=40.0)
    x, y, longitude, geocentric = scattered(frame)
    expected = obspy_geodetics.locations2degrees(
        geocentric_deg(latitude), 179.0, geocentric, longitude
    )
    found = np.degrees(np.arccos(np.cos(np.radians(x)) * np.cos(np.radians(y))))
    np.testing.assert_allclose(found, expected, atol=1e-9)


def test_chords_follow_the_cosine_rule():
    """c² = r1² + r2² − 2 r1 r2 cos Δ, with Δ from obspy.geodetics.locations2degrees."""
    x, y, longitude, geocentric = scattered(TURNED)
    depth = np.linspace(-4.0, 660.0, x.size)
    points = np.stack([x, y, depth], axis=-1)
    arc = np.radians(
        obspy_geodetics.locations2degrees(
            geocentric[:-1], longitude[:-1], geocentric[1:], longitude[1:]
        )
    )
    first, second = RADIUS_KM - depth[:-1], RADIUS_KM - depth[1:]
    expected = np.sqrt(first**2 + second**2 - 2.0 * first * second * np.cos(arc))
    np.testing.assert_allclose(TURNED.chord_km(points[:-1], points[1:]), expected, rtol=1e-9)
    enu = TURNED.enu_km(points)
    np.testing.assert_allclose(np.linalg.norm(np.diff(enu, axis=0), axis=1), expected, rtol=1e-9)


def test_east_north_up_of_a_point_from_its_azimuth_and_distance():
    """East = r sin Δ sin α, north = r sin Δ cos α, up = r cos Δ − R (spherical trigonometry)."""
    x, y, longitude, geocentric = scattered(TURNED)
    centre = -150.0, geocentric_deg(70.0)
    azimuth = np.radians(azimuth_deg(*centre, longitude, geocentric))
    arc = np.radians(
        obspy_geodetics.locations2degrees(centre[1], centre[0], geocentric, longitude)
    )
    radius = RADIUS_KM - 100.0
    expected = np.stack(
        [
            radius * np.sin(arc) * np.sin(azimuth),
            radius * np.sin(arc) * np.cos(azimuth),
            radius * np.cos(arc) - RADIUS_KM,
        ],
        axis=-1,
    )
    found = TURNED.enu_km(np.stack([x, y, np.full_like(x, 100.0)], axis=-1))
    np.testing.assert_allclose(found, expected, atol=1e-6)


def test_grid_north_at_70_degrees_points_to_the_frame_pole():
    """The y axis runs to the point 90° from the centre along the frame's azimuth.

    That point by the direct problem of spherical trigonometry, the azimuth to it by the
    four-part formula (any textbook).
    """
    centre_latitude, azimuth = np.radians([geocentric_deg(70.0), 25.0])
    pole_latitude = np.arcsin(np.cos(centre_latitude) * np.cos(azimuth))
    pole_longitude = np.radians(-150.0) + np.arctan2(
        np.sin(azimuth) * np.cos(centre_latitude), -np.sin(centre_latitude) * np.sin(pole_latitude)
    )
    x, y, longitude, geocentric = scattered(TURNED)
    expected = azimuth_deg(
        longitude, geocentric, np.degrees(pole_longitude), np.degrees(pole_latitude)
    )
    found = TURNED.y_axis_azimuth_deg(x, y)
    np.testing.assert_allclose(wrapped(found - expected), 0.0, atol=1e-9)
    assert np.ptp(wrapped(found - 25.0)) > 30.0  # taking it for the centre's would be far off


def test_convergence_along_the_x_axis_obeys_clairaut():
    """On the great circle x the product cos φ′ sin α keeps its value (Clairaut)."""
    frame = Frame(longitude=-150.0, latitude=70.0)
    x = np.array([-10.0, -3.0, 4.0, 10.0])
    _, latitude = frame.geographic_coordinates(x, 0.0)
    course = np.radians(frame.y_axis_azimuth_deg(x, 0.0) + 90.0)
    np.testing.assert_allclose(
        np.cos(np.radians(geocentric_deg(latitude))) * np.sin(course),
        np.cos(np.radians(geocentric_deg(70.0))),
        atol=1e-12,
    )


def test_directions_between_points_agree_with_obspy():
    """obspy.geodetics.gps2dist_azimuth on a sphere (f = 0) gives the azimuth from a to b."""
    x, y, longitude, geocentric = scattered(TURNED, count=12)
    for here in range(0, 12, 2):
        there = here + 1
        _, azimuth, _ = obspy_geodetics.gps2dist_azimuth(
            geocentric[here],
            longitude[here],
            geocentric[there],
            longitude[there],
            a=RADIUS_KM * 1000.0,
            f=0.0,
        )
        direction = TURNED.grid_direction_deg(x[here], y[here], azimuth)
        expected = azimuth_deg(x[here], y[here], x[there], y[there])
        assert wrapped(direction - expected) == pytest.approx(0.0, abs=1e-5)

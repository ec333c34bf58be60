"""Frame: local coordinates, curved positions, directions."""

import pickle

import numpy as np
import pytest

from rayloom.errors import InputError
from rayloom.model import Frame

PLACES = [
    {"longitude": 12.0, "latitude": -31.0},
    {"longitude": -150.0, "latitude": 65.0, "azimuth_deg": 30.0},
    {"longitude": 179.5, "latitude": 0.0, "azimuth_deg": -110.0},
    {"longitude": 20.0, "latitude": 90.0, "azimuth_deg": 10.0},
]


@pytest.mark.parametrize("place", PLACES)
def test_local_and_geographic_coordinates_are_inverse(place):
    frame = Frame(**place)
    generator = np.random.default_rng(1)
    x, y = generator.uniform(-40, 40, (2, 200))
    longitude, latitude = frame.geographic_coordinates(x, y)
    back_x, back_y = frame.local_coordinates(longitude, latitude)
    np.testing.assert_allclose(back_x, x, atol=1e-11)
    np.testing.assert_allclose(back_y, y, atol=1e-11)


@pytest.mark.parametrize("place", PLACES)
def test_centre_is_the_origin(place):
    x, y = Frame(**place).local_coordinates(place["longitude"], place["latitude"])
    np.testing.assert_allclose([x, y], 0.0, atol=1e-12)


def test_longitudes_of_any_turn_are_the_same_place():
    frame = Frame(longitude=179.0, latitude=60.0)
    np.testing.assert_allclose(
        frame.local_coordinates([190.0, -170.0, 550.0], 61.0),
        np.broadcast_to(np.reshape(frame.local_coordinates(-170.0, 61.0), (2, 1)), (2, 3)),
        atol=1e-11,
    )


def test_azimuth_turns_the_frame_clockwise():
    frame = Frame(longitude=10.0, latitude=0.0, azimuth_deg=90.0)
    x, y = frame.local_coordinates([11.0, 10.0], [0.0, 1.0])
    assert y[0] == pytest.approx(1.0)  # east of the centre lies along +y
    assert x[1] < 0.0  # north of it along −x
    np.testing.assert_allclose(y[1], 0.0, atol=1e-12)


def test_enu_directions_are_geographic_whatever_the_azimuth():
    generator = np.random.default_rng(2)
    longitude, latitude = generator.uniform(5, 15, 50), generator.uniform(40, 50, 50)
    depth = generator.uniform(-3, 600, 50)
    found = []
    for azimuth in (0.0, 37.0, -120.0):
        frame = Frame(longitude=10.0, latitude=45.0, azimuth_deg=azimuth)
        x, y = frame.local_coordinates(longitude, latitude)
        found.append(frame.enu_km(np.stack([x, y, depth], axis=-1)))
    np.testing.assert_allclose(found[1], found[0], atol=1e-8)
    np.testing.assert_allclose(found[2], found[0], atol=1e-8)


def test_enu_of_the_centre_column_is_straight_down():
    enu = Frame(longitude=10.0, latitude=45.0).enu_km([[0.0, 0.0, -2.5], [0.0, 0.0, 400.0]])
    np.testing.assert_allclose(enu, [[0.0, 0.0, 2.5], [0.0, 0.0, -400.0]], atol=1e-9)


def test_flat_frame_is_cartesian():
    frame = Frame.flat()
    points = np.array([[1.0, 2.0, 3.0], [4.0, 6.0, 3.0]])
    np.testing.assert_array_equal(frame.enu_km(points), points * [1, 1, -1])
    assert frame.chord_km(points[0], points[1]) == pytest.approx(5.0)
    assert frame.coordinate_unit == "km"


@pytest.mark.parametrize(
    "call",
    [
        lambda frame: frame.local_coordinates(0.0, 0.0),
        lambda frame: frame.geographic_coordinates(0.0, 0.0),
        lambda frame: frame.unit_vectors(0.0, 0.0),
        lambda frame: frame.y_axis_azimuth_deg(0.0, 0.0),
    ],
)
def test_flat_frame_refuses_geography(call):
    with pytest.raises(InputError, match="flat frame has no longitudes"):
        call(Frame.flat())


@pytest.mark.parametrize(
    ("place", "where"),
    [
        ({"longitude": np.nan, "latitude": 0.0}, "longitude"),
        ({"longitude": 0.0, "latitude": 91.0}, "latitude"),
        ({"longitude": 0.0, "latitude": 0.0, "azimuth_deg": np.inf}, "azimuth_deg"),
    ],
)
def test_impossible_place_is_refused_by_name(place, where):
    with pytest.raises(InputError) as caught:
        Frame(**place)
    assert caught.value.where == where


def test_impossible_coordinates_are_refused():
    frame = Frame(longitude=0.0, latitude=0.0)
    with pytest.raises(InputError, match="latitude_deg"):
        frame.local_coordinates([0.0, 0.0], [0.0, np.nan])
    with pytest.raises(InputError, match="longitude_deg"):
        frame.local_coordinates(np.nan, 0.0)
    with pytest.raises(InputError, match="last axis"):
        frame.enu_km([[1.0, 2.0]])


def test_frames_compare_and_travel():
    frame = Frame(longitude=-150.0, latitude=65.0, azimuth_deg=30.0)
    assert pickle.loads(pickle.dumps(frame)) == frame
    assert Frame(longitude=0.0, latitude=0.0) != Frame.flat()
    with pytest.raises(AttributeError):
        frame.latitude_deg = 3.0


def test_a_step_along_a_grid_direction_goes_where_the_azimuth_says():
    """Finite differences of the coordinates themselves, at 70° and with a turned frame."""
    frame = Frame(longitude=-150.0, latitude=70.0, azimuth_deg=25.0)
    x, y = np.array([-12.0, 0.0, 9.0]), np.array([6.0, 0.0, -8.0])
    step = 1e-4
    for azimuth in (0.0, 60.0, 200.0):
        direction = np.radians(frame.grid_direction_deg(x, y, azimuth))
        moved_x = x + step * np.sin(direction) / np.cos(np.radians(y))
        moved_y = y + step * np.cos(direction)
        longitude, latitude = frame.geographic_coordinates(x, y)
        new_longitude, new_latitude = frame.geographic_coordinates(moved_x, moved_y)
        geocentric = np.radians([_geocentric(latitude), _geocentric(new_latitude)])
        east = (new_longitude - longitude) * np.cos(geocentric[0])
        north = np.degrees(geocentric[1] - geocentric[0])
        off = np.degrees(np.arctan2(east, north)) - azimuth
        np.testing.assert_allclose(np.mod(off + 180.0, 360.0) - 180.0, 0.0, atol=2e-3)


def _geocentric(latitude_deg):
    """Geocentric latitude: tan φ′ = (b/a)² tan φ (any textbook of geodesy)."""
    ratio = 6356752.314245 / 6378137.0
    return np.degrees(np.arctan(ratio**2 * np.tan(np.radians(latitude_deg))))

"""Model files read by a library that knows nothing of the model, after the CF conventions."""

import h5py
import numpy as np
import pytest

from rayloom.model import BlockGrid, Frame, SlownessModel


@pytest.fixture
def stored(tmp_path):
    grid = BlockGrid(
        Frame(longitude=-150.0, latitude=65.0, azimuth_deg=30.0),
        [-9.0, -7.0, 4.0, 6.0],
        [-4.0, -2.0, 6.0],
        [-3.0, 20.0, 35.0],
    )
    reference = np.full(grid.shape, 0.125)
    slowness = reference * (1.0 + np.arange(grid.block_count).reshape(grid.shape) / 1000.0)
    model = SlownessModel(grid, slowness, reference).with_fields(hits=np.ones(grid.shape))
    model.write_netcdf(tmp_path / "model.nc")
    with h5py.File(tmp_path / "model.nc", "r") as file:
        yield model, file


def words(value):
    return value.decode() if isinstance(value, bytes) else value


def test_values_lie_where_depth_y_x_say(stored):
    model, file = stored
    assert file["vp"].shape == (2, 2, 3)
    assert file["vp"][1, 0, 2] == 1.0 / model.slowness_s_per_km[2, 0, 1]
    assert file["dvp"][1, 0, 2] == pytest.approx(100.0 * (1.0 / 1.009 - 1.0))
    assert file["slowness"].dtype == np.float64
    np.testing.assert_array_equal(file["x_bounds"][:], [[-9, -7], [-7, 4], [4, 6]])
    np.testing.assert_array_equal(file["depth_bounds"][:], [[-3, 20], [20, 35]])
    np.testing.assert_array_equal(file["x"][:], [-8.0, -1.5, 5.0])


@pytest.mark.parametrize(
    ("variable", "attribute", "expected"),
    [
        ("depth", "positive", "down"),
        ("depth", "standard_name", "depth"),
        ("depth", "units", "km"),
        ("depth", "bounds", "depth_bounds"),
        ("x", "standard_name", "grid_longitude"),
        ("y", "standard_name", "grid_latitude"),
        ("longitude", "units", "degrees_east"),
        ("latitude", "units", "degrees_north"),
        ("vp", "units", "km s-1"),
        ("vp", "grid_mapping", "rotated_pole"),
        ("dvp", "units", "percent"),
        ("hits", "units", "1"),
        ("rotated_pole", "grid_mapping_name", "rotated_latitude_longitude"),
    ],
)
def test_attributes_of_the_conventions(stored, variable, attribute, expected):
    """CF-1.8 sections 3.1, 4.3, 5.6, 7.1 and appendix F."""
    _, file = stored
    assert words(file[variable].attrs[attribute]) == expected


def test_conventions_and_coordinates_are_declared(stored):
    """CF-1.8 sections 2.6.1 and 5."""
    _, file = stored
    assert words(file.attrs["Conventions"]) == "CF-1.8"
    assert set(words(file["vp"].attrs["coordinates"]).split()) == {"longitude", "latitude"}


def test_rotated_pole_agrees_with_proj(stored):
    """Places of x, y on the sphere, computed with PROJ 9.5.1 through pyproj 3.7.2.

    PROJ was given the grid mapping below by ``CRS.from_cf``; its latitudes are geocentric.
    """
    _, file = stored
    pole = file["rotated_pole"].attrs
    assert pole["grid_north_pole_latitude"] == pytest.approx(21.593592844036216, abs=1e-10)
    assert pole["grid_north_pole_longitude"] == pytest.approx(-2.529912675878506, abs=1e-10)
    assert pole["north_pole_grid_longitude"] == pytest.approx(-13.20962769655855, abs=1e-10)
    frame = Frame(longitude=-150.0, latitude=65.0, azimuth_deg=30.0)
    longitude, latitude = frame.geographic_coordinates([0.0, 5.0, -8.0], [0.0, -3.0, 7.0])
    ratio = 6356752.314245 / 6378137.0
    geocentric = np.degrees(np.arctan(ratio**2 * np.tan(np.radians(latitude))))
    np.testing.assert_allclose(longitude, [-150.0, -144.41458875179902, -162.7390752332971])
    np.testing.assert_allclose(
        geocentric, [64.85227613702457, 59.63025836594657, 74.56328737074062]
    )


@pytest.mark.parametrize(
    "place",
    [
        {"longitude": 37.0, "latitude": 0.0},
        {"longitude": 37.0, "latitude": 0.0, "azimuth_deg": 180.0},
        {"longitude": 20.0, "latitude": 0.0, "azimuth_deg": 90.0},
        {"longitude": 12.0, "latitude": 90.0, "azimuth_deg": 10.0},
        {"longitude": 179.0, "latitude": -42.0, "azimuth_deg": -75.0},
    ],
)
def test_rotated_pole_formula_gives_the_geographic_places(place):
    """Rotated to true latitude: sin φ = sin φr sin φp + cos φr cos λr cos φp.

    The usual transformation of rotated-pole grids in weather models (common practice),
    with λr counted from the true north pole's rotated longitude; poles and the equator
    are where such formulas lose their footing.
    """
    frame = Frame(**place)
    pole = frame.rotated_pole()
    generator = np.random.default_rng(6)
    x, y = generator.uniform(-30.0, 30.0, (2, 60))
    rotated_lon, rotated_lat = np.radians(x - pole.north_pole_x_deg), np.radians(y)
    pole_lat = np.radians(pole.latitude_deg)
    sine = np.sin(rotated_lat) * np.sin(pole_lat)
    sine += np.cos(rotated_lat) * np.cos(rotated_lon) * np.cos(pole_lat)
    east = -np.cos(rotated_lat) * np.sin(rotated_lon)
    north = np.sin(rotated_lat) * np.cos(pole_lat)
    north -= np.cos(rotated_lat) * np.cos(rotated_lon) * np.sin(pole_lat)
    expected = pole.longitude_deg + np.degrees(np.arctan2(east, north))
    longitude, latitude = frame.geographic_coordinates(x, y)
    ratio = 6356752.314245 / 6378137.0
    geocentric = np.arctan(ratio**2 * np.tan(np.radians(latitude)))
    np.testing.assert_allclose(np.sin(geocentric), sine, atol=1e-12)
    off = np.mod(longitude - expected + 180.0, 360.0) - 180.0
    np.testing.assert_allclose(off, 0.0, atol=1e-9)

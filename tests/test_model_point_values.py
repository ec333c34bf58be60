"""Starting models on longitude, latitude and depth, as other programs write them."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import xarray

from rayloom.errors import InputError
from rayloom.model import BlockGrid, Frame, SlownessModel, with_perturbation_of_file

FRAME = Frame(longitude=179.5, latitude=-31.0, azimuth_deg=25.0)
GRID = BlockGrid(FRAME, [-1.5, -0.5, 0.5, 1.5], [-1.0, 0.0, 1.0], [0.0, 40.0, 100.0])
LONGITUDE = np.arange(175.0, 185.0, 0.5)
LATITUDE = np.arange(-26.0, -36.5, -0.5)
DEPTH_KM = np.arange(0.0, 121.0, 10.0)


def model(wave: str = "P", speed: float = 8.0) -> SlownessModel:
    return SlownessModel(GRID, np.full(GRID.shape, 1.0 / speed), wave=wave)


def field(longitude, latitude, depth_km):
    """Percent, linear along each axis."""
    return 0.4 * (longitude - 179.5) - 0.3 * (latitude + 31.0) + 0.01 * depth_km


def dataset(values=None, *, name="dvp", units="percent", **coordinates) -> xarray.Dataset:
    axes = {"longitude": LONGITUDE, "latitude": LATITUDE, "depth": DEPTH_KM, **coordinates}
    mesh = np.meshgrid(LONGITUDE, LATITUDE, DEPTH_KM, indexing="ij")
    values = field(*mesh) if values is None else values
    made = xarray.DataArray(values, dims=tuple(axes), attrs={"units": units})
    return xarray.Dataset({name: made}, coords=axes)


def written(tmp_path: Path, made: xarray.Dataset) -> Path:
    path = tmp_path / "start.nc"
    made.to_netcdf(path, engine="h5netcdf")
    return path


def expected_percent() -> np.ndarray:
    """Give the field at the middle of each block, where a linear one has its mean."""
    x, y, depth = np.meshgrid(GRID.x_centres, GRID.y_centres, GRID.depth_centres_km, indexing="ij")
    longitude, latitude = FRAME.geographic_coordinates(x, y)
    return field(longitude % 360.0, latitude, depth)


def test_perturbations_across_the_date_line_and_falling_latitudes(tmp_path: Path) -> None:
    """Mean slowness of a field that is linear to 0.003 % within a block."""
    found = with_perturbation_of_file(model(), written(tmp_path, dataset()))
    np.testing.assert_allclose(found.perturbation_percent, expected_percent(), atol=0.01)
    assert np.ptp(found.perturbation_percent) > 1.0


@pytest.mark.parametrize(("units", "factor"), [("km/s", 1.0), ("m s-1", 1000.0)])
def test_velocities_are_set_against_the_reference(
    tmp_path: Path, units: str, factor: float
) -> None:
    mesh = np.meshgrid(LONGITUDE, LATITUDE, DEPTH_KM, indexing="ij")
    speed = 4.5 * (1.0 + field(*mesh) / 100.0) * factor
    path = written(tmp_path, dataset(speed, name="vs", units=units))
    found = with_perturbation_of_file(model("S", 4.5), path)
    np.testing.assert_allclose(found.perturbation_percent, expected_percent(), atol=0.01)


def test_metres_and_heights_become_depths(tmp_path: Path) -> None:
    made = dataset().assign_coords(depth=("depth", -1000.0 * DEPTH_KM))
    made["depth"].attrs = {"units": "m", "positive": "up"}
    found = with_perturbation_of_file(model(), written(tmp_path, made))
    np.testing.assert_allclose(found.perturbation_percent, expected_percent(), atol=0.01)


def test_blocks_that_the_file_does_not_cover_stay_as_they_are(tmp_path: Path) -> None:
    mesh = np.meshgrid(LONGITUDE, LATITUDE, DEPTH_KM, indexing="ij")
    values = np.where(mesh[2] > 45.0, np.nan, 2.0)
    found = with_perturbation_of_file(model(), written(tmp_path, dataset(values)))
    np.testing.assert_allclose(found.perturbation_percent[:, :, 0], 2.0, rtol=1e-12)
    np.testing.assert_array_equal(found.perturbation_percent[:, :, 1], 0.0)


def test_a_model_file_is_read_as_one(tmp_path: Path) -> None:
    source = model().with_slowness(np.full(GRID.shape, 0.12))
    source.write_netcdf(tmp_path / "model.nc")
    found = with_perturbation_of_file(model(), tmp_path / "model.nc")
    np.testing.assert_array_equal(found.slowness_s_per_km, source.slowness_s_per_km)


@pytest.mark.parametrize(
    ("made", "message"),
    [
        (dataset(name="dvs"), r"holds neither dvp \(percent\) nor vp"),
        (dataset(1e4 * np.ones((20, 21, 13))), r"dvp: expected -50 to 50 percent, got 10000"),
        (dataset(np.nan * np.ones((20, 21, 13))), "got no number"),
        (dataset().rename(depth="z"), "no one-dimensional coordinate depth .found: longitude"),
        (dataset().assign_coords(latitude=LATITUDE * 0.0), "coordinate latitude: expected two"),
        (dataset().assign_coords(latitude=-LATITUDE), "cover no block of the run"),
        (dataset().isel(depth=0), "no one-dimensional coordinate depth"),
    ],
)
def test_what_cannot_be_understood_is_explained(
    tmp_path: Path, made: xarray.Dataset, message: str
) -> None:
    with pytest.raises(InputError, match=message):
        with_perturbation_of_file(model(), written(tmp_path, made))

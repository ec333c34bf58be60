"""SlownessModel: perturbations, fields, refusals, and its netCDF round trip."""

import pickle

import numpy as np
import pytest
import xarray

from rayloom.errors import FileAccessError, InputError
from rayloom.model import BlockGrid, Frame, SlownessModel

FRAMES = [Frame(longitude=-150.0, latitude=65.0, azimuth_deg=30.1), Frame.flat()]


def some_model(frame, wave="P"):
    grid = BlockGrid(frame, [-6, -2, -1, 0.5, 4], [-3, 0, 1 / 3, 7], [-5, 0, 35, 120, 140, 200])
    generator = np.random.default_rng(4)
    reference = generator.uniform(0.1, 0.17, grid.shape)
    slowness = reference * generator.uniform(0.95, 1.05, grid.shape)
    hits = generator.integers(0, 50, grid.shape)
    resolution = np.where(hits > 10, generator.random(grid.shape), np.nan)
    model = SlownessModel(grid, slowness, reference, wave)
    return model.with_fields(hits=hits, resolution=resolution)


@pytest.fixture(params=FRAMES, ids=["sphere", "flat"])
def model(request):
    return some_model(request.param)


def test_slow_blocks_have_negative_perturbation():
    grid = BlockGrid(Frame.flat(), [0, 1, 2], [0, 1], [0, 1])
    model = SlownessModel(grid, [[[1 / 7.6]], [[1 / 8.0]]], np.full(grid.shape, 1 / 8.0))
    np.testing.assert_allclose(model.perturbation_percent.ravel(), [-5.0, 0.0], atol=1e-12)
    np.testing.assert_allclose(model.velocity_km_s.ravel(), [7.6, 8.0])


def test_reference_is_the_slowness_unless_given():
    grid = BlockGrid(Frame.flat(), [0, 1], [0, 1], [0, 1])
    model = SlownessModel(grid, np.full(grid.shape, 0.2))
    changed = model.with_slowness(np.full(grid.shape, 0.25))
    assert changed.reference.item() == 0.2
    assert changed.perturbation_percent.item() == pytest.approx(-20.0)


def test_new_slowness_drops_fields_and_keeps_wave_and_reference(model):
    changed = model.with_slowness(model.reference)
    assert changed.fields == {}
    assert changed.wave == model.wave
    np.testing.assert_array_equal(changed.reference, model.reference)


def test_fields_add_up_and_replace(model):
    richer = model.with_fields(hits=np.zeros(model.grid.shape), ray_length_km=model.reference)
    assert set(richer.fields) == {"hits", "resolution", "ray_length_km"}
    assert richer.fields["hits"].max() == 0.0
    assert model.fields["hits"].max() > 0.0


def test_models_do_not_change(model):
    for array in (model.slowness_s_per_km, model.reference, *model.fields.values()):
        with pytest.raises(ValueError, match="read-only"):
            array[0, 0, 0] = 1.0
    model.fields.clear()
    assert set(model.fields) == {"hits", "resolution"}


def assert_same(found, model):
    assert found.grid == model.grid
    assert found.wave == model.wave
    np.testing.assert_array_equal(found.slowness_s_per_km, model.slowness_s_per_km)
    np.testing.assert_array_equal(found.reference, model.reference)
    assert set(found.fields) == set(model.fields)
    for name, values in model.fields.items():
        np.testing.assert_array_equal(found.fields[name], values)


def test_models_travel(model):
    assert_same(pickle.loads(pickle.dumps(model)), model)


@pytest.mark.parametrize("frame", FRAMES, ids=["sphere", "flat"])
@pytest.mark.parametrize("wave", ["P", "S"])
def test_netcdf_gives_back_the_same_bits(frame, wave, tmp_path):
    model = some_model(frame, wave)
    path = tmp_path / "model.nc"
    model.write_netcdf(path)
    assert_same(SlownessModel.read_netcdf(path), model)
    assert [entry.name for entry in tmp_path.iterdir()] == ["model.nc"]


def test_dataset_gives_back_the_model_without_a_file(model):
    assert_same(SlownessModel.from_dataset(model.to_dataset()), model)


def test_a_dataset_in_another_order_of_dimensions_is_the_same_model(model):
    turned = model.to_dataset().transpose("x", "y", "depth", "edge")
    assert_same(SlownessModel.from_dataset(turned), model)


def test_edited_velocity_is_not_silently_ignored(model, tmp_path):
    path = tmp_path / "edited.nc"
    dataset = model.to_dataset()
    dataset["vp"] = dataset["vp"] * 1.01
    dataset.to_netcdf(path, engine="h5netcdf")
    with pytest.raises(InputError, match=r"edited\.nc: variable vp: .*contradict"):
        SlownessModel.read_netcdf(path)


@pytest.mark.parametrize("name", ["slowness", "slowness_reference", "vp", "x_bounds"])
def test_missing_variable_is_named(model, name):
    with pytest.raises(InputError, match=f"variable {name}: missing"):
        SlownessModel.from_dataset(model.to_dataset().drop_vars(name))


def test_gap_between_blocks_is_refused(model):
    dataset = model.to_dataset()
    bounds = dataset["depth_bounds"].values.copy()
    bounds[2, 0] += 1.0
    dataset["depth_bounds"] = (("depth", "edge"), bounds)
    with pytest.raises(InputError, match="each block beginning where the one before ends"):
        SlownessModel.from_dataset(dataset)


def test_sphere_without_its_place_is_refused():
    dataset = some_model(FRAMES[0]).to_dataset()
    with pytest.raises(InputError, match="rotated_pole"):
        SlownessModel.from_dataset(dataset.drop_vars("rotated_pole"))
    del dataset["rotated_pole"].attrs["frame_azimuth"]
    with pytest.raises(InputError, match="frame_azimuth is missing"):
        SlownessModel.from_dataset(dataset)


def test_files_that_are_no_models_are_refused(tmp_path):
    text, other = tmp_path / "text.nc", tmp_path / "other.nc"
    text.write_text("depth,vp\n")
    xarray.Dataset({"a": ("b", [1.0])}).to_netcdf(other, engine="h5netcdf")
    with pytest.raises(FileAccessError, match=r"text\.nc: cannot be read"):
        SlownessModel.read_netcdf(text)
    with pytest.raises(FileAccessError, match="no such file"):
        SlownessModel.read_netcdf(tmp_path / "none.nc")
    with pytest.raises(InputError, match=r"other\.nc: attribute wave"):
        SlownessModel.read_netcdf(other)


def test_unwritable_place_is_refused_and_leaves_nothing(model, tmp_path):
    (tmp_path / "model.nc").mkdir()
    with pytest.raises(FileAccessError, match="cannot be written"):
        model.write_netcdf(tmp_path / "model.nc")
    assert [entry.name for entry in tmp_path.iterdir()] == ["model.nc"]


GRID = BlockGrid(Frame.flat(), [0, 1, 2], [0, 1], [0, 1, 2])
GOOD = np.full(GRID.shape, 0.2)


@pytest.mark.parametrize("bad", [0.0, -0.1, np.nan, np.inf])
def test_impossible_slowness_names_the_block(bad):
    slowness = GOOD.copy()
    slowness[1, 0, 1] = bad
    with pytest.raises(InputError, match=r"1 of 4 blocks are not, first block \(1, 0, 1\)"):
        SlownessModel(GRID, slowness)
    with pytest.raises(InputError, match="reference"):
        SlownessModel(GRID, GOOD, slowness)


def test_wrong_shapes_and_names_are_refused():
    with pytest.raises(InputError, match=r"expected the grid's shape \(2, 1, 2\)"):
        SlownessModel(GRID, GOOD.ravel())
    with pytest.raises(InputError, match="wave"):
        SlownessModel(GRID, GOOD, wave="SKS")
    model = SlownessModel(GRID, GOOD)
    with pytest.raises(InputError, match="field 'hits'"):
        model.with_fields(hits=[1.0])
    with pytest.raises(InputError, match="belongs to the model itself"):
        model.with_fields(vp=GOOD)
    with pytest.raises(InputError, match="letters"):
        model.with_fields(**{"ray length": GOOD})
    with pytest.raises(InputError, match="array of numbers"):
        model.with_fields(hits="many")

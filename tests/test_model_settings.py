"""GridSettings: a grid in writing builds the same grid, through TOML as well."""

import tomllib

import numpy as np
import pytest
import tomlkit
from pydantic import ValidationError

from rayloom.errors import InputError
from rayloom.model import BlockGrid, EdgeSegment, Frame, GridSettings

PLACE = {"longitude_deg": -150.0, "latitude_deg": 65.0, "azimuth_deg": 30.0}
EDGES = {
    "x_edges": [-5.5, {"start": -4.0, "stop": 4.0, "step": 0.1}, 5.5],
    "y_edges": [{"start": -3.3, "stop": 3.3, "step": 0.3}],
    "depth_edges_km": [-3, 20, {"start": 20, "stop": 100, "step": 20}, 410],
}


def test_segments_are_written_out():
    grid = BlockGrid.from_spec(GridSettings.model_validate(PLACE | EDGES))
    assert grid.frame == Frame(longitude=-150.0, latitude=65.0, azimuth_deg=30.0)
    np.testing.assert_array_equal(grid.depth_edges_km, [-3, 20, 40, 60, 80, 100, 410])
    assert grid.x_edges.size == 83
    assert grid.x_edges[[0, 1, -2, -1]].tolist() == [-5.5, -4.0, 4.0, 5.5]
    np.testing.assert_allclose(np.diff(grid.x_edges[1:-1]), 0.1, rtol=1e-12)
    assert grid.y_edges.size == 23


def test_toml_builds_the_same_grid():
    spec = GridSettings.model_validate(PLACE | EDGES)
    text = tomlkit.dumps({"grid": spec.model_dump(exclude_none=True)})
    again = GridSettings.model_validate(tomllib.loads(text)["grid"])
    assert BlockGrid.from_spec(again) == BlockGrid.from_spec(spec)


@pytest.mark.parametrize(
    "frame",
    [Frame(longitude=179.99, latitude=-12.345, azimuth_deg=1 / 3), Frame.flat()],
    ids=["sphere", "flat"],
)
def test_any_grid_survives_being_written_down(frame):
    generator = np.random.default_rng(7)
    x, y, depth = (np.cumsum(generator.uniform(0.1, 1.0, 12)) for _ in range(3))
    grid = BlockGrid(frame, x - 3.0, y - 3.0, depth - 2.0)
    text = tomlkit.dumps(GridSettings.of(grid).model_dump(exclude_none=True))
    assert BlockGrid.from_spec(GridSettings.model_validate(tomllib.loads(text))) == grid


@pytest.mark.parametrize(
    ("change", "match"),
    [
        ({"x_edges": [{"start": 0.0, "stop": 1.0, "step": 0.3}]}, "whole blocks"),
        ({"x_edges": [{"start": 1.0, "stop": 0.0, "step": 0.5}]}, "whole blocks"),
        ({"x_edges": [{"start": 0.0, "stop": 1.0, "step": 0.0}]}, "greater than 0"),
        ({"x_edges": [{"begin": 0.0, "stop": 1.0, "step": 0.5}]}, "begin"),
        ({"x_edges": []}, "at least 1"),
        ({"latitude_deg": None}, "needs longitude_deg and latitude_deg"),
        ({"latitude_deg": 100.0}, "less than or equal to 90"),
        ({"depth_edges_km": [0.0, float("nan")]}, "finite"),
        ({"spacing": 3.0}, "spacing"),
    ],
)
def test_impossible_settings_are_refused(change, match):
    with pytest.raises(ValidationError, match=match):
        GridSettings.model_validate(PLACE | EDGES | change)


def test_falling_edges_are_refused_when_built():
    spec = GridSettings.model_validate(PLACE | EDGES | {"x_edges": [0.0, -1.0]})
    with pytest.raises(InputError, match="x_edges: edges must rise"):
        BlockGrid.from_spec(spec)


def test_segment_reaches_its_end_exactly():
    edges = EdgeSegment(start=-15.05, stop=15.05, step=0.86).edges()
    assert edges.size == 36
    assert (edges[0], edges[-1]) == (-15.05, 15.05)

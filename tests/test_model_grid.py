"""BlockGrid: order of blocks, volumes, widths, locating, refusals."""

import pickle

import numpy as np
import pytest

from rayloom.errors import InputError
from rayloom.model import BlockGrid, Frame
from rayloom.units import EARTH_RADIUS_KM

SPHERE = Frame(longitude=-150.0, latitude=65.0, azimuth_deg=30.0)
X_EDGES = [-6.0, -2.0, -1.0, 0.5, 4.0]
Y_EDGES = [-3.0, 0.0, 1.0, 7.0]
DEPTH_EDGES = [-5.0, 0.0, 35.0, 120.0]


@pytest.fixture(params=[SPHERE, Frame.flat()], ids=["sphere", "flat"])
def grid(request):
    return BlockGrid(request.param, X_EDGES, Y_EDGES, DEPTH_EDGES)


def test_flat_index_runs_depth_fastest(grid):
    assert grid.shape == (4, 3, 3)
    assert grid.block_count == 36
    ix, iy, iz = 2, 1, 1
    point = [grid.x_centres[ix], grid.y_centres[iy], grid.depth_centres_km[iz]]
    assert grid.locate(point) == (ix * 3 + iy) * 3 + iz


def test_every_centre_lies_in_its_own_block(grid):
    np.testing.assert_array_equal(grid.locate(grid.centres), np.arange(grid.block_count))


def test_locate_agrees_with_a_plain_search(grid):
    generator = np.random.default_rng(3)
    points = generator.uniform([-8, -5, -20], [6, 9, 140], (400, 3))

    def plainly(point):
        for ix in range(4):
            for iy in range(3):
                for iz in range(3):
                    low = X_EDGES[ix], Y_EDGES[iy], DEPTH_EDGES[iz]
                    high = X_EDGES[ix + 1], Y_EDGES[iy + 1], DEPTH_EDGES[iz + 1]
                    if np.all(point >= low) and np.all(point < high):
                        return (ix * 3 + iy) * 3 + iz
        return -1

    found = grid.locate(points)
    assert {-1} < set(found.tolist())
    np.testing.assert_array_equal(found, [plainly(point) for point in points])


def test_outermost_edges_belong_to_the_grid_and_nan_does_not(grid):
    found = grid.locate([[4.0, 7.0, 120.0], [-6.0, -3.0, -5.0], [np.nan, 0.0, 0.0], [4.1, 0, 0]])
    np.testing.assert_array_equal(found, [35, 0, -1, -1])


def test_sphere_volumes_add_up_to_a_shell():
    """A shell around the whole sphere has 4π/3 (r1³ − r2³)."""
    whole = BlockGrid(
        SPHERE, np.linspace(-180, 180, 13), np.linspace(-90, 90, 9), [-2.0, 50.0, 660.0]
    )
    outer, inner = EARTH_RADIUS_KM + 2.0, EARTH_RADIUS_KM - 660.0
    shell = 4.0 / 3.0 * np.pi * (outer**3 - inner**3)
    assert whole.volumes_km3.sum() == pytest.approx(shell, rel=1e-13)
    assert whole.volumes_km3.shape == whole.shape


def test_small_block_has_the_volume_of_its_chords():
    frame = Frame(longitude=0.0, latitude=50.0)
    small = BlockGrid(frame, [2.0, 2.01], [-5.01, -5.0], [10.0, 11.0])
    middle = [2.005, -5.005, 10.5]
    half = [0.005, 0.005, 0.5]
    sides = [
        frame.chord_km(np.subtract(middle, step), np.add(middle, step)) for step in np.diag(half)
    ]
    assert small.volumes_km3[0, 0, 0] == pytest.approx(np.prod(sides), rel=1e-6)


def test_flat_volumes_and_widths_are_plain_products():
    flat = BlockGrid(Frame.flat(), X_EDGES, Y_EDGES, DEPTH_EDGES)
    assert flat.volumes_km3[3, 2, 1] == pytest.approx(3.5 * 6.0 * 35.0)
    np.testing.assert_allclose(flat.widths.x_km, [4.0, 1.0, 1.5, 3.5])
    np.testing.assert_allclose(flat.widths.depth_km, [5.0, 35.0, 85.0])


def test_sphere_widths_are_arcs_at_the_middle():
    sphere = BlockGrid(SPHERE, X_EDGES, [-3.0, 0.0, 1.0, 7.0], DEPTH_EDGES)
    radius = EARTH_RADIUS_KM - 57.5
    np.testing.assert_allclose(sphere.widths.y_km, radius * np.radians([3.0, 1.0, 6.0]))
    np.testing.assert_allclose(
        sphere.widths.x_km, radius * np.cos(np.radians(2.0)) * np.radians([4.0, 1.0, 1.5, 3.5])
    )


@pytest.mark.parametrize(
    ("change", "where", "match"),
    [
        ({"x_edges": [0.0, 1.0, 1.0]}, "x_edges", r"edge 2 \(1\) does not exceed edge 1"),
        ({"y_edges": [0.0, -1.0]}, "y_edges", "edges must rise"),
        ({"depth_edges_km": [0.0, np.nan, 3.0]}, "depth_edges_km", "edge 1 is nan"),
        ({"depth_edges_km": [0.0]}, "depth_edges_km", "at least two edges"),
        ({"depth_edges_km": [[0.0, 1.0]]}, "depth_edges_km", "in one row"),
        ({"depth_edges_km": [0.0, EARTH_RADIUS_KM]}, "depth_edges_km", "leave the sphere"),
        ({"x_edges": [-181.0, 0.0]}, "x_edges", "leave the sphere"),
        ({"y_edges": [0.0, 90.5]}, "y_edges", "leave the sphere"),
        ({"x_edges": ["west", "east"]}, "x_edges", "list of numbers"),
    ],
)
def test_impossible_edges_are_refused_by_name(change, where, match):
    edges = {"x_edges": X_EDGES, "y_edges": Y_EDGES, "depth_edges_km": DEPTH_EDGES} | change
    with pytest.raises(InputError, match=match) as caught:
        BlockGrid(SPHERE, **edges)
    assert caught.value.where == where


def test_locate_wants_three_values(grid):
    with pytest.raises(InputError, match="last axis"):
        grid.locate([1.0, 2.0])


def test_grids_compare_travel_and_do_not_change(grid):
    twin = pickle.loads(pickle.dumps(grid))
    assert twin == grid
    assert hash(twin) == hash(grid)
    assert grid != BlockGrid(grid.frame, X_EDGES, Y_EDGES, [-5.0, 0.0, 35.0, 121.0])
    with pytest.raises(ValueError, match="read-only"):
        grid.x_edges[0] = 0.0


def test_given_edges_are_copied():
    edges = np.array(X_EDGES)
    grid = BlockGrid(SPHERE, edges, Y_EDGES, DEPTH_EDGES)
    edges[0] = -100.0
    assert grid.x_edges[0] == -6.0

"""Traced rays against closed forms and the explicit graph."""

from itertools import pairwise

import numpy as np
import pytest
from scipy.sparse import coo_array
from scipy.sparse.csgraph import dijkstra

import rayloom as rl


def _flat_model(edges_km, velocity_km_s):
    """Blocks with the mean slowness of a velocity that depends on depth alone."""
    x_edges, y_edges, depth_edges = edges_km
    grid = rl.BlockGrid(rl.Frame.flat(), x_edges, y_edges, depth_edges)
    fine = np.linspace(0.0, 1.0, 41)
    layers = [
        np.mean(1.0 / velocity_km_s(top + (bottom - top) * (fine[:-1] + 0.0125)))
        for top, bottom in pairwise(depth_edges)
    ]
    return rl.SlownessModel(grid, np.broadcast_to(layers, grid.shape))


@pytest.mark.parametrize("quality", ["standard", "thorough"])
def test_homogeneous_times_are_distance_over_velocity(quality):
    """Definition of velocity; every ray within 0.05 ms."""
    edges = (
        np.arange(-60.0, 61.0, 15.0),
        np.arange(-45.0, 46.0, 15.0),
        np.arange(0.0, 91.0, 15.0),
    )
    model = _flat_model(edges, lambda depth: np.full_like(depth, 6.0))
    random = np.random.default_rng(3)
    sources = random.uniform([-59, -44, 1], [59, 44, 89], (6, 3))
    receivers = random.uniform([-59, -44, 1], [59, 44, 89], (5, 3))
    rays = rl.trace(model, sources, receivers, quality=quality)
    exact = np.linalg.norm(sources[:, None] - receivers[None], axis=2).ravel() / 6.0
    np.testing.assert_allclose(rays.time_s, exact, atol=5e-5)


def test_times_in_a_linear_gradient_converge():
    """T = acosh(1 + g²(x² + z²) / (2 v1 v2)) / g, any textbook; v0 = 5.8, g = 0.01.

    Printed values: (x, z) = (100, 300) km 43.90978 s, (0, 300) 41.68938 s. Blocks of
    constant slowness err by their size; halving them must shrink the error.
    """

    def velocity(depth):
        return 5.8 + 0.01 * depth

    sources = np.array([[100.0, 0.0, 300.0], [0.0, 0.0, 300.0]])
    exact = np.array([43.90978, 41.68938])
    errors = []
    for block_km in (20.0, 10.0):
        edges = (
            np.arange(-40.0, 141.0, block_km),
            np.arange(-40.0, 41.0, block_km),
            np.arange(0.0, 321.0, block_km),
        )
        model = _flat_model(edges, velocity)
        rays = rl.trace(model, sources, [[0.0, 0.0, 0.0]], quality="thorough")
        errors.append(np.abs(rays.time_s - exact).max())
    assert errors[0] < 0.04
    assert errors[1] < 0.5 * errors[0]


@pytest.mark.parametrize(("distance_km", "time_s"), [(200.0, 32.71677), (300.0, 45.21677)])
def test_head_wave_of_two_layers(distance_km, time_s):
    """Layers of 6 and 8 km/s, 35 km thick: t = x/8 + 2·35·√(1/6² − 1/8²), any textbook."""
    edges = (
        np.arange(-30.0, 331.0, 15.0),
        np.arange(-30.0, 31.0, 15.0),
        np.array([0.0, 17.5, 35.0, 52.5, 70.0]),
    )
    model = _flat_model(edges, lambda depth: np.where(depth < 35.0, 6.0, 8.0))
    rays = rl.trace(model, [[0.0, 0.0, 0.0]], [[distance_km, 0.0, 0.0]], quality="thorough")
    np.testing.assert_allclose(rays.time_s, time_s, atol=0.02)
    deepest = rays.points(0)[:, 2].max()
    np.testing.assert_allclose(deepest, 35.0, atol=1e-6)


def test_graph_times_equal_those_of_scipy_on_the_explicit_graph():
    """scipy.sparse.csgraph.dijkstra with every link of every block stored."""
    random = np.random.default_rng(5)
    step_km, shape = 10.0, (4, 3, 3)
    edges = [np.arange(count + 1) * step_km for count in shape]
    grid = rl.BlockGrid(rl.Frame.flat(), *edges)
    slowness = 1.0 / random.uniform(4.0, 8.0, shape)
    model = rl.SlownessModel(grid, slowness)
    source, receivers = _corner(0, 0, 0), [_corner(4, 3, 3), _corner(4, 0, 2), _corner(1, 3, 0)]
    rays = rl.trace(
        model, [source * step_km], np.array(receivers) * step_km, method="graph", face_nodes=2
    )
    expected = _explicit_times(slowness, step_km, source, receivers)
    np.testing.assert_allclose(rays.time_s, expected, rtol=3e-6, atol=1e-5)


def _corner(*index):
    return np.array(index, dtype=float)


def _explicit_times(slowness, step_km, source, receivers, nodes_per_edge=2):
    """Nodes on thirds of every edge: corners, two per edge, four per face."""
    parts = nodes_per_edge + 1
    steps = np.indices((parts + 1,) * 3).reshape(3, -1).T
    surface = steps[((steps == 0) | (steps == parts)).any(axis=1)]
    size = np.array(slowness.shape) * parts + 1
    way_km = np.linalg.norm(surface[:, None] - surface[None], axis=2) * step_km / parts
    rows, columns, times = [], [], []
    for cell in np.ndindex(slowness.shape):
        node = np.ravel_multi_index((surface + np.array(cell) * parts).T, size)
        rows.append(np.repeat(node, len(node)))
        columns.append(np.tile(node, len(node)))
        times.append((way_km * slowness[cell]).ravel())
    rows, columns, times = map(np.concatenate, (rows, columns, times))
    links = rows != columns
    rows, columns, times = rows[links], columns[links], times[links]
    # Blocks share links on faces: keep the fastest.
    order = np.lexsort((times, columns, rows))
    first = np.ones(len(order), dtype=bool)
    first[1:] = (np.diff(rows[order]) != 0) | (np.diff(columns[order]) != 0)
    kept = order[first]
    count = int(np.prod(size))
    graph = coo_array((times[kept], (rows[kept], columns[kept])), shape=(count, count)).tocsr()
    number = [np.ravel_multi_index((np.asarray(p) * parts).astype(int), size) for p in receivers]
    start = np.ravel_multi_index((np.asarray(source) * parts).astype(int), size)
    return dijkstra(graph, indices=start)[number]


def test_a_slow_body_delays_less_than_first_order_and_a_fast_one_advances_more():
    """Fermat asymmetry: |bent(−3 %)| ≤ |first order| ≤ |bent(+3 %)|."""
    edges = (
        np.arange(-90.0, 91.0, 15.0),
        np.arange(-90.0, 91.0, 15.0),
        np.arange(0.0, 211.0, 15.0),
    )
    background = _flat_model(edges, lambda depth: np.full_like(depth, 8.0))
    centre = background.grid.centres - [0.0, 0.0, 105.0]
    body = (np.linalg.norm(centre, axis=1) < 50.0).reshape(background.grid.shape)
    source, receiver = [[20.0, -10.0, 209.0]], [[0.0, 0.0, 0.0]]
    straight = rl.trace(background, source, receiver, method="straight")
    through = (straight.path_lengths @ body.ravel().astype(float))[0] / 8.0
    assert through > 5.0
    delays = {}
    for percent in (-3.0, 3.0):
        slowness = background.slowness_s_per_km / np.where(body, 1.0 + percent / 100.0, 1.0)
        bent = rl.trace(background.with_slowness(slowness), source, receiver, quality="thorough")
        first_order = straight.predict_s(slowness) - straight.time_s
        delays[percent] = (bent.time_s - straight.time_s)[0], first_order[0]
    bent_slow, first_slow = delays[-3.0]
    bent_fast, first_fast = delays[3.0]
    assert 0.0 < bent_slow < first_slow
    assert bent_fast < first_fast < 0.0

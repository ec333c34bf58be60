"""What the forward room promises: order, signs, threads, messages."""

from concurrent.futures import ProcessPoolExecutor, ThreadPoolExecutor
from dataclasses import replace
from multiprocessing import get_context

import numpy as np
import pytest

import rayloom as rl
from rayloom.errors import InputError
from rayloom.survey import Events, Stations


@pytest.fixture(scope="module")
def flat_model():
    random = np.random.default_rng(1)
    edges = np.arange(0.0, 106.0, 15.0)
    grid = rl.BlockGrid(rl.Frame.flat(), edges, edges, np.arange(0.0, 91.0, 15.0))
    return rl.SlownessModel(grid, 1.0 / random.uniform(5.6, 6.4, grid.shape))


@pytest.fixture(scope="module")
def ends():
    random = np.random.default_rng(2)
    return random.uniform(1.0, 89.0, (4, 3)), random.uniform(1.0, 89.0, (3, 3))


@pytest.fixture(scope="module")
def distant():
    earth = rl.ReferenceEarth("iasp91")
    frame = rl.Frame(longitude=-17.0, latitude=62.0, azimuth_deg=40.0)
    edges = np.arange(-3.0, 3.1, 0.5)
    grid = rl.BlockGrid(frame, edges, edges, np.array([-4.0, 15, 35, 60, 90, 120, 150, 180.0]))
    model = rl.SlownessModel.from_earth(grid, earth)
    random = np.random.default_rng(3)
    model = model.with_slowness(model.reference * random.uniform(0.98, 1.02, grid.shape))
    stations = Stations(
        network=np.array(["QX"] * 4),
        station=np.array(["A", "B", "C", "FAR"]),
        latitude_deg=np.array([62.1, 61.4, 62.8, 75.0]),
        longitude_deg=np.array([-17.2, -16.0, -18.1, 60.0]),
        elevation_m=np.array([300.0, 1200.0, -900.0, 10.0]),
    )
    events = Events(
        event=np.array(["E0", "E1", "CLOSE"]),
        time=np.array(["2024-01-01"] * 3, dtype="datetime64[ns]"),
        latitude_deg=np.array([10.0, 55.0, 62.0]),
        longitude_deg=np.array([-70.0, 160.0, -10.0]),
        depth_km=np.array([30.0, 200.0, 10.0]),
    )
    return model, earth, events, stations


def test_pairs_run_source_by_source(flat_model, ends):
    sources, receivers = ends
    rays = rl.trace(flat_model, sources, receivers)
    assert len(rays) == 12
    np.testing.assert_allclose(rays.points(4)[0], sources[1])
    np.testing.assert_allclose(rays.points(4)[-1], receivers[1])


def test_chosen_pairs_equal_those_among_all(flat_model, ends):
    sources, receivers = ends
    everything = rl.trace(flat_model, sources, receivers)
    chosen = rl.trace(flat_model, sources, receivers, pairs=[[3, 0], [1, 2]])
    np.testing.assert_allclose(chosen.time_s, everything.time_s[[9, 5]], atol=0.02)


@pytest.mark.parametrize("method", ["bent", "graph", "straight"])
def test_time_is_slowness_times_length(flat_model, ends, method):
    rays = rl.trace(flat_model, *ends, method=method)
    np.testing.assert_allclose(
        rays.predict_s(flat_model.slowness_s_per_km), rays.time_s, atol=1e-9
    )
    lengths = rays.path_lengths.sum(axis=1)
    for ray in range(len(rays)):
        steps = np.diff(rays.points(ray), axis=0)
        np.testing.assert_allclose(np.linalg.norm(steps, axis=1).sum(), lengths[ray], rtol=1e-9)


def test_bits_do_not_depend_on_the_number_of_threads(flat_model, ends, distant):
    one, two = (rl.trace(flat_model, *ends, threads=threads) for threads in (1, 2))
    _require_same_bits(one, two)
    model, earth, events, stations = distant
    one, two = (
        rl.trace_distant(model, earth, events, stations, threads=threads) for threads in (1, 2)
    )
    _require_same_bits(one, two)


def _require_same_bits(one, two):
    assert one.time_s.tobytes() == two.time_s.tobytes()
    assert one.path_lengths.data.tobytes() == two.path_lengths.data.tobytes()
    assert one.path_lengths.indices.tobytes() == two.path_lengths.indices.tobytes()
    assert one.all_points.tobytes() == two.all_points.tobytes()


def test_an_executor_gives_the_same_rays(flat_model, ends, distant):
    model, earth, events, stations = distant
    here = rl.trace_distant(model, earth, events, stations)
    with ProcessPoolExecutor(2, mp_context=get_context("spawn")) as elsewhere:
        there = rl.trace_distant(model, earth, events, stations, executor=elsewhere)
    _require_same_bits(here, there)
    assert there.problems == here.problems
    everything = rl.trace(flat_model, *ends)
    with ThreadPoolExecutor(2) as threads:
        parts = rl.trace(flat_model, *ends, executor=threads)
    _require_same_bits(everything, parts)


def test_rays_that_cannot_exist_are_counted_with_their_reason(distant):
    model, earth, events, stations = distant
    rays = rl.trace_distant(model, earth, events, stations)
    traced = rays.traced.reshape(3, 4)
    assert traced[:2, :3].all()
    assert not traced[:, 3].any()
    assert not traced[2].any()
    assert np.isnan(rays.time_s[~rays.traced]).all()
    assert rays.problems == {
        "station outside the blocks": 3,
        "no wave of the phase enters the blocks": 3,
    }
    stored = np.diff(rays.path_lengths.indptr)
    assert (stored[~rays.traced] == 0).all()
    assert (stored[rays.traced] > 0).all()


def test_a_slower_model_gives_later_arrivals(distant):
    model, earth, events, stations = distant
    slower = model.with_slowness(1.02 * model.slowness_s_per_km)
    before = rl.trace_distant(model, earth, events, stations)
    after = rl.trace_distant(slower, earth, events, stations)
    kept = before.traced
    assert (after.time_s[kept] > before.time_s[kept] + 0.1).all()


def test_changes_of_course_are_counted(distant):
    model, earth, events, stations = distant
    rays = rl.trace_distant(model, earth, events, stations)
    assert rays.course_changes(rays) == 0
    again = rl.trace_distant(model, earth, events, stations, previous=rays)
    assert again.basin_jumps == 0
    moved = replace(rays, path_lengths=rays.path_lengths[::-1])
    assert rays.course_changes(moved) > 0


def test_progress_reaches_the_number_of_rays(distant):
    model, earth, events, stations = distant
    reports = []
    rl.trace_distant(
        model, earth, events, stations, progress=lambda done, total: reports.append((done, total))
    )
    assert reports[-1] == (9, 9)


def test_an_error_in_the_progress_callback_stops_the_work(flat_model, ends):
    def refuse(done, total):
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        rl.trace(flat_model, *ends, progress=refuse)


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"sources": [[1.0, 2.0]]}, r"sources: expected shape \(n, 3\)"),
        ({"sources": [[1.0, 2.0, np.nan]]}, "sources: expected finite values"),
        ({"receivers": [[500.0, 2.0, 3.0]]}, "receivers: row 0 .* outside the blocks"),
        ({"pairs": [[0, 9]]}, "pairs: row 0 is"),
        ({"pairs": [[0.5, 1.0]]}, "pairs: expected integers"),
        ({"method": "curly"}, "method: expected one of bent, graph, straight"),
        ({"quality": "best"}, "quality: expected one of standard, thorough"),
        ({"face_nodes": 5}, "face_nodes: expected 1 to 4, got 5"),
        ({"threads": 0}, "threads: expected at least 1, got 0"),
    ],
)
def test_bad_arguments_are_named(flat_model, ends, change, message):
    arguments = {"sources": ends[0], "receivers": ends[1]} | change
    with pytest.raises(InputError, match=message):
        rl.trace(flat_model, **arguments)


def test_distant_events_need_a_sphere_and_a_fitting_phase(flat_model, distant):
    model, earth, events, stations = distant
    with pytest.raises(InputError, match="frame on the sphere"):
        rl.trace_distant(flat_model, earth, events, stations)
    with pytest.raises(InputError, match="phase 'S' does not fit a model of P velocity"):
        rl.trace_distant(model, earth, events, stations, phases="S")

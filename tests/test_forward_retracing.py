"""Rays that start from those of a similar model, and the checks of rays."""

import numpy as np
import pytest

import rayloom as rl
from rayloom.errors import InputError
from rayloom.forward import BoundCheck, check_rays
from rayloom.survey import Events, Stations


@pytest.fixture(scope="module")
def job():
    earth = rl.ReferenceEarth("iasp91")
    frame = rl.Frame(longitude=-17.0, latitude=62.0, azimuth_deg=40.0)
    edges = np.arange(-3.0, 3.1, 0.3)
    grid = rl.BlockGrid(frame, edges, edges, np.arange(-4.0, 350.0, 22.0))
    random = np.random.default_rng(5)
    model = rl.SlownessModel.from_earth(grid, earth)
    model = model.with_slowness(model.reference * random.uniform(0.96, 1.04, grid.shape))
    stations = Stations(
        network=np.array(["QX"] * 5),
        station=np.array(list("ABCDE")),
        latitude_deg=62.0 + random.uniform(-1.0, 1.0, 5),
        longitude_deg=-17.0 + random.uniform(-2.0, 2.0, 5),
        elevation_m=random.uniform(0.0, 2000.0, 5),
    )
    events = Events(
        event=np.array([f"E{k}" for k in range(8)]),
        time=np.array(["2024-01-01"] * 8, dtype="datetime64[ns]"),
        latitude_deg=random.uniform(-5.0, 15.0, 8),
        longitude_deg=random.uniform(-60.0, 20.0, 8),
        depth_km=random.uniform(5.0, 300.0, 8),
    )
    return model, earth, events, stations


@pytest.fixture(scope="module")
def changed(job):
    random = np.random.default_rng(6)
    model = job[0]
    factors = 1.0 + 0.004 * random.uniform(-1.0, 1.0, model.grid.shape)
    return model.with_slowness(model.slowness_s_per_km * factors)


def test_retraced_rays_equal_those_traced_afresh(job, changed):
    # Fermat's principle: a ray of least time is not later than the old path.
    before = rl.trace_distant(*job)
    afresh = rl.trace_distant(changed, *job[1:])
    again = rl.trace_distant(changed, *job[1:], previous=before)
    assert np.all(again.time_s <= before.predict_s(changed.slowness_s_per_km) + 1e-6)
    # Both err by a few ms, 8 ms in the mean being what the quality promises.
    assert abs(again.time_s - afresh.time_s).mean() < 0.008
    assert (again.time_s - afresh.time_s).mean() < 0.002
    np.testing.assert_allclose(
        again.predict_s(changed.slowness_s_per_km), again.time_s, rtol=0, atol=1e-9
    )


def test_retracing_does_not_rely_on_the_old_rays(job, changed):
    # Old rays of another Earth's worth of anomalies: what is found stays as early.
    model = job[0]
    other = model.with_slowness(model.reference * model.reference / model.slowness_s_per_km)
    misleading = rl.trace_distant(other, *job[1:])
    afresh = rl.trace_distant(changed, *job[1:])
    again = rl.trace_distant(changed, *job[1:], previous=misleading)
    assert (again.time_s - afresh.time_s).mean() < 0.003
    assert again.basin_jumps > 0


def test_previous_rays_of_other_pairs_or_blocks_are_refused(job):
    model, earth, events, stations = job
    few = rl.trace_distant(model, earth, events, stations, pairs=[[0, 0], [1, 1]])
    with pytest.raises(InputError, match="previous"):
        rl.trace_distant(model, earth, events, stations, previous=few)
    grid = model.grid
    coarse = rl.BlockGrid(grid.frame, grid.x_edges[::2], grid.y_edges, grid.depth_edges_km)
    with pytest.raises(InputError, match="same blocks"):
        rl.trace_distant(
            rl.SlownessModel.from_earth(coarse, earth),
            earth,
            events,
            stations,
            pairs=[[0, 0], [1, 1]],
            previous=few,
        )


def test_rows_of_rays_are_rays(job):
    rays = rl.trace_distant(*job)
    rows = np.array([7, 3])
    some = rays[rows]
    np.testing.assert_array_equal(some.time_s, rays.time_s[rows])
    np.testing.assert_array_equal(some.points(1), rays.points(3))
    assert (some.path_lengths != rays.path_lengths[rows]).nnz == 0


def test_path_lengths_in_single_precision(job):
    double = rl.trace_distant(*job)
    single = rl.trace_distant(*job, lengths_dtype="float32")
    assert single.path_lengths.dtype == np.float32
    assert single.path_lengths.indptr.dtype == np.int64
    slowness = job[0].slowness_s_per_km
    np.testing.assert_allclose(
        single.predict_s(slowness), double.predict_s(slowness), rtol=0, atol=1e-5
    )


def test_checks_hold_for_rays_and_fail_for_those_of_another_model(job, changed):
    # Fermat's principle: the derivative of a time by a slowness is a length.
    rays = rl.trace_distant(*job)
    found = check_rays(job[0], rays, count=8)
    assert found.holds
    assert found.sums.count == 40
    assert found.graph.count == found.reciprocity.count == 8
    assert found.gradient.p95 < 2.0
    assert found.reciprocity.mean < 10.0
    assert "forth" in str(found)
    elsewhere = check_rays(changed, rays, count=4)
    assert not elsewhere.sums.holds
    assert "MISSED" in str(elsewhere)


def test_checks_need_rays_of_the_model(job):
    grid = rl.BlockGrid(rl.Frame.flat(), [0, 1, 2], [0, 1], [0, 1])
    model = rl.SlownessModel(grid, np.full(grid.shape, 0.2))
    with pytest.raises(InputError, match="rays"):
        check_rays(model, rl.trace_distant(*job))


def test_some_rays_are_searched_again_inside_a_wider_bound(job):
    check = rl.trace_distant(*job).bound_check
    assert check.checked >= 1
    assert check.improved <= check.checked
    together = check.joined(BoundCheck(3, 1, 0.02))
    assert together.checked == check.checked + 3
    assert together.largest_gain_s == 0.02
    assert together.worth_telling
    assert "20.0 ms" in str(together)

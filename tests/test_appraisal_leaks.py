"""Leak tests: delays of anomalies outside, and what their inversion makes of them."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import pytest

from inversion_cases import plain_settings, residual_table, small_case
from rayloom.appraisal.leak_sources import enlarged_grid, outside_sources, surroundings
from rayloom.appraisal.leaks import LeakSource, crust_source, leak_tests, slowness_change
from rayloom.appraisal.masking import masked_system
from rayloom.earth import ReferenceEarth
from rayloom.errors import InputError
from rayloom.forward import Rays
from rayloom.inversion import LinearisedProblem, invert, linearise
from rayloom.model import BlockGrid, Frame, SlownessModel
from rayloom.residuals import Residuals
from rayloom.survey import Events, Stations

CRUST_KM = 45.0


@pytest.fixture(scope="module")
def problem() -> LinearisedProblem:
    case, settings = small_case(), plain_settings(station_terms=True)
    return linearise(invert(case.data, case.model, settings, forward=case.forward), settings)


@pytest.fixture(scope="module")
def crust(problem: LinearisedProblem) -> LeakSource:
    return crust_source(problem, centre=(160.0, 160.0), radius_km=70.0, crust_km=CRUST_KM)


def test_every_pairing_of_terms_and_crust_is_tried(
    problem: LinearisedProblem, crust: LeakSource
) -> None:
    leaks = leak_tests(problem, [crust], crust_km=CRUST_KM)
    pairs = [(leak.station_terms, leak.crust_free) for leak in leaks]
    assert pairs == [(True, True), (True, False), (False, True), (False, False)]
    assert len({round(leak.peak_percent, 6) for leak in leaks}) == 4


def test_crust_delays_are_slowness_change_times_crossing_time(
    problem: LinearisedProblem, crust: LeakSource
) -> None:
    """Path lengths of the rays times 0.125 s/km times 1/(1 − 0.03) − 1, block by block."""
    grid = problem.model.grid
    x, y, depth_km = grid.centres.T
    inside = (np.hypot(x - 160.0, y - 160.0) <= 70.0) & (depth_km < CRUST_KM)
    seconds = problem.system.groups[0].matrix.toarray()[:, inside].sum(axis=1)
    np.testing.assert_allclose(crust.delay_s, seconds * (1.0 / 0.97 - 1.0), rtol=1e-12)
    assert slowness_change(-3.0) == pytest.approx(1.0 / 0.97 - 1.0)


def test_leak_is_the_dense_inversion_of_the_delays(
    problem: LinearisedProblem, crust: LeakSource
) -> None:
    """Normal equations with crustal columns struck out and no station terms."""
    leak = leak_tests(problem, [crust], crust_km=CRUST_KM)[-1]
    forbidden = np.broadcast_to(
        problem.model.grid.depth_centres_km < CRUST_KM, problem.model.grid.shape
    )
    system = masked_system(problem, forbidden, without=("station_terms",))
    dense = np.column_stack([system.times(unit) for unit in np.eye(system.shape[1])])
    data = system.whiten_rows(crust.delay_s)
    z = np.linalg.solve(dense.T @ dense + np.eye(dense.shape[1]), dense.T @ data)
    fractional = system.parameters(z)[0].reshape(problem.model.grid.shape)
    expected = 100.0 * (1.0 / (1.0 + fractional) - 1.0)
    assert np.all(leak.inside_percent[forbidden] == 0.0)
    np.testing.assert_allclose(leak.inside_percent, expected, atol=3e-3 * np.abs(expected).max())
    assert leak.peak_percent == pytest.approx(
        expected.ravel()[np.argmax(np.abs(expected))], rel=0.01
    )
    explained = 1.0 - np.sum((data - dense @ z) ** 2) / np.sum(data**2)
    assert leak.explained_share == pytest.approx(explained, abs=1e-3)


def test_fixing_the_crust_sends_its_anomaly_deeper(
    problem: LinearisedProblem, crust: LeakSource
) -> None:
    free, fixed = leak_tests(problem, [crust], crust_km=CRUST_KM)[2:]
    assert fixed.leak_ratio > free.leak_ratio


def test_unknown_delays_play_no_part(problem: LinearisedProblem, crust: LeakSource) -> None:
    known = crust.known.copy()
    known[::7] = False
    wrong = np.where(known, crust.delay_s, np.nan)
    source = LeakSource("crust", crust.place, -3.0, wrong, known)
    other = LeakSource("crust", crust.place, -3.0, np.where(known, wrong, 9.0), known)
    for one, two in zip(
        *(leak_tests(problem, [s], crust_km=45.0) for s in (source, other)), strict=True
    ):
        assert one.peak_percent == two.peak_percent


def test_a_crust_without_blocks_is_refused(problem: LinearisedProblem) -> None:
    with pytest.raises(InputError, match="no layer on one side"):
        crust_source(problem, centre=(160.0, 160.0), crust_km=5.0)
    with pytest.raises(InputError, match="outside the blocks"):
        crust_source(problem, centre=(900.0, 160.0), crust_km=CRUST_KM)


@dataclass(frozen=True)
class Distant:
    """A small survey on the sphere, inverted along the rays of the reference Earth."""

    data: Residuals
    problem: LinearisedProblem
    rays: Rays


@pytest.fixture(scope="module")
def distant() -> Distant:
    random = np.random.default_rng(8)
    earth = ReferenceEarth("ak135")
    frame = Frame(longitude=20.0, latitude=30.0)
    edges = np.linspace(-1.8, 1.8, 13)
    grid = BlockGrid(frame, edges, edges, np.array([-2.0, 20.0, 35.0, 80.0, 130.0, 180.0]))
    x, y = random.uniform(-0.7, 0.7, (2, 9))
    longitude, latitude = frame.geographic_coordinates(x, y)
    stations = Stations(
        network=np.full(9, "QX"),
        station=np.array([f"A{number}" for number in range(9)]),
        latitude_deg=latitude,
        longitude_deg=longitude,
        elevation_m=np.full(9, 200.0),
    )
    azimuth = np.radians([80.0, 75.0, 95.0, 100.0, 260.0, 10.0])
    arc = np.radians([40.0, 60.0, 45.0, 55.0, 70.0, 65.0])
    longitude, latitude = frame.geographic_coordinates(
        np.degrees(np.arctan2(np.sin(arc) * np.sin(azimuth), np.cos(arc))),
        np.degrees(np.arcsin(np.sin(arc) * np.cos(azimuth))),
    )
    events = Events(
        event=np.array([f"E{number}" for number in range(6)]),
        time=np.full(6, "2024-01-01", dtype="datetime64[ns]"),
        latitude_deg=latitude,
        longitude_deg=longitude,
        depth_km=np.full(6, 20.0),
    )
    event, station = (index.ravel() for index in np.indices((6, 9)))
    plain = residual_table(event, station, 0.05 * random.standard_normal(54), np.zeros(54), 0.05)
    data = replace(plain, earth=earth, stations=stations, events=events)
    settings = plain_settings(method="reference", max_iterations=1, station_terms=True)
    result = invert(data, SlownessModel.from_earth(grid, earth), settings)
    assert isinstance(result.rays, Rays)
    return Distant(data, linearise(result, settings), result.rays)


def test_larger_blocks_hold_those_inside_unchanged(distant: Distant) -> None:
    inner = distant.problem.model.grid
    outer = enlarged_grid(inner, margin_km=150.0)
    for mine, theirs in ((inner.x_edges, outer.x_edges), (inner.y_edges, outer.y_edges)):
        assert np.isin(mine, theirs).all()
        reach_km = np.radians(mine[0] - theirs[0]) * 6191.0 * np.cos(np.radians(30.0))
        assert reach_km >= 150.0 * np.cos(np.radians(30.0))
    assert np.array_equal(outer.depth_edges_km[: inner.depth_edges_km.size], inner.depth_edges_km)
    assert outer.depth_edges_km[-1] - inner.depth_edges_km[-1] >= 150.0


def test_delays_outside_are_the_time_spent_there(distant: Distant) -> None:
    """One per cent more slowness out there delays a ray by a hundredth of its time there.

    That time is what the one-dimensional Earth keeps outside the small blocks and no
    longer outside the large ones; layers up to 50 km thick stand for its gradient.
    """
    around = surroundings(distant.problem, distant.data, margin_km=150.0)
    outer = around.model.grid
    beyond = around.inner.locate(outer.centres) < 0
    ray = distant.problem.rows.ray
    time_there_s = distant.rays.outside_time_s[ray] - around.rays.outside_time_s
    delays = around.delays_s(np.where(beyond, 0.01, 0.0))
    assert time_there_s.min() > 10.0
    np.testing.assert_allclose(delays, 0.01 * time_there_s, rtol=0.02)


def test_anomalies_lie_where_rays_come_from(distant: Distant) -> None:
    """Four of six events lie east, so the side ball goes to the upper x side; slow is late."""
    beside, below = outside_sources(distant.problem, distant.data, radius_km=60.0)
    assert "upper x" in beside.place
    assert (beside.name, below.name) == ("beside", "below")
    for source in (beside, below):
        assert source.known.all()
        assert source.delay_s.min() >= 0.0
        longest_s = 120.0 * slowness_change(-3.0) / 7.5
        assert 0.1 * longest_s < source.delay_s.max() < 1.6 * longest_s


def test_an_anomaly_beside_the_blocks_leaks_inside(distant: Distant) -> None:
    sources = outside_sources(distant.problem, distant.data, radius_km=60.0)
    for leak in leak_tests(distant.problem, sources):
        assert leak.leak_ratio > 0.0
        assert 0.0 < leak.explained_share <= 1.0
        assert leak.delay_ms > 1.0
        assert leak.peak_at[2] > 35.0

"""The inversion with rays of distant events through blocks on the sphere."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import pytest
from numpy.typing import NDArray

from rayloom.earth import ReferenceEarth, distance_azimuth_deg, geocentric_latitude_deg
from rayloom.forward import Rays, trace_distant
from rayloom.inversion import InversionResult, InversionSettings, invert
from rayloom.inversion.retracing import DatedRays
from rayloom.model import BlockGrid, Frame, SlownessModel
from rayloom.residuals import Residuals
from rayloom.survey import Events, Stations

Floats = NDArray[np.float64]
NOISE_S = 0.06


@dataclass(frozen=True)
class Distant:
    """Residuals of bent rays through a slow column, and the blocks to invert them on."""

    data: Residuals
    model: SlownessModel
    perturbation: Floats


def column(grid: BlockGrid) -> Floats:
    """Slowness 4 % up in the middle of a column, Gaussian across, 40 to 220 km deep."""
    x, y, depth = grid.centres.T
    inside = (depth > 40.0) & (depth < 220.0)
    return np.where(inside, 0.04 * np.exp(-0.5 * (x**2 + y**2) / 0.6**2), 0.0).reshape(grid.shape)


@pytest.fixture(scope="module")
def distant() -> Distant:
    random = np.random.default_rng(3)
    earth = ReferenceEarth("ak135")
    frame = Frame(longitude=15.0, latitude=42.0)
    depth_edges = np.array([-5.0, 20.0, 35.0, 80.0, 130.0, 180.0, 230.0, 280.0])
    grid = BlockGrid(frame, np.linspace(-3, 3, 15), np.linspace(-3, 3, 15), depth_edges)
    model = SlownessModel.from_earth(grid, earth)
    x, y = random.uniform(-1.2, 1.2, (2, 14))
    longitude, latitude = frame.geographic_coordinates(x, y)
    stations = Stations(
        network=np.full(14, "XX"),
        station=np.array([f"S{i:02d}" for i in range(14)]),
        latitude_deg=latitude,
        longitude_deg=longitude,
        elevation_m=random.uniform(0.0, 1500.0, 14),
    )
    events = distant_events(frame, random, 16)
    event, station = (i.ravel() for i in np.meshgrid(np.arange(16), np.arange(14), indexing="ij"))
    pairs = np.column_stack([event, station])
    truth = model.with_slowness(model.reference * (1.0 + column(grid)))
    change = (
        trace_distant(truth, earth, events, stations, pairs=pairs).time_s
        - trace_distant(model, earth, events, stations, pairs=pairs).time_s
    )
    noise = NOISE_S * random.standard_normal(change.size)
    data = distant_residuals(
        earth, events, stations, pairs, change + random.normal(0.0, 1.0, 16)[event] + noise
    )
    return Distant(data, model, column(grid))


def distant_events(frame: Frame, random: np.random.Generator, count: int) -> Events:
    """Events all around, 35° to 85° away."""
    arc, azimuth = random.uniform(35.0, 85.0, count), np.linspace(5.0, 350.0, count)
    x = np.degrees(
        np.arctan2(np.sin(np.radians(arc)) * np.sin(np.radians(azimuth)), np.cos(np.radians(arc)))
    )
    y = np.degrees(np.arcsin(np.sin(np.radians(arc)) * np.cos(np.radians(azimuth))))
    longitude, latitude = frame.geographic_coordinates(x, y)
    return Events(
        event=np.array([f"e{i:02d}" for i in range(count)]),
        time=np.full(count, "2021-01-01", dtype="datetime64[ns]"),
        latitude_deg=latitude,
        longitude_deg=longitude,
        depth_km=random.uniform(10.0, 200.0, count),
    )


def distant_residuals(
    earth: ReferenceEarth,
    events: Events,
    stations: Stations,
    pairs: NDArray[np.int64],
    residual_s: Floats,
) -> Residuals:
    source, receiver = pairs.T
    way = distance_azimuth_deg(
        geocentric_latitude_deg(events.latitude_deg)[source],
        events.longitude_deg[source],
        geocentric_latitude_deg(stations.latitude_deg)[receiver],
        stations.longitude_deg[receiver],
    )
    rows = len(pairs)
    return Residuals(
        stations=stations,
        events=events,
        earth=earth,
        event_index=source,
        station_index=receiver,
        phase=np.full(rows, "P"),
        wave=np.full(rows, "P"),
        residual_s=residual_s,
        uncertainty_s=np.full(rows, NOISE_S),
        distance_deg=way.distance_deg,
        azimuth_deg=way.azimuth_deg,
        back_azimuth_deg=way.back_azimuth_deg,
        predicted_s=np.zeros(rows),
        ellipticity_s=np.zeros(rows),
        elevation_s=np.zeros(rows),
    )


def settings(**changes: object) -> InversionSettings:
    terms = {"station_term_std_s": 0.02, "mislocation_std_km": 2.0, "max_iterations": 3}
    return InversionSettings.model_validate(terms | changes)


@pytest.fixture(scope="module")
def bent(distant: Distant) -> InversionResult:
    return invert(distant.data, distant.model, settings(method="bent", threads=1))


def test_bent_rays_find_the_slow_column(distant: Distant, bent: InversionResult) -> None:
    """Sign, place and depth of the column; the misfit falls to the noise."""
    found = bent.model.perturbation_percent
    weight = np.where(found < 0.5 * found.min(), -found, 0.0).ravel()
    centre = weight @ distant.model.grid.centres / weight.sum()
    assert np.hypot(*centre[:2]) * 111.0 < 30.0
    assert abs(centre[2] - 130.0) < 40.0
    assert found.min() < -2.0
    assert bent.history[-1].rms_kept_s < 1.2 * NOISE_S
    objective = [row.objective for row in bent.history]
    assert np.all(np.diff(objective) <= 0.0)


def test_threads_of_tracer_and_products_do_not_change_a_bit(
    distant: Distant, bent: InversionResult
) -> None:
    other = invert(distant.data, distant.model, settings(method="bent", threads=2))
    assert other.model.slowness_s_per_km.tobytes() == bent.model.slowness_s_per_km.tobytes()


def test_shuffled_picks_do_not_change_a_bit(distant: Distant, bent: InversionResult) -> None:
    order = np.random.default_rng(1).permutation(len(distant.data.residual_s))
    other = invert(distant.data.select(order), distant.model, settings(method="bent", threads=1))
    assert other.model.slowness_s_per_km.tobytes() == bent.model.slowness_s_per_km.tobytes()


@pytest.mark.parametrize("method", ["reference", "straight"])
def test_rays_of_fixed_course_are_traced_once(distant: Distant, method: str) -> None:
    traced = []

    def report(stage: str, done: int, total: int) -> None:
        if stage == "tracing" and done == total:
            traced.append(total)

    result = invert(distant.data, distant.model, settings(method=method), progress=report)
    assert len(traced) == 1
    assert result.history[-1].variance_reduction_percent > 80.0
    predicted = result.rays.predict_s(result.model.slowness_s_per_km)
    np.testing.assert_allclose(result.rays.time_s, predicted, rtol=0.0, atol=1e-9)


def test_stations_outside_the_blocks_are_left_out_and_listed(distant: Distant) -> None:
    stations = distant.data.stations
    latitude = stations.latitude_deg.copy()
    latitude[4] += 8.0
    moved = replace(distant.data, stations=replace(stations, latitude_deg=latitude))
    result = invert(moved, distant.model, settings(method="reference", max_iterations=1))
    outside = distant.data.station_index == 4
    assert result.counts.untraced == outside.sum()
    assert set(result.left_out_because[outside]) == {"no ray"}
    assert np.isnan(result.station_terms_s["P"][4])
    assert np.all(result.used[~outside])


def test_only_rays_along_which_the_model_changed_are_traced_anew(
    distant: Distant, bent: InversionResult
) -> None:
    """Rays that stay are timed to second order: late by no more than a tenth of their drift."""
    sparing = invert(
        distant.data, distant.model, settings(method="bent", threads=1, retrace_change_s=0.03)
    )
    rays = sparing.rays
    assert isinstance(rays, DatedRays)
    assert 0 < rays.traced_anew < len(rays)
    assert rays.drift_s.max() <= 0.03
    whole = trace_distant(
        sparing.model,
        distant.data.earth,
        distant.data.events,
        distant.data.stations,
        pairs=np.column_stack([distant.data.event_index, distant.data.station_index]),
    )
    late_s = rays.time_s - whole.time_s
    assert np.percentile(late_s, 95) <= 0.003
    np.testing.assert_allclose(rays.predict_s(sparing.model.slowness_s_per_km), rays.time_s)
    one, other = bent.model.perturbation_percent, sparing.model.perturbation_percent
    assert np.linalg.norm(one - other) <= 0.1 * np.linalg.norm(one)


def test_a_drift_of_nothing_keeps_every_ray(distant: Distant, bent: InversionResult) -> None:
    dated = DatedRays.just_traced(bent.rays, bent.model)

    def refuse(rows: NDArray[np.int64]) -> Rays:
        raise AssertionError(f"{rows.size} rays were traced")

    kept = dated.in_model(bent.model, limit_s=1e-9, trace=refuse)
    np.testing.assert_array_equal(kept.all_points, bent.rays.all_points)
    np.testing.assert_allclose(kept.time_s, bent.rays.time_s, atol=1e-4)
    assert kept.basin_jumps == 0

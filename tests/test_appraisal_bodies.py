"""Bodies: where they are found, what is measured, how samples become intervals."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest
from numpy.typing import NDArray

from inversion_cases import plain_settings, small_case
from rayloom.appraisal.bodies import (
    BodyRegion,
    Interval,
    explained_ms,
    find_bodies,
    find_regions,
    measure_body,
    relative_to_layers,
    smearing_at,
)
from rayloom.appraisal.samples import Samples, posterior_samples
from rayloom.errors import InputError
from rayloom.inversion import LinearisedProblem, invert, linearise
from rayloom.model import BlockGrid, Frame

Floats = NDArray[np.float64]
CHOICE = {"threshold_percent": 1.0, "min_volume_km3": 1e5}


def fine_grid() -> BlockGrid:
    edges = np.arange(0.0, 401.0, 5.0)
    return BlockGrid(Frame.flat(), edges, edges, np.arange(0.0, 301.0, 10.0))


def cylinder(
    grid: BlockGrid, *, x: float, y: float, radius_km: float, top_km: float, base_km: float
) -> NDArray[np.bool_]:
    px, py, depth = grid.centres.T
    inside = (np.hypot(px - x, py - y) <= radius_km) & (depth > top_km) & (depth < base_km)
    return inside.reshape(grid.shape)


def everything(grid: BlockGrid) -> NDArray[np.bool_]:
    return np.ones(grid.shape, dtype=bool)


def region_of(grid: BlockGrid, percent: Floats) -> BodyRegion:
    (region,) = find_regions(grid, percent, everything(grid), **CHOICE)
    return region


def linearised(**choice: object) -> LinearisedProblem:
    case, settings = small_case(), plain_settings(station_terms=True, **choice)
    return linearise(invert(case.data, case.model, settings, forward=case.forward), settings)


@pytest.fixture(scope="module")
def problem() -> LinearisedProblem:
    return linearised()


def test_measures_of_a_cylinder_are_those_of_geometry() -> None:
    """Volume π r² h, width 2 r, ends and centroid as drawn; staircase error below 2 %."""
    grid = fine_grid()
    percent = np.where(
        cylinder(grid, x=180.0, y=220.0, radius_km=65.0, top_km=60.0, base_km=240.0), -4.0, 0.0
    )
    found = measure_body(grid, region_of(grid, percent), percent, **CHOICE)
    assert found.volume_km3[0] == pytest.approx(np.pi * 65.0**2 * 180.0, rel=0.02)
    assert found.width_km[0] == pytest.approx(130.0, rel=0.02)
    assert (found.top_km[0], found.base_km[0]) == pytest.approx((60.0, 240.0))
    assert (found.x[0], found.y[0], found.depth_km[0]) == pytest.approx((180.0, 220.0, 150.0))
    assert found.mean_percent[0] == found.peak_percent[0] == -4.0
    assert found.exists[0]


def test_bodies_of_both_signs_are_told_apart_and_small_ones_left_out() -> None:
    grid = fine_grid()
    slow = cylinder(grid, x=100.0, y=100.0, radius_km=50.0, top_km=50.0, base_km=250.0)
    fast = cylinder(grid, x=300.0, y=300.0, radius_km=40.0, top_km=50.0, base_km=150.0)
    speck = cylinder(grid, x=300.0, y=80.0, radius_km=15.0, top_km=50.0, base_km=90.0)
    percent = -3.0 * slow + 2.0 * fast - 3.0 * speck
    regions = find_regions(grid, percent, everything(grid), **CHOICE)
    assert [region.name for region in regions] == ["slow 1", "fast 1"]
    assert np.array_equal(regions[0].mask, slow)
    assert np.array_equal(regions[1].mask, fast)
    assert not np.any(regions[0].domain & regions[1].mask)


def test_a_body_stays_within_the_usable_blocks() -> None:
    grid = fine_grid()
    slow = cylinder(grid, x=200.0, y=200.0, radius_km=60.0, top_km=20.0, base_km=280.0)
    usable = np.broadcast_to(grid.depth_centres_km > 100.0, grid.shape)
    (region,) = find_regions(grid, -3.0 * slow, usable, **CHOICE)
    assert np.array_equal(region.mask, slow & usable)
    assert not np.any(region.domain & ~usable)


def test_layer_medians_do_not_make_bodies() -> None:
    """Relative times do not see the mean of a layer: it is taken off before anything is found."""
    grid = fine_grid()
    percent = np.broadcast_to(np.linspace(-5.0, 5.0, grid.shape[2]), grid.shape)
    relative = relative_to_layers(grid, percent, everything(grid))
    assert np.all(np.abs(relative) < 1e-12)
    assert find_regions(grid, relative, everything(grid), **CHOICE) == ()


def test_a_sample_without_the_body_says_so() -> None:
    grid = fine_grid()
    percent = np.where(
        cylinder(grid, x=200.0, y=200.0, radius_km=60.0, top_km=60.0, base_km=240.0), 3.0, 0.0
    )
    found = measure_body(grid, region_of(grid, percent), -0.1 * percent, **CHOICE)
    assert not found.exists[0]
    assert np.isnan(found.depth_km[0])


def test_interval_is_median_and_central_ninety_per_cent() -> None:
    """Quantiles of 0 … 100: 5, 50 and 95; samples without the body are left aside."""
    values = np.concatenate([np.arange(101.0), [np.nan]])
    assert Interval.of(values) == Interval(estimate=50.0, low=5.0, high=95.0)
    assert np.isnan(Interval.of(np.array([np.nan])).estimate)


def test_explained_delays_are_those_of_the_matrix(problem: LinearisedProblem) -> None:
    """Plain product with the block matrix, weighted group means taken off row by row."""
    grid = problem.model.grid
    mask = np.zeros(grid.shape, dtype=bool)
    mask[3:5, 3:5, 1:4] = True
    fractional = np.where(mask, 0.03, 0.0)
    percent = 100.0 * (1.0 / (1.0 + fractional) - 1.0)
    delay = problem.system.groups[0].matrix.toarray() @ fractional.ravel()
    group = problem.rows.group
    means = np.array([delay[group == number].mean() for number in range(group.max() + 1)])
    expected = 1e3 * np.sqrt(np.mean((delay - means[group]) ** 2))
    assert explained_ms(problem, mask, percent[None])[0] == pytest.approx(expected, rel=1e-9)


def test_a_body_smaller_than_the_point_spread_is_flagged() -> None:
    """A prior correlated over 200 km smears a point over more than one block of 40 km."""
    problem = linearised(correlation_km=(200.0, 200.0))
    grid = problem.model.grid
    centroid = np.array([140.0, 140.0, 100.0])
    single = np.zeros(grid.block_count, dtype=bool)
    single[int(grid.locate(centroid))] = True
    small = smearing_at(problem, centroid, single.reshape(grid.shape))
    large = smearing_at(problem, centroid, everything(grid))
    assert small.flagged
    assert not large.flagged
    assert small.body_km == pytest.approx(40.0)
    assert 0.0 <= small.plunge_deg <= 90.0


@pytest.fixture(scope="module")
def samples(problem: LinearisedProblem) -> Samples:
    return posterior_samples(problem, count=24, seed=3)


def test_found_bodies_carry_all_that_is_said_of_them(
    problem: LinearisedProblem, samples: Samples
) -> None:
    choice = {"threshold_percent": 1.0, "min_volume_km3": 1.5e5, "top_km": 0.0}
    bodies = find_bodies(problem, samples, min_resolution=0.1, **choice)
    assert bodies
    for body in bodies:
        assert 0.0 <= body.existence_share <= 1.0
        for name in ("depth_km", "volume_km3", "mean_percent", "explained_ms"):
            interval = body.interval(name)
            assert interval.low <= interval.estimate <= interval.high
        assert np.sign(body.interval("peak_percent").estimate) == body.region.sign
        assert body.temperature is not None
        assert np.sign(body.temperature.highest_c + body.temperature.lowest_c) == -body.region.sign


def test_weak_anomalies_are_no_bodies_unless_asked_for(
    problem: LinearisedProblem, samples: Samples
) -> None:
    """1.5 times the prior's 2 % by default: as many bodies as with 3 % in so many words."""
    choice = {"min_resolution": 0.1, "min_volume_km3": 6e4, "top_km": 0.0}
    usual = find_bodies(problem, samples, **choice)
    named = find_bodies(problem, samples, threshold_percent=3.0, **choice)
    assert [body.region.mask.sum() for body in usual] == [body.region.mask.sum() for body in named]
    assert len(find_bodies(problem, samples, threshold_percent=1.0, **choice)) > len(usual)


def test_samples_of_other_blocks_are_refused(problem: LinearisedProblem, samples: Samples) -> None:
    other = dataclasses.replace(samples, shape=(2, 2, 2))
    with pytest.raises(InputError, match="do not belong"):
        find_bodies(problem, other)

"""The judge finds what is there, and is not kind."""

from __future__ import annotations

import numpy as np
import pytest

from rayloom.demo import DemoTruth, judge
from rayloom.demo.bodies import strongest_body
from rayloom.demo.structure import (
    FAST_ROOT,
    SLOW_COLUMN,
    TiltedColumn,
    block_positions,
)
from rayloom.demo.truth import Outlier
from rayloom.earth import ReferenceEarth
from rayloom.errors import InputError
from rayloom.model import BlockGrid, Frame, SlownessModel

KEYS = [f"V{event:03d} XX.OMBR" for event in range(1, 401)]
UNCERTAINTY_S = np.full(400, 0.1)


@pytest.fixture(scope="module")
def truth():
    grid = BlockGrid(
        Frame(longitude=86.5, latitude=-43.2, azimuth_deg=24.0),
        np.arange(-20, 21) * 0.15,
        np.arange(-20, 21) * 0.15,
        np.arange(0.0, 400.0, 15.0),
    )
    everywhere = np.ones(grid.shape, dtype=bool)
    positions = block_positions(grid)
    return DemoTruth(
        highland="a highland",
        seed=1,
        longitude_deg=86.5,
        latitude_deg=-43.2,
        pick_count=400,
        noise_rms_s=0.1,
        disorder_percent=0.0,
        column=SLOW_COLUMN,
        root=FAST_ROOT,
        slow=strongest_body(grid, SLOW_COLUMN.percent(*positions), everywhere, -1),
        fast=strongest_body(grid, FAST_ROOT.percent(*positions), everywhere, +1),
        station_terms_s={},
        event_errors=(),
        outliers=(
            Outlier("V001", "XX", "OMBR", "cycle skip", 1.2),
            Outlier("V002", "XX", "OMBR", "gross error", -2.0),
        ),
    )


@pytest.fixture(scope="module")
def reference():
    grid = BlockGrid(
        Frame(longitude=86.4, latitude=-43.1),
        np.linspace(-3.0, 3.0, 31),
        np.linspace(-3.0, 3.0, 31),
        np.concatenate([[-3.0, 20.0, 35.0], np.arange(55.0, 420.0, 20.0)]),
    )
    return SlownessModel.from_earth(grid, ReferenceEarth("ak135"))


def many_rays(grid):
    """Return the ray length of 40 rays per cell of 50 km in every block."""
    return 40.0 / 50.0**2 * np.broadcast_to(grid.volumes_km3, grid.shape)


def painted(reference, column=SLOW_COLUMN, sign=1.0):
    """Return a model with half the column, half the root and rays everywhere."""
    positions = block_positions(reference.grid)
    percent = 0.5 * sign * (column.percent(*positions) + FAST_ROOT.percent(*positions))
    model = reference.with_slowness(reference.reference / (1.0 + percent / 100.0))
    return model.with_fields(ray_length_km=many_rays(reference.grid))


def verdict(truth, model, *, residual_s=None, suspected=None):
    if residual_s is None:
        residual_s = 0.1 * np.random.default_rng(1).normal(size=400)
    return judge(
        truth,
        model,
        pick_keys=KEYS,
        residual_s=residual_s,
        uncertainty_s=UNCERTAINTY_S,
        suspected=np.zeros(400, dtype=bool) if suspected is None else suspected,
    )


def moved(column, east_km, depth_km):
    shift = np.array([east_km, 0.0, depth_km])
    return TiltedColumn(
        tuple(column.top_km + shift),
        tuple(column.base_km + shift),
        column.radius_km,
        column.core_percent,
    )


def test_the_truth_itself_passes(truth, reference):
    result = verdict(truth, painted(reference))
    assert result.passed
    assert result.slow.horizontal_error_km < 5.0
    assert abs(result.slow.depth_error_km) < 8.0
    assert result.fast.horizontal_error_km < 8.0
    assert result.slow.found.peak_percent == pytest.approx(-2.0, abs=0.2)
    assert "slow column" in str(result)


def test_a_misplaced_column_fails(truth, reference):
    aside = verdict(truth, painted(reference, moved(SLOW_COLUMN, -50.0, 0.0)))
    assert aside.slow.horizontal_error_km == pytest.approx(50.0, abs=6.0)
    assert not aside.passed
    deep = verdict(truth, painted(reference, moved(SLOW_COLUMN, 0.0, 60.0)))
    assert deep.slow.depth_error_km == pytest.approx(60.0, abs=10.0)
    assert not deep.passed


def test_a_reversed_sign_fails(truth, reference):
    assert not verdict(truth, painted(reference, sign=-1.0)).passed


def test_an_empty_model_fails(truth, reference):
    model = reference.with_fields(ray_length_km=many_rays(reference.grid))
    result = verdict(truth, model)
    assert result.slow.found is None
    assert not result.passed
    assert "not found" in str(result)


def test_blocks_without_rays_and_the_crust_do_not_count(truth, reference):
    slowness = painted(reference).slowness_s_per_km.copy()
    slowness[:2, :2, -2:] *= 1.5
    slowness[15, 15, 0] *= 1.5
    length_km = many_rays(reference.grid).copy()
    length_km[:5, :5, -5:] = 0.0
    model = reference.with_slowness(slowness)
    assert verdict(truth, model.with_fields(ray_length_km=length_km)).passed
    everywhere = model.with_fields(ray_length_km=many_rays(reference.grid))
    assert not verdict(truth, everywhere).passed


def test_few_rays_in_one_block_do_not_tear_a_body(truth, reference):
    """Blocks that rays avoid belong to the body as long as their surroundings are crossed."""
    model = painted(reference)
    length_km = many_rays(reference.grid).copy()
    length_km[15, 14:16, 8:11] = 0.0
    whole, torn = (
        verdict(truth, model.with_fields(ray_length_km=length))
        for length in (many_rays(reference.grid), length_km)
    )
    assert torn.slow.found == whole.slow.found


def test_layer_means_do_not_matter(truth, reference):
    """A uniform layer is invisible to relative times, so that it must not sway the verdict."""
    model = painted(reference)
    layers = 1.0 + 0.012 * np.linspace(1.0, -1.0, reference.grid.shape[2])
    shifted = reference.with_slowness(model.slowness_s_per_km * layers)
    shifted = shifted.with_fields(ray_length_km=many_rays(reference.grid))
    assert verdict(truth, shifted).slow.horizontal_error_km < 8.0
    assert abs(verdict(truth, shifted).slow.depth_error_km) < 12.0


@pytest.mark.parametrize(("factor", "passed"), [(0.8, False), (1.0, True), (1.3, False)])
def test_misfit_must_match_the_noise(truth, reference, factor, passed):
    residual_s = factor * 0.1 * np.resize([1.0, -1.0], 400)
    result = verdict(truth, painted(reference), residual_s=residual_s)
    assert result.noise_ratio == pytest.approx(factor)
    assert result.passed is passed


def test_suspected_picks_are_left_out_and_compared(truth, reference):
    residual_s = 0.1 * np.resize([1.0, -1.0], 400)
    residual_s[0] = 9.0
    suspected = np.zeros(400, dtype=bool)
    suspected[[0, 7]] = True
    result = verdict(truth, painted(reference), residual_s=residual_s, suspected=suspected)
    assert result.noise_ratio == pytest.approx(1.0)
    assert (result.outliers_named, result.outliers_true, result.outliers_false) == (1, 2, 1)
    assert result.picks_fitted == 398


def test_wrong_arguments_are_refused(truth, reference):
    with pytest.raises(InputError, match="ray_length_km"):
        verdict(truth, reference)
    with pytest.raises(InputError, match="per pick"):
        verdict(truth, painted(reference), residual_s=np.zeros(3))

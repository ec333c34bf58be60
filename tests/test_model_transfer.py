"""The perturbation of one model in the blocks of another."""

from __future__ import annotations

import numpy as np
import pytest

from rayloom.errors import InputError
from rayloom.model import BlockGrid, Frame, SlownessModel, with_perturbation_of

FRAME = Frame(longitude=12.0, latitude=-31.0)


def model_of(grid, perturbation=0.0, *, speed=8.0, wave="P"):
    reference = np.full(grid.shape, 1.0 / speed)
    return SlownessModel(grid, reference * (1.0 + np.asarray(perturbation)), reference, wave)


def test_the_same_blocks_keep_every_bit():
    grid = BlockGrid(FRAME, [-2, 0, 1, 3], [-1, 0, 2], [-3, 20, 77.7])
    source = model_of(grid, np.random.default_rng(3).normal(0.0, 0.02, grid.shape))
    moved = with_perturbation_of(model_of(grid), source)
    np.testing.assert_array_equal(moved.slowness_s_per_km, source.slowness_s_per_km)


def test_coarser_blocks_hold_the_mean_of_the_finer():
    """Blocks cut in two along each axis: the mean of eight, by hand."""
    fine = BlockGrid(FRAME, np.arange(5.0), np.arange(5.0), np.arange(0.0, 90.0, 10.0))
    coarse = BlockGrid(FRAME, [0, 2, 4], [0, 2, 4], [0, 20, 40, 60, 80])
    change = np.random.default_rng(4).normal(0.0, 0.02, fine.shape)
    moved = with_perturbation_of(model_of(coarse, speed=6.0), model_of(fine, change))
    expected = change.reshape(2, 2, 2, 2, 4, 2).mean(axis=(1, 3, 5))
    np.testing.assert_allclose(
        moved.slowness_s_per_km * 6.0 - 1.0, expected, rtol=1e-12, atol=1e-14
    )


def test_finer_blocks_take_the_value_of_the_block_around_them():
    fine = BlockGrid(FRAME, np.arange(5.0), np.arange(5.0), np.arange(0.0, 90.0, 10.0))
    coarse = BlockGrid(FRAME, [0, 2, 4], [0, 2, 4], [0, 20, 40, 60, 80])
    change = np.random.default_rng(5).normal(0.0, 0.02, coarse.shape)
    moved = with_perturbation_of(model_of(fine), model_of(coarse, change))
    expected = change.repeat(2, 0).repeat(2, 1).repeat(2, 2)
    np.testing.assert_allclose(moved.slowness_s_per_km * 8.0 - 1.0, expected, atol=1e-14)


def test_outside_the_source_nothing_is_changed():
    small = BlockGrid(FRAME, [0, 1], [0, 1], [0, 50])
    wide = BlockGrid(FRAME, [-1, 0, 1, 2], [0, 1, 2], [0, 50, 90])
    moved = with_perturbation_of(model_of(wide), model_of(small, 0.03))
    changed = moved.slowness_s_per_km != moved.reference
    assert np.argwhere(changed).tolist() == [[1, 0, 0]]


def test_a_turned_frame_finds_the_same_places():
    """A quarter turn of the frame: x becomes y, so that the change must turn with it."""
    turned = Frame(longitude=12.0, latitude=-31.0, azimuth_deg=90.0)
    edges = [-2.0, 0.0, 2.0]
    here = BlockGrid(FRAME, edges, edges, [0, 50])
    there = BlockGrid(turned, edges, edges, [0, 50])
    change = np.array([[[0.01], [0.02]], [[0.03], [0.04]]])
    moved = with_perturbation_of(model_of(here), model_of(there, change))
    expected = np.empty_like(change)
    for east in (0, 1):
        for north in (0, 1):
            x, y = turned.local_coordinates(
                *FRAME.geographic_coordinates(2 * east - 1.0, 2 * north - 1.0)
            )
            expected[east, north, 0] = change[int(x > 0), int(y > 0), 0]
    assert len({*expected.ravel()}) == 4
    np.testing.assert_allclose(moved.slowness_s_per_km * 8.0 - 1.0, expected, atol=1e-3)


def test_what_does_not_fit_is_refused():
    grid = BlockGrid(FRAME, [0, 1], [0, 1], [0, 50])
    with pytest.raises(InputError, match="holds a model of S waves"):
        with_perturbation_of(model_of(grid), model_of(grid, wave="S"))
    far = BlockGrid(FRAME, [40, 41], [0, 1], [0, 50])
    with pytest.raises(InputError, match="do not overlap"):
        with_perturbation_of(model_of(grid), model_of(far))
    flat = BlockGrid(Frame.flat(), [0, 1], [0, 1], [0, 50])
    with pytest.raises(InputError, match="one model is flat"):
        with_perturbation_of(model_of(grid), model_of(flat))

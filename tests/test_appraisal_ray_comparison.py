"""Bodies of one model measured in others."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray

from rayloom.appraisal.ray_comparison import compare_bodies, main_bodies
from rayloom.model import BlockGrid, Frame, SlownessModel

Floats = NDArray[np.float64]
GRID = BlockGrid(
    Frame.flat(), np.arange(0.0, 320.0, 20.0), np.arange(0.0, 320.0, 20.0), np.arange(0, 200, 20)
)
USABLE = np.ones(GRID.shape, dtype=bool)


def model_of(percent: Floats) -> SlownessModel:
    reference = np.full(GRID.shape, 0.125)
    return SlownessModel(GRID, reference / (1.0 + percent / 100.0), reference)


def two_boxes(*, slow: float, fast: float, east: int = 0) -> SlownessModel:
    """Put in a slow box, moved by a number of blocks of 20 km, and a smaller fast one."""
    percent = np.zeros(GRID.shape)
    percent[2 + east : 6 + east, 3:7, 2:6] = slow
    percent[9:12, 9:12, 3:6] = fast
    return model_of(percent)


def test_the_main_bodies_are_found_and_scaled() -> None:
    first = two_boxes(slow=-4.0, fast=2.0)
    regions = main_bodies(first, USABLE)
    assert [region.name for region in regions] == ["slow 1", "fast 1"]
    assert [int(region.mask.sum()) for region in regions] == [64, 27]
    weaker = two_boxes(slow=-3.0, fast=2.2)
    same, other = compare_bodies([first, weaker], regions, USABLE)
    assert [body.share_of_amplitude for body in same] == pytest.approx([1.0, 1.0])
    assert [body.shift_km for body in same] == pytest.approx([0.0, 0.0], abs=1e-9)
    assert [body.share_of_amplitude for body in other] == pytest.approx([0.75, 1.1])
    assert [body.mean_percent for body in other] == pytest.approx([-3.0, 2.2])


def test_a_moved_body_is_weaker_and_off() -> None:
    """A box of 80 km moved by 20 km keeps 60 km in place: 3/4 of its mean, 10 km off."""
    first = two_boxes(slow=-4.0, fast=2.0)
    regions = main_bodies(first, USABLE)
    moved = two_boxes(slow=-4.0, fast=2.0, east=1)
    slow = compare_bodies([first, moved], regions, USABLE)[1][0]
    assert slow.share_of_amplitude == pytest.approx(0.75)
    assert slow.shift_km == pytest.approx(10.0)
    assert slow.deeper_km == pytest.approx(0.0, abs=1e-9)


def test_a_flat_model_has_no_bodies() -> None:
    assert main_bodies(model_of(np.zeros(GRID.shape)), USABLE) == ()

"""The truth below the highland: shapes, disorder and the blocks it is cut into."""

from __future__ import annotations

import numpy as np
import pytest

from rayloom.demo.bodies import strongest_body
from rayloom.demo.structure import (
    FAST_ROOT,
    SLOW_COLUMN,
    TRUTH_SPACING_KM,
    Disorder,
    block_positions,
    truth_grid,
    truth_model,
)
from rayloom.earth import ReferenceEarth
from rayloom.model import BlockGrid, Frame


@pytest.fixture(scope="module")
def earth():
    return ReferenceEarth("ak135")


@pytest.fixture(scope="module")
def coarse(earth):
    return truth_grid(earth, spacing_km=30.0)


def test_column_is_slow_tilted_and_45_km_in_radius():
    (east_0, north_0, top), (east_1, north_1, base) = SLOW_COLUMN.top_km, SLOW_COLUMN.base_km
    assert (top, base) == (60.0, 280.0)
    assert np.hypot(east_1 - east_0, north_1 - north_0) == pytest.approx(80.0, abs=0.5)
    middle = np.array([0.5 * (east_0 + east_1)]), np.array([0.5 * (north_0 + north_1)])
    depth = np.array([0.5 * (top + base)])
    assert SLOW_COLUMN.percent(*middle, depth)[0] == pytest.approx(-4.0, abs=1e-6)
    assert SLOW_COLUMN.percent(middle[0] + 45.0, middle[1], depth)[0] == pytest.approx(-2.0)
    for outside in (top - 40.0, base + 40.0):
        assert abs(SLOW_COLUMN.percent(*middle, np.array([outside]))[0]) < 1e-3


def test_root_is_fast_and_half_at_its_axes():
    centre = np.array(FAST_ROOT.centre_km)
    strike = np.radians(FAST_ROOT.strike_deg)
    along = np.array([np.sin(strike), np.cos(strike), 0.0])
    across = np.array([np.cos(strike), -np.sin(strike), 0.0])
    assert FAST_ROOT.percent(*centre[:, np.newaxis])[0] == pytest.approx(2.5)
    for axis, length in zip((along, across, [0.0, 0.0, 1.0]), FAST_ROOT.half_axes_km, strict=True):
        tip = centre + length * np.asarray(axis)
        assert FAST_ROOT.percent(*tip[:, np.newaxis])[0] == pytest.approx(1.25)


def test_disorder_is_weak_and_correlated_as_stated():
    """Variance and correlation exp(-d²/2l²) from 400 realisations, bounds of 5 standard errors."""
    points = np.array([[0.0, 30.0, 0.0], [0.0, 40.0, 0.0], [0.0, 0.0, 40.0]])
    samples = np.array(
        [
            Disorder(0.5, (45.0, 35.0), np.random.default_rng(seed)).percent(*points)
            for seed in range(400)
        ]
    )
    assert samples.std() == pytest.approx(0.5, rel=0.12)
    correlation = np.corrcoef(samples.T)
    tolerance = 5.0 / np.sqrt(400.0)
    assert correlation[0, 1] == pytest.approx(np.exp(-0.5 * (50.0 / 45.0) ** 2), abs=tolerance)
    assert correlation[0, 2] == pytest.approx(np.exp(-0.5 * (40.0 / 35.0) ** 2), abs=tolerance)


def test_truth_blocks_are_fine_turned_and_cut_at_the_discontinuities(earth):
    grid = truth_grid(earth)
    assert grid.frame.azimuth_deg not in (0.0, 90.0)
    widths = grid.widths
    below_network = np.abs(grid.x_centres) * 111.19 < 200.0
    assert below_network.sum() > 25
    fine_km = widths.x_km[below_network]
    assert 12.0 <= fine_km.min() <= fine_km.max() <= 15.0
    assert widths.depth_km.max() < 1.4 * TRUTH_SPACING_KM
    assert {20.0, 35.0} <= set(np.round(grid.depth_edges_km, 6))
    assert grid.depth_edges_km[0] < -2.3


def test_truth_model_adds_the_structures_to_the_reference(earth, coarse):
    model = truth_model(coarse, earth, SLOW_COLUMN, FAST_ROOT)
    positions = block_positions(coarse)
    expected = SLOW_COLUMN.percent(*positions) + FAST_ROOT.percent(*positions)
    np.testing.assert_allclose(model.perturbation_percent, expected, atol=1e-9)
    top_layer = 1.0 / earth.mean_slowness_s_per_km(coarse.depth_edges_km)
    np.testing.assert_allclose(model.reference_velocity_km_s[0, 0], top_layer)


def test_bodies_measured_on_two_grids_agree(earth):
    """The centroid belongs to the structure: blocks of 15 and 18 km agree to half a block."""
    fine = truth_grid(earth)
    other = BlockGrid(
        Frame(longitude=86.1, latitude=-43.0),
        np.linspace(-2.5, 2.5, 31),
        np.linspace(-2.5, 2.5, 31),
        np.linspace(0.0, 400.0, 27),
    )
    for structure, sign in ((SLOW_COLUMN, -1), (FAST_ROOT, +1)):
        bodies = [
            strongest_body(
                grid, structure.percent(*block_positions(grid)), np.ones(grid.shape, bool), sign
            )
            for grid in (fine, other)
        ]
        for name in ("east_km", "north_km", "depth_km"):
            assert getattr(bodies[0], name) == pytest.approx(getattr(bodies[1], name), abs=6.0)


def test_strongest_body_keeps_to_connected_usable_blocks():
    grid = BlockGrid(
        Frame(longitude=86.5, latitude=-43.2),
        np.arange(-3, 4) * 0.3,
        np.arange(-2, 3) * 0.3,
        [0.0, 50.0, 100.0],
    )
    percent = np.zeros(grid.shape)
    percent[0, 0, 0] = -9.0  # stronger, but not usable
    percent[2:4, 1, 1] = -3.0, -2.0
    percent[5, 3, 1] = -2.9  # strong enough, but apart
    percent[4, 1, 1] = -1.4  # connected, but below half
    usable = np.ones(grid.shape, bool)
    usable[0, 0, 0] = False
    body = strongest_body(grid, percent, usable, -1)
    assert body.peak_percent == -3.0
    assert (body.top_km, body.base_km) == (50.0, 100.0)
    # Weights 3 : 2 at x = -0.15° and 0.15°, one degree being 111.19 km.
    assert body.east_km == pytest.approx(-0.03 * 111.19, rel=1e-3)
    assert body.depth_km == pytest.approx(75.0)
    assert strongest_body(grid, percent, usable, +1) is None

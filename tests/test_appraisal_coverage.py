"""Directions, lengths and Fresnel zones of rays per block."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.sparse import csr_array

from rayloom.appraisal import ray_coverage
from rayloom.appraisal.coverage import chord_km
from rayloom.forward import Rays, trace
from rayloom.model import BlockGrid, Frame, SlownessModel

GRID = BlockGrid(Frame.flat(), [0.0, 10.0, 20.0], [0.0, 10.0, 20.0], [0.0, 10.0, 20.0])
MODEL = SlownessModel(GRID, np.full(GRID.shape, 0.125))


def rays_of_lines(*lines: list[tuple[float, float, float]]) -> Rays:
    """Rays whose points are given; each piece lies in the block of its middle."""
    points = np.concatenate([np.array(line) for line in lines])
    offsets = np.concatenate([[0], np.cumsum([len(line) for line in lines])])
    rows, blocks, lengths = [], [], []
    for row, line in enumerate(lines):
        ends = np.array(line)
        rows += [row] * (len(ends) - 1)
        blocks += GRID.locate(0.5 * (ends[1:] + ends[:-1])).tolist()
        lengths += np.linalg.norm(np.diff(ends, axis=0), axis=1).tolist()
    count = len(lines)
    return Rays(
        grid=GRID,
        time_s=np.ones(count),
        outside_time_s=np.zeros(count),
        path_lengths=csr_array((lengths, (rows, blocks)), shape=(count, GRID.block_count)),
        traced=np.ones(count, dtype=bool),
        point_offsets=offsets,
        all_points=points,
    )


def test_rays_along_one_line_cover_no_direction() -> None:
    """The tensor of one direction has the eigenvalues L, 0, 0."""
    down = [(5.0, 5.0, 20.0), (5.0, 5.0, 10.0), (5.0, 5.0, 0.0)]
    found = ray_coverage(rays_of_lines(down, down), MODEL, period_s=1.0)
    assert found.directional[0, 0, 0] == pytest.approx(0.0, abs=1e-12)
    assert found.hits[0, 0, 0] == 2
    assert found.ray_length_km[0, 0, 0] == pytest.approx(20.0)
    assert np.isnan(found.directional[1, 1, 1])


def test_three_directions_at_right_angles_cover_all() -> None:
    """Σ ℓ u uᵀ of equal lengths along x, y and z is a multiple of the unit matrix."""
    lines = (
        [(1.0, 5.0, 5.0), (9.0, 5.0, 5.0)],
        [(5.0, 1.0, 5.0), (5.0, 9.0, 5.0)],
        [(5.0, 5.0, 9.0), (5.0, 5.0, 1.0)],
    )
    found = ray_coverage(rays_of_lines(*lines), MODEL, period_s=1.0)
    assert found.directional[0, 0, 0] == pytest.approx(1.0)
    half = ray_coverage(
        rays_of_lines(*lines, lines[0]), MODEL, period_s=1.0, chosen=np.array([1, 1, 1, 1], bool)
    )
    assert half.directional[0, 0, 0] == pytest.approx(0.5)


def test_the_fresnel_zone_in_the_middle_of_a_ray() -> None:
    """Detour of half a wave length: a² = λD/4 at the middle of D, so 2a = √(λD).

    Exact for small λ/D from the triangle 2√((D/2)² + a²) = D + λ/2, to λ/(8D).
    """
    line = [(5.0, 5.0, 20.0), (5.0, 5.0, 10.0), (5.0, 5.0, 0.0)]
    found = ray_coverage(rays_of_lines(line), MODEL, period_s=0.01, path_km=np.array([30.0]))
    wavelength = 0.01 * 8.0
    # the middle of the lower piece is 15 km from the station, half of 30 km
    half_width = 0.5 * found.fresnel_width_km[0, 0, 1]
    detour = 2.0 * np.hypot(15.0, half_width) - 30.0
    assert detour == pytest.approx(0.5 * wavelength, rel=2e-3)


def test_hits_and_lengths_of_traced_rays_agree_with_the_path_lengths() -> None:
    """Column sums of G: what the tracer itself says.

    A piece along the face of two blocks that the ray both crosses may be counted in either.
    """
    random = np.random.default_rng(4)
    grid = BlockGrid(Frame.flat(), *(np.linspace(0.0, 120.0, 7) for _ in range(3)))
    slowness = 0.125 * random.uniform(0.95, 1.05, grid.shape)
    model = SlownessModel(grid, slowness)
    sources = np.column_stack([random.uniform(5, 115, (12, 2)), np.full(12, 117.0)])
    receivers = np.column_stack([random.uniform(5, 115, (6, 2)), np.full(6, 2.0)])
    rays = trace(model, sources, receivers, threads=1)
    found = ray_coverage(rays, model, period_s=1.0)
    lengths = np.asarray(rays.path_lengths.sum(axis=0)).ravel()
    assert found.ray_length_km.sum() == pytest.approx(lengths.sum(), rel=1e-6)
    misplaced = np.abs(found.ray_length_km.ravel() - lengths).sum() / lengths.sum()
    assert misplaced < 0.02
    np.testing.assert_array_equal(
        found.hits.ravel(), np.asarray((rays.path_lengths > 0).sum(axis=0)).ravel()
    )


def test_on_the_sphere_a_vertical_ray_stays_vertical() -> None:
    """Up and the two horizontals are orthonormal everywhere, at 70° latitude too."""
    frame = Frame(longitude=20.0, latitude=70.0, azimuth_deg=30.0)
    grid = BlockGrid(frame, [-1.0, 1.0], [-1.0, 1.0], [0.0, 100.0])
    model = SlownessModel(grid, np.full(grid.shape, 0.125))
    rays = Rays(
        grid=grid,
        time_s=np.ones(3),
        outside_time_s=np.zeros(3),
        path_lengths=csr_array(np.full((3, 1), 50.0)),
        traced=np.ones(3, dtype=bool),
        point_offsets=np.array([0, 2, 4, 6]),
        all_points=np.array(
            [
                *([0.5, 0.5, 75.0], [0.5, 0.5, 25.0]),
                *([0.0, 0.0, 50.0], [50.0 / (6321.0 * np.pi / 180.0), 0.0, 50.0]),
                *([0.0, 0.0, 50.0], [0.0, 50.0 / (6321.0 * np.pi / 180.0), 50.0]),
            ]
        ),
    )
    found = ray_coverage(rays, model, period_s=1.0)
    assert found.directional[0, 0, 0] == pytest.approx(1.0, rel=1e-6)
    assert found.ray_length_km[0, 0, 0] == pytest.approx(150.0, rel=1e-9)


def test_a_chord_is_the_straight_distance() -> None:
    """Sixty degrees: the chord equals the radius."""
    assert chord_km(np.array([60.0]))[0] == pytest.approx(6371.0)

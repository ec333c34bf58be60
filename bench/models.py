"""Block models to measure with, on either frame."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray
from scipy.ndimage import gaussian_filter

import rayloom as rl

Floats = NDArray[np.float64]
KM_PER_DEGREE = 6371.0 * np.pi / 180.0
FRAME = {"longitude": 20.0, "latitude": -5.0, "azimuth_deg": 20.0}


def box_grid(
    counts: tuple[int, int, int],
    block_km: float | tuple[float, float, float],
    *,
    sphere: bool = False,
    top_km: float = 0.0,
) -> rl.BlockGrid:
    """Cut equal blocks from a depth down, x and y from 0 (flat) or around 0 (sphere)."""
    sizes_km = np.broadcast_to(block_km, 3)
    x, y, depth = (
        np.arange(count + 1) * size for count, size in zip(counts, sizes_km, strict=True)
    )
    depth += top_km
    if not sphere:
        return rl.BlockGrid(rl.Frame.flat(), x, y, depth)
    x, y = ((edges - 0.5 * edges[-1]) / KM_PER_DEGREE for edges in (x, y))
    return rl.BlockGrid(rl.Frame(**FRAME), x, y, depth)


def layered(grid: rl.BlockGrid, velocity_km_s: Callable[[Floats], Floats]) -> rl.SlownessModel:
    """Fill blocks with the mean slowness of a velocity that depends on depth alone."""
    edges = grid.depth_edges_km
    steps = (np.arange(64) + 0.5) / 64
    depth = edges[:-1, None] + np.diff(edges)[:, None] * steps
    slowness = np.mean(1.0 / velocity_km_s(depth), axis=1)
    return rl.SlownessModel(grid, np.broadcast_to(slowness, grid.shape))


def roughened(
    model: rl.SlownessModel, kind: str, percent: float, seed: int, *, correlation: float = 4.0
) -> rl.SlownessModel:
    """Perturb the velocity of a model.

    Parameters
    ----------
    model : SlownessModel
        The background.
    kind : {"smooth", "checkerboard", "independent"}
        Correlated (a Gaussian field), 2 × 2 × 2 blocks up and down, or each block
        by itself.
    percent : float
        Bound (smooth: two standard deviations; checkerboard) or standard deviation
        (independent).
    seed : int
        Seed of the random numbers.
    correlation : float
        Number of blocks over which the correlation of the smooth model falls to 1/e.
    """
    random = np.random.default_rng(seed)
    shape = model.grid.shape
    if kind == "smooth":
        pattern = gaussian_filter(random.standard_normal(shape), 0.5 * correlation, mode="reflect")
        pattern = np.clip(pattern / (2.0 * pattern.std()), -1.0, 1.0)
    elif kind == "checkerboard":
        pattern = 1.0 - 2.0 * (sum(index // 2 for index in np.indices(shape)) % 2)
    else:
        pattern = np.clip(random.standard_normal(shape), -2.5, 2.5)
    return model.with_slowness(model.slowness_s_per_km / (1.0 + 0.01 * percent * pattern))


def mantle_like(depth_km: Floats) -> Floats:
    """Return 6 km/s at the surface, 9.75 km/s at 600 km."""
    return 6.0 + 0.00625 * depth_km


def random_points(
    grid: rl.BlockGrid, count: int, depth_km: tuple[float, float], seed: int, share: float = 0.96
) -> Floats:
    """Return points in the middle share of a grid, between two depths."""
    random = np.random.default_rng(seed)
    points = np.empty((count, 3))
    for axis, edges in enumerate((grid.x_edges, grid.y_edges)):
        middle, half = 0.5 * (edges[0] + edges[-1]), 0.5 * (edges[-1] - edges[0])
        points[:, axis] = middle + share * half * random.uniform(-1.0, 1.0, count)
    points[:, 2] = random.uniform(*depth_km, count)
    return points

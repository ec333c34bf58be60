"""How rays cross each block: from which directions, and how wide waves are there.

Main function: :func:`ray_coverage`.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import product

import numpy as np
from numpy.typing import NDArray

from rayloom.appraisal.rowspace import Floats
from rayloom.forward import Rays
from rayloom.model import BlockGrid, SlownessModel
from rayloom.units import EARTH_RADIUS_KM

_FACE_SHARE = 1e-6
"""Share of the narrowest block within which a piece counts as running along a face."""


@dataclass(frozen=True)
class Coverage:
    """Rays per block; arrays have the shape (nx, ny, nz).

    Attributes
    ----------
    hits : array of int
        Number of rays.
    ray_length_km : array
        Summed length of the rays, km.
    directional : array
        Smallest over largest eigenvalue of the length-weighted direction tensor
        Σ ℓ u uᵀ: 0 where rays share a plane or a line, 1 where they come evenly
        from all directions; NaN without rays.
    fresnel_width_km : array
        Diameter of the first Fresnel zone, averaged over the rays, km; NaN without
        rays.
    block_width_km : array
        Mean horizontal width of the block, km, to set beside it.
    """

    hits: NDArray[np.int64]
    ray_length_km: Floats
    directional: Floats
    fresnel_width_km: Floats
    block_width_km: Floats


@dataclass(frozen=True)
class _Segments:
    """Pieces of rays between neighbouring points, with their blocks."""

    ray: NDArray[np.int64]
    block: NDArray[np.int64]
    length_km: Floats
    direction: Floats
    to_station_km: Floats

    def per_block(self, values: Floats, count: int) -> Floats:
        """Sum values times length over the segments in each block."""
        summed = np.bincount(self.block, weights=self.length_km * values, minlength=count)
        return np.asarray(summed, dtype=np.float64)


def ray_coverage(
    rays: Rays,
    model: SlownessModel,
    *,
    period_s: float,
    path_km: Floats | None = None,
    chosen: NDArray[np.bool_] | None = None,
) -> Coverage:
    """Measure how rays cross the blocks.

    The first Fresnel zone holds the points whose detour is at most half a wave
    length λ: at distances d and D − d from the ends of a ray its diameter is
    2 √(λ d (D − d)/D).

    Parameters
    ----------
    rays : Rays
        Rays with their poly-lines.
    model : SlownessModel
        Velocities, for wave lengths.
    period_s : float
        Dominant period of the waves, s.
    path_km : (rays,) array, optional
        Length D of each ray from source to station, km; very long if not given.
    chosen : (rays,) bool array, optional
        The rays to count; all that exist by default.

    Returns
    -------
    Coverage

    References
    ----------
    Červený, V. & Soares, J. E. P. (1992). Fresnel volume ray tracing. Geophysics
    57, 902-915.
    """
    grid = model.grid
    counted = rays.traced if chosen is None else rays.traced & chosen
    segments = _segments(rays, counted)
    count = grid.block_count
    length = segments.per_block(np.ones(segments.ray.size), count)
    beyond = np.full(segments.ray.size, np.inf)
    if path_km is not None:
        beyond = np.maximum(path_km[segments.ray] - segments.to_station_km, 0.0)
    d = segments.to_station_km
    reduced = d / (1.0 + d / np.maximum(beyond, 1e-9))
    wavelength = period_s * np.asarray(model.velocity_km_s).ravel()[segments.block]
    fresnel = segments.per_block(2.0 * np.sqrt(wavelength * reduced), count)
    with np.errstate(invalid="ignore", divide="ignore"):
        fresnel_width = np.where(length > 0.0, fresnel / length, np.nan)
    widths = grid.widths
    horizontal = 0.5 * (widths.x_km[:, None, None] + widths.y_km[:, None])
    return Coverage(
        hits=_hits(rays, counted).reshape(grid.shape),
        ray_length_km=length.reshape(grid.shape),
        directional=_eigenvalue_ratio(segments, count).reshape(grid.shape),
        fresnel_width_km=fresnel_width.reshape(grid.shape),
        block_width_km=np.broadcast_to(horizontal, grid.shape),
    )


def chord_km(distance_deg: Floats) -> Floats:
    """Straight distance between two points of the surface, km, a short measure of a ray."""
    return np.asarray(2.0 * EARTH_RADIUS_KM * np.sin(0.5 * np.radians(distance_deg)))


def _hits(rays: Rays, counted: NDArray[np.bool_]) -> NDArray[np.int64]:
    paths = rays.path_lengths
    row = np.repeat(np.arange(len(rays)), np.diff(paths.indptr))
    crossed = counted[row] & (paths.data > 0.0)
    return np.bincount(paths.indices[crossed], minlength=rays.grid.block_count)


def _segments(rays: Rays, counted: NDArray[np.bool_]) -> _Segments:
    points, offsets = rays.all_points, rays.point_offsets
    ray_of_point = np.repeat(np.arange(len(rays)), np.diff(offsets))
    inner = (ray_of_point[1:] == ray_of_point[:-1]) & counted[ray_of_point[:-1]]
    start, end = points[:-1][inner], points[1:][inner]
    ray = ray_of_point[:-1][inner]
    step = _local_km(rays.grid, start, end)
    length = np.linalg.norm(step, axis=1)
    whole = np.bincount(ray, weights=length, minlength=len(rays))
    before = np.cumsum(length) - length
    first = np.searchsorted(ray, np.arange(len(rays)))
    done = before - np.append(before, 0.0)[first][ray]
    block = _blocks(rays, ray, 0.5 * (start + end))
    used = (block >= 0) & (length > 0.0)
    return _Segments(
        ray=ray[used],
        block=block[used],
        length_km=length[used],
        direction=step[used] / length[used, None],
        to_station_km=np.maximum(whole[ray] - done - 0.5 * length, 0.0)[used],
    )


def _blocks(rays: Rays, ray: NDArray[np.int64], middle: Floats) -> NDArray[np.int64]:
    """Find the block of each piece; of the blocks at a face, the one that the ray is in."""
    grid = rays.grid
    block = grid.locate(middle)
    edges = (grid.x_edges, grid.y_edges, grid.depth_edges_km)
    offsets = np.array([_FACE_SHARE * np.diff(axis).min() for axis in edges])
    beside = [grid.locate(middle + sign * offsets) for sign in (-1.0, 1.0)]
    at_face = np.flatnonzero(beside[0] != beside[1])
    paths, count = rays.path_lengths, grid.block_count
    row = np.repeat(np.arange(len(rays)), np.diff(paths.indptr))
    crossed = row * count + paths.indices
    order = np.argsort(crossed)
    best = np.zeros(at_face.size)
    for signs in product((-1.0, 1.0), repeat=3):
        tried = grid.locate(middle[at_face] + signs * offsets)
        key = ray[at_face] * count + np.maximum(tried, 0)
        place = np.minimum(np.searchsorted(crossed, key, sorter=order), crossed.size - 1)
        same = (crossed[order[place]] == key) & (tried >= 0)
        length = np.where(same, paths.data[order[place]], 0.0)
        block[at_face] = np.where(length > best, tried, block[at_face])
        best = np.maximum(best, length)
    return block


def _local_km(grid: BlockGrid, start: Floats, end: Floats) -> Floats:
    """Turn steps into km along local x, y and up; exact to second order in their length."""
    change = end - start
    if grid.frame.is_flat:
        return np.asarray(change * [1.0, 1.0, -1.0])
    middle = 0.5 * (start + end)
    radius = EARTH_RADIUS_KM - middle[:, 2]
    along_x = radius * np.cos(np.radians(middle[:, 1])) * np.radians(change[:, 0])
    return np.column_stack([along_x, radius * np.radians(change[:, 1]), -change[:, 2]])


def _eigenvalue_ratio(segments: _Segments, count: int) -> Floats:
    tensor = np.zeros((count, 3, 3))
    for i in range(3):
        for j in range(i, 3):
            sums = segments.per_block(segments.direction[:, i] * segments.direction[:, j], count)
            tensor[:, i, j] = tensor[:, j, i] = sums
    ratio = np.full(count, np.nan)
    crossed = np.trace(tensor, axis1=1, axis2=2) > 0.0
    values = np.linalg.eigvalsh(tensor[crossed])
    ratio[crossed] = np.clip(values[:, 0] / values[:, 2], 0.0, 1.0)
    return ratio

"""Between the package's coordinates and those of the Rust core.

The core works in kilometres throughout: on the sphere, x and y are arcs at the
Earth's reference radius.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.sparse import csr_array

from rayloom import _core
from rayloom.errors import InputError
from rayloom.forward.bound_check import BoundCheck
from rayloom.forward.rays import Rays
from rayloom.forward.settings import LengthsType
from rayloom.model import BlockGrid, SlownessModel
from rayloom.units import EARTH_RADIUS_KM, KM_PER_DEGREE

Floats = NDArray[np.float64]


def km_per_unit(grid: BlockGrid) -> float:
    """Kilometres per unit of x and y of a grid."""
    return 1.0 if grid.frame.is_flat else KM_PER_DEGREE


def block_model(model: SlownessModel) -> _core.BlockModel:
    """Hand a model's edges and slowness to the core."""
    grid = model.grid
    scale = km_per_unit(grid)
    return _core.BlockModel(
        np.ascontiguousarray(grid.x_edges * scale),
        np.ascontiguousarray(grid.y_edges * scale),
        np.ascontiguousarray(grid.depth_edges_km, dtype=np.float64),
        np.ascontiguousarray(model.slowness_s_per_km.ravel()),
        radius_km=None if grid.frame.is_flat else EARTH_RADIUS_KM,
    )


def points_km(grid: BlockGrid, points: ArrayLike) -> Floats:
    """Convert points, shape (n, 3), to the core's kilometres."""
    scale = km_per_unit(grid)
    return np.ascontiguousarray(np.asarray(points, dtype=np.float64) * [scale, scale, 1.0])


def polylines_km(rays: Rays, kept: NDArray[np.bool_]) -> tuple[NDArray[np.int64], Floats]:
    """Offsets and points, in the core's kilometres, of some rays' poly-lines."""
    lengths = np.diff(rays.point_offsets)
    points = rays.all_points
    if not kept.all():
        points = points[np.repeat(kept, lengths)]
        lengths = lengths[kept]
    offsets = np.concatenate([[0], np.cumsum(lengths)])
    return offsets, points_km(rays.grid, points)


def checked_points(name: str, points: ArrayLike) -> Floats:
    """Check an array of points.

    Raises
    ------
    InputError
        If the shape is not (n, 3) or a value is not finite.
    """
    array = np.atleast_2d(np.asarray(points, dtype=np.float64))
    if array.ndim != 2 or array.shape[1] != 3:
        raise InputError(
            f"expected shape (n, 3): x, y, depth_km; got {np.shape(points)}", where=name
        )
    if not np.isfinite(array).all():
        row = int(np.flatnonzero(~np.isfinite(array).all(axis=1))[0])
        raise InputError(f"expected finite values, row {row} is {array[row]}", where=name)
    return array


def checked_pairs(pairs: ArrayLike | None, first: int, second: int) -> NDArray[np.uint32]:
    """Check pairs of indices; all of them, first-major, for ``None``.

    Raises
    ------
    InputError
        If the shape is not (k, 2) or an index is out of range.
    """
    if pairs is None:
        both = np.indices((first, second)).reshape(2, -1).T
        return np.ascontiguousarray(both, dtype=np.uint32)
    array = np.asarray(pairs)
    if array.size == 0:
        return np.zeros((0, 2), dtype=np.uint32)
    if array.ndim != 2 or array.shape[1] != 2 or not np.issubdtype(array.dtype, np.integer):
        raise InputError(
            f"expected integers of shape (k, 2), got {array.dtype} of shape {array.shape}",
            where="pairs",
        )
    inside = (array >= 0) & (array < [first, second])
    if not inside.all():
        row = int(np.flatnonzero(~inside.all(axis=1))[0])
        raise InputError(
            f"row {row} is {array[row].tolist()}; indices must be below {first} and {second}",
            where="pairs",
        )
    return np.ascontiguousarray(array, dtype=np.uint32)


def rays_of(
    grid: BlockGrid,
    arrays: _core.RayArrays,
    *,
    lengths_dtype: LengthsType = "float64",
    problems: dict[str, int] | None = None,
) -> Rays:
    """Wrap the core's arrays, whose points change to the package's units."""
    shape = (len(arrays.time_s), grid.block_count)
    lengths_km = arrays.lengths_km.astype(lengths_dtype, copy=False)
    path_lengths = csr_array((lengths_km, arrays.columns, arrays.row_pointers), shape=shape)
    path_lengths.has_sorted_indices = True
    path_lengths.has_canonical_format = True
    points = arrays.points_km
    points[:, :2] *= 1.0 / km_per_unit(grid)
    return Rays(
        grid=grid,
        time_s=arrays.time_s,
        outside_time_s=arrays.outside_time_s,
        path_lengths=path_lengths,
        traced=arrays.traced,
        point_offsets=arrays.point_offsets,
        all_points=points,
        problems=problems or {},
        bound_check=BoundCheck(*arrays.bound_check),
    )

"""The perturbation of one model in the blocks of another.

:func:`with_perturbation_of` takes it from a model, :func:`with_perturbation_of_file` from a
netCDF file of rayloom or of others.
"""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from typing import Final

import numpy as np
from numpy.typing import NDArray

from rayloom.errors import InputError
from rayloom.model.dataset import model_of
from rayloom.model.grid import BlockGrid
from rayloom.model.netcdf import load_dataset
from rayloom.model.point_values import ratio_from_points
from rayloom.model.slowness import SlownessModel

Floats = NDArray[np.float64]

POINTS_PER_AXIS: Final = 4
"""Sample points along each axis of a block."""


def with_perturbation_of(model: SlownessModel, source: SlownessModel) -> SlownessModel:
    """Return a model with the perturbation of another one.

    Parameters
    ----------
    model : SlownessModel
        Blocks and reference to keep.
    source : SlownessModel
        Whose slowness over reference is taken.

    Returns
    -------
    SlownessModel
        Blocks and reference of `model`; slowness is the reference times the mean of the
        source's ratio over each block. With the same blocks and reference it is the
        source's slowness to the last bit.

    Raises
    ------
    InputError
        If the waves differ, one of the two is flat and the other not, or no block of
        the two overlap.

    Notes
    -----
    The mean is taken over 4 × 4 × 4 points, evenly spread in each block; points outside
    the source count as unperturbed. It is the ratio that is carried over and not the
    slowness, so that blocks that cut a discontinuity elsewhere get no perturbation from
    it; a difference between the two references is not carried over.
    """
    if model.wave != source.wave:
        raise InputError(
            f"holds a model of {source.wave} waves; expected one of {model.wave} waves",
            where="wave",
        )
    if model.grid == source.grid and np.array_equal(model.reference, source.reference):
        return model.with_slowness(source.slowness_s_per_km)
    if model.grid.frame.is_flat != source.grid.frame.is_flat:
        raise InputError("one model is flat, the other lies on the sphere", where="frame")
    ratio = (source.slowness_s_per_km / source.reference).ravel()
    total = np.zeros(model.grid.shape)
    overlap = False
    for points in _sample_points(model.grid, source.grid):
        block = source.grid.locate(points)
        overlap |= bool((block >= 0).any())
        total += np.where(block >= 0, ratio[np.maximum(block, 0)], 1.0)
    if not overlap:
        raise InputError(
            "its blocks do not overlap those of the run; check both grids", where="grid"
        )
    return model.with_slowness(model.reference * (total / POINTS_PER_AXIS**3))


def with_perturbation_of_file(model: SlownessModel, path: str | Path) -> SlownessModel:
    """Return a model with the perturbation that a netCDF file holds.

    Parameters
    ----------
    model : SlownessModel
        Blocks and reference to keep.
    path : str or Path
        A model file of rayloom (:func:`with_perturbation_of`), or values at points of
        longitude, latitude and depth: perturbations in percent, or velocities, whose
        mean slowness over each block is set against the reference of the block
        (:func:`rayloom.model.point_values.ratio_from_points`).

    Returns
    -------
    SlownessModel

    Raises
    ------
    FileAccessError
        If the file cannot be read.
    InputError
        If it holds no model of that wave, or covers none of the blocks.
    """
    dataset = load_dataset(Path(path))
    if "slowness" in dataset or "wave" in dataset.attrs:
        return with_perturbation_of(model, model_of(dataset))
    if model.grid.frame.is_flat:
        raise InputError("its points lie on the sphere, the blocks of the run in a flat frame")
    ratio = ratio_from_points(dataset, model, _geographic_points(model.grid))
    return model.with_slowness(model.reference * ratio)


def _geographic_points(grid: BlockGrid) -> Iterator[Floats]:
    """Give a point of every block as longitude, latitude and depth, place by place."""
    for points in _sample_points(grid, grid):
        longitude, latitude = grid.frame.geographic_coordinates(points[..., 0], points[..., 1])
        yield np.stack([longitude, latitude, points[..., 2]], axis=-1)


def _sample_points(grid: BlockGrid, other: BlockGrid) -> Iterator[Floats]:
    """Give a point of every block, (nx, ny, nz, 3), in the other's frame, place by place."""
    shares = (np.arange(POINTS_PER_AXIS) + 0.5) / POINTS_PER_AXIS
    for across in shares:
        for along in shares:
            x = grid.x_edges[:-1] + across * np.diff(grid.x_edges)
            y = grid.y_edges[:-1] + along * np.diff(grid.y_edges)
            place = _place_in(grid, other, x[:, None], y[None, :])
            for down in shares:
                depth = grid.depth_edges_km[:-1] + down * np.diff(grid.depth_edges_km)
                axes = (place[0][..., None], place[1][..., None], depth)
                yield np.stack(np.broadcast_arrays(*axes), axis=-1)


def _place_in(grid: BlockGrid, other: BlockGrid, x: Floats, y: Floats) -> tuple[Floats, Floats]:
    if grid.frame == other.frame:
        x, y = np.broadcast_arrays(x, y)
        return x, y
    return other.frame.local_coordinates(*grid.frame.geographic_coordinates(x, y))

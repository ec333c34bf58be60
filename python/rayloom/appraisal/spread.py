"""Point-spread: what one block becomes, and what one block is made of.

Main function: :func:`point_spread`.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from rayloom.appraisal.rowspace import Floats, RowSpace
from rayloom.appraisal.samples import MOST_ITERATIONS, TOLERANCE
from rayloom.errors import InputError
from rayloom.inversion import LinearisedProblem
from rayloom.model import BlockGrid


@dataclass(frozen=True)
class FullWidth:
    """Full widths at half height through the block, km; infinite where the box ends first.

    Attributes
    ----------
    x_km, y_km, depth_km : float
        Along the axes of the frame.
    """

    x_km: float
    y_km: float
    depth_km: float

    @property
    def longest(self) -> str:
        """The direction of the largest width: "x", "y" or "depth"."""
        sizes = {"x": self.x_km, "y": self.y_km, "depth": self.depth_km}
        return max(sizes, key=lambda name: sizes[name])


@dataclass(frozen=True)
class PointSpread:
    """Row and column of the resolution matrix of one block.

    Attributes
    ----------
    block : tuple of int
        Index (ix, iy, iz).
    point : tuple of float
        Centre of the block: x, y in the frame, depth in km.
    column : (nx, ny, nz) array
        What the inversion finds of a perturbation of 1 in this block alone.
    row : (nx, ny, nz) array
        Weights with which the true perturbations of all blocks enter the one found
        in this block.
    column_width, row_width : FullWidth
        Full widths at half height of both.
    """

    block: tuple[int, int, int]
    point: tuple[float, float, float]
    column: Floats
    row: Floats
    column_width: FullWidth
    row_width: FullWidth

    @property
    def diagonal(self) -> float:
        """R_ii."""
        return float(self.column[self.block])


def point_spread(
    problem: LinearisedProblem,
    points: Sequence[tuple[float, float, float]],
    *,
    space: RowSpace | None = None,
) -> list[PointSpread]:
    """Work out rows and columns of the resolution matrix exactly.

    Parameters
    ----------
    problem : LinearisedProblem
        A finished inversion.
    points : sequence of (x, y, depth_km)
        Points in the frame (degrees of arc, or km in a flat frame); each names the
        block that holds it.
    space : RowSpace, optional
        The problem's row space, if it is at hand.

    Returns
    -------
    list of PointSpread
        In the order of the points.

    Raises
    ------
    InputError
        If a point lies outside the blocks.
    """
    grid = problem.model.grid
    blocks = grid.locate(np.asarray(points, dtype=np.float64).reshape(-1, 3))
    for point, block in zip(points, blocks.tolist(), strict=True):
        if block < 0:
            raise InputError(f"the point {tuple(point)} of a point-spread lies outside the blocks")
    space = RowSpace.of_problem(problem) if space is None else space
    units = np.zeros((space.parameter_count, blocks.size))
    units[blocks, np.arange(blocks.size)] = 1.0
    covaried = space.covary(units)
    both = np.hstack([space.predicted(units), space.predicted(covaried)])
    found = space.solve(both, tolerance=0.1 * TOLERANCE, max_iterations=MOST_ITERATIONS).rows
    gathered = space.gathered(found)
    columns = space.covary(gathered[:, : blocks.size])[: grid.block_count]
    rows = gathered[: grid.block_count, blocks.size :]
    return [
        _spread(grid, int(block), column.reshape(grid.shape), row.reshape(grid.shape))
        for block, column, row in zip(blocks, columns.T, rows.T, strict=True)
    ]


def _spread(grid: BlockGrid, block: int, column: Floats, row: Floats) -> PointSpread:
    ix, iy, iz = (int(index) for index in np.unravel_index(block, grid.shape))
    return PointSpread(
        block=(ix, iy, iz),
        point=(
            float(grid.x_centres[ix]),
            float(grid.y_centres[iy]),
            float(grid.depth_centres_km[iz]),
        ),
        column=column,
        row=row,
        column_width=full_width(grid, column, (ix, iy, iz)),
        row_width=full_width(grid, row, (ix, iy, iz)),
    )


def full_width(grid: BlockGrid, values: Floats, block: tuple[int, int, int]) -> FullWidth:
    """Full widths at half height along the three axes through a block.

    Heights are per volume, so that blocks of unequal thickness compare, and
    interpolated between block centres.

    Parameters
    ----------
    grid : BlockGrid
        The blocks.
    values : (nx, ny, nz) array
        A row or a column of the resolution matrix.
    block : tuple of int
        The block through which the lines run.
    """
    ix, iy, iz = block
    widths = grid.widths
    x = _half_height(values[:, iy, iz], widths.x_km, ix)
    y = _half_height(values[ix, :, iz], widths.y_km, iy)
    return FullWidth(x, y, _half_height(values[ix, iy, :], widths.depth_km, iz))


def _half_height(line: Floats, width_km: Floats, index: int) -> float:
    centre = np.cumsum(width_km) - 0.5 * width_km
    density = line / width_km
    half = 0.5 * density[index]
    if half <= 0.0:
        return float("nan")
    ahead = _distance(density[index:], centre[index:] - centre[index], half)
    behind = _distance(density[index::-1], centre[index] - centre[index::-1], half)
    return ahead + behind


def _distance(density: Floats, distance_km: Floats, half: float) -> float:
    below = np.flatnonzero(density < half)
    if below.size == 0:
        return float("inf")
    last = int(below[0])
    before, after = density[last - 1], density[last]
    share = (before - half) / (before - after)
    return float(distance_km[last - 1] + share * (distance_km[last] - distance_km[last - 1]))

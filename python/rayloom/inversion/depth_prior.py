"""What the prior believes of depth: how large, and where neighbours hardly correlate."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from rayloom.errors import InputError
from rayloom.model import BlockGrid

_AT_AN_EDGE_KM = 1.0


def factor_of_blocks(
    grid: BlockGrid, by_depth: Sequence[tuple[float, float]]
) -> NDArray[np.float64]:
    """Read the factor of each block's standard deviation off a table over depth, (blocks,).

    Parameters
    ----------
    grid : BlockGrid
        The blocks.
    by_depth : sequence of (depth, factor)
        Rising depths, km; linear in between, constant beyond; 1 if empty.
    """
    if not by_depth:
        return np.ones(grid.block_count)
    depth_km, factor = np.transpose(np.asarray(by_depth, dtype=np.float64))
    per_layer = np.interp(grid.depth_centres_km, depth_km, factor)
    return np.broadcast_to(per_layer, grid.shape).ravel()


def coupling_across_edges(
    grid: BlockGrid, depths_km: Sequence[float], share: float
) -> NDArray[np.float64] | None:
    """Factor of the flux across each inner edge in depth, (nz − 1,); None if all are 1.

    Parameters
    ----------
    grid : BlockGrid
        The blocks.
    depths_km : sequence of float
        Discontinuities, km; those outside the box are ignored.
    share : float
        The factor at them.

    Raises
    ------
    InputError
        If a discontinuity lies within a layer of blocks.
    """
    inner = grid.depth_edges_km[1:-1]
    top, bottom = grid.depth_edges_km[[0, -1]]
    coupling = np.ones(inner.size)
    for depth in depths_km:
        if not top < depth < bottom:
            continue
        nearest = int(np.argmin(np.abs(inner - depth))) if inner.size else -1
        if nearest < 0 or abs(inner[nearest] - depth) > _AT_AN_EDGE_KM:
            layer = int(np.searchsorted(grid.depth_edges_km, depth)) - 1
            above, below = grid.depth_edges_km[layer : layer + 2]
            raise InputError(
                f"{depth:g} km lies within the layer of blocks from {above:g} to {below:g} km; "
                "expected the depth of an edge between layers, so move an edge there",
                where="inversion.decoupled_depths_km",
            )
        coupling[nearest] = share
    return coupling if np.any(coupling != 1.0) else None

"""Measure the strongest slow or fast body of a model."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rayloom.demo.structure import block_positions
from rayloom.model import BlockGrid

Floats = NDArray[np.float64]
Flags = NDArray[np.bool_]


@dataclass(frozen=True)
class Body:
    """A connected anomaly.

    Parameters
    ----------
    east_km, north_km, depth_km : float
        Centroid, weighted by perturbation times volume.
    peak_percent : float
        Strongest perturbation inside, with its sign.
    volume_km3 : float
        Volume of its blocks.
    top_km, base_km : float
        Depths between which its blocks lie.
    """

    east_km: float
    north_km: float
    depth_km: float
    peak_percent: float
    volume_km3: float
    top_km: float
    base_km: float


def strongest_body(grid: BlockGrid, percent: Floats, usable: Flags, sign: int) -> Body | None:
    """Find the blocks that reach half the strongest perturbation and connect with it.

    Parameters
    ----------
    grid : BlockGrid
        The blocks.
    percent : (nx, ny, nz) array
        Velocity perturbation in percent.
    usable : (nx, ny, nz) bool array
        Blocks that may belong to a body.
    sign : int
        -1 for a slow body, +1 for a fast one.

    Returns
    -------
    Body or None
        None where no usable block has a perturbation of that sign.

    Notes
    -----
    Blocks are connected through faces. Nothing but the model decides: neither
    the place nor the strength of an expected body enters.
    """
    from scipy import ndimage

    strength = np.where(usable, sign * percent, 0.0)
    peak = strength.max(initial=0.0)
    if peak <= 0.0:
        return None
    labels, _ = ndimage.label(strength >= 0.5 * peak)
    inside = labels == labels.flat[int(np.argmax(strength))]
    volumes_km3 = np.broadcast_to(grid.volumes_km3, grid.shape)[inside]
    weights = strength[inside] * volumes_km3
    east_km, north_km, depth_km = (
        float(np.average(position[inside], weights=weights)) for position in block_positions(grid)
    )
    layers = np.flatnonzero(inside.any(axis=(0, 1)))
    return Body(
        east_km=east_km,
        north_km=north_km,
        depth_km=depth_km,
        peak_percent=float(sign * peak),
        volume_km3=float(volumes_km3.sum()),
        top_km=float(grid.depth_edges_km[layers[0]]),
        base_km=float(grid.depth_edges_km[layers[-1] + 1]),
    )

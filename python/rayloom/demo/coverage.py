"""Where a model of the demo may be judged, and against which mean."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from rayloom.model import BlockGrid

Floats = NDArray[np.float64]
Flags = NDArray[np.bool_]

CELL_KM = 50.0
"""Size of the cell that rays are counted in, whatever the size of the blocks."""


def covered_blocks(grid: BlockGrid, ray_length_km: Floats, *, minimum_rays: float) -> Flags:
    """Mark the blocks whose surroundings are crossed by enough rays.

    Parameters
    ----------
    grid : BlockGrid
        The blocks.
    ray_length_km : (nx, ny, nz) array
        Length of all rays in each block.
    minimum_rays : float
        Rays needed per cell of 50 km.

    Returns
    -------
    (nx, ny, nz) bool array
        True where covered.

    Notes
    -----
    Rays are counted as ray length per volume times the cell's cross-section,
    averaged over about one cell. Single blocks would not do: bent rays avoid
    slow blocks, and small blocks catch few rays though a model correlated over
    several of them is known from all.
    """
    from scipy import ndimage

    widths = grid.widths
    window = [
        max(1, round(CELL_KM / float(np.median(width_km))))
        for width_km in (widths.x_km, widths.y_km, widths.depth_km)
    ]
    volumes_km3 = np.broadcast_to(grid.volumes_km3, grid.shape)
    length_km, volume_km3 = (
        ndimage.uniform_filter(values, window, mode="constant")
        for values in (ray_length_km, volumes_km3)
    )
    return np.asarray(length_km / volume_km3 * CELL_KM**2 >= minimum_rays)


def relative_to_layers(percent: Floats, usable: Flags) -> Floats:
    """Subtract the median of the usable blocks from each layer.

    Relative arrival times of distant events hold no layer means: a uniform layer
    delays all rays of an event alike. Layers without usable blocks stay.

    Parameters
    ----------
    percent : (nx, ny, nz) array
        Velocity perturbation in percent.
    usable : (nx, ny, nz) bool array
        Blocks to take the median of.
    """
    relative = percent.copy()
    for layer in np.flatnonzero(usable.any(axis=(0, 1))):
        relative[:, :, layer] -= np.median(percent[:, :, layer][usable[:, :, layer]])
    return relative

"""Where bodies are: connected anomalies of the mean model, fixed for all samples.

Main type: :class:`BodyRegion`, found by :func:`find_regions`.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rayloom.model import BlockGrid

Floats = NDArray[np.float64]
Flags = NDArray[np.bool_]

_MARGIN_BLOCKS = 2
"""How far a sample's body may reach beyond that of the mean model."""


@dataclass(frozen=True)
class BodyRegion:
    """The blocks of one body.

    Attributes
    ----------
    name : str
        "slow 1", "fast 1", …: the largest of its sign first.
    sign : int
        −1 slow, +1 fast.
    mask : (nx, ny, nz) bool array
        Blocks of the body in the mean model.
    domain : (nx, ny, nz) bool array
        Those and their neighbours, none of another body's: where a sample's
        body may reach.
    """

    name: str
    sign: int
    mask: Flags
    domain: Flags


def relative_to_layers(grid: BlockGrid, percent: Floats, usable: Flags) -> Floats:
    """Take each layer's median over usable blocks off: relative times do not see it.

    Parameters
    ----------
    grid : BlockGrid
        The blocks.
    percent : (..., nx, ny, nz) array
        Velocity perturbations, percent.
    usable : (nx, ny, nz) bool array
        Blocks that the medians are taken over; layers without any keep their values.

    Returns
    -------
    (..., nx, ny, nz) array
    """
    relative = np.array(percent, dtype=np.float64)
    for layer in range(grid.shape[2]):
        inside = usable[:, :, layer]
        if inside.any():
            values = relative[..., layer]
            values -= np.median(values[..., inside], axis=-1)[..., None, None]
    return relative


def find_regions(
    grid: BlockGrid,
    percent: Floats,
    usable: Flags,
    *,
    threshold_percent: float,
    min_volume_km3: float,
) -> tuple[BodyRegion, ...]:
    """Find the connected anomalies of a model.

    Parameters
    ----------
    grid : BlockGrid
        The blocks.
    percent : (nx, ny, nz) array
        Mean model relative to the regional mean, percent.
    usable : (nx, ny, nz) bool array
        Blocks that may belong to a body: well enough resolved.
    threshold_percent : float
        Smallest |dV| of a body's blocks.
    min_volume_km3 : float
        Smallest volume, km³.

    Returns
    -------
    tuple of BodyRegion
        Slow ones, then fast ones, the largest of each sign first.
    """
    masks = [
        (sign, mask)
        for sign in (-1, 1)
        for mask in _components(grid, usable & (sign * percent >= threshold_percent))
        if _volume_km3(grid, mask) >= min_volume_km3
    ]
    number = {-1: 0, 1: 0}
    regions = []
    for sign, mask in masks:
        number[sign] += 1
        others = [other for _, other in masks if other is not mask]
        regions.append(
            BodyRegion(
                name=f"{'slow' if sign < 0 else 'fast'} {number[sign]}",
                sign=sign,
                mask=mask,
                domain=_domain(mask, usable, others),
            )
        )
    return tuple(regions)


def main_component(grid: BlockGrid, inside: Flags, mask: Flags) -> Flags:
    """Keep the connected part that shares the most volume with a mask; none if none does.

    Parameters
    ----------
    grid : BlockGrid
        The blocks.
    inside : (nx, ny, nz) bool array
        Blocks in question.
    mask : (nx, ny, nz) bool array
        The body of the mean model.
    """
    from scipy import ndimage

    labels, count = ndimage.label(inside)
    volumes = np.broadcast_to(grid.volumes_km3, grid.shape)
    shared = np.bincount(labels[mask], weights=volumes[mask], minlength=count + 1)
    shared[0] = 0.0
    if not shared.max(initial=0.0) > 0.0:
        return np.zeros(grid.shape, dtype=bool)
    return np.asarray(labels == int(np.argmax(shared)))


def _components(grid: BlockGrid, inside: Flags) -> list[Flags]:
    """Split into parts connected through faces, the largest first."""
    from scipy import ndimage

    labels, count = ndimage.label(inside)
    parts = [np.asarray(labels == number) for number in range(1, count + 1)]
    return sorted(parts, key=lambda part: -_volume_km3(grid, part))


def _volume_km3(grid: BlockGrid, inside: Flags) -> float:
    return float(np.broadcast_to(grid.volumes_km3, grid.shape)[inside].sum())


def _domain(mask: Flags, usable: Flags, others: list[Flags]) -> Flags:
    from scipy import ndimage

    grown = np.asarray(ndimage.binary_dilation(mask, iterations=_MARGIN_BLOCKS, mask=usable))
    for other in others:
        grown &= ~other
    return grown

"""How far up and down the data demand a body to reach.

Main function: :func:`extent_of`. Structure is forbidden below (above) one
depth after the other, in the block columns of the body and its surroundings only.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rayloom.appraisal.bodies.finding import Body
from rayloom.appraisal.compressed import CompressedData
from rayloom.appraisal.squeezing import DepthScan, scan_depths
from rayloom.model import BlockGrid

_BEYOND_KM = 50.0
"""How far beyond a body's estimated ends cuts are tried."""


@dataclass(frozen=True)
class BodyExtent:
    """Squeezing of one body from below and from above.

    Attributes
    ----------
    below, above : DepthScan
        Structure forbidden below, and above, rising depths.
    base_km, top_km : float
        The body's ends as the samples have them (medians).
    """

    below: DepthScan
    above: DepthScan
    base_km: float
    top_km: float

    @property
    def demanded_base_km(self) -> float:
        """Depth that the data demand the body's columns to hold structure below, NaN if none."""
        return self.below.demanded_km()

    @property
    def demanded_top_km(self) -> float:
        """Depth that the data demand them to hold structure above, NaN if none."""
        return self.above.demanded_km()

    @property
    def base_p_value(self) -> float:
        """p-value of the deepest cut above the base: that the body does not reach its base."""
        inside = self.below.depth_km < self.base_km
        return float(self.below.p_value[inside][-1]) if inside.any() else float("nan")

    @property
    def top_p_value(self) -> float:
        """p-value of the shallowest cut below the top: that the body does not reach its top."""
        inside = self.above.depth_km > self.top_km
        return float(self.above.p_value[inside][0]) if inside.any() else float("nan")


def extent_of(
    compressed: CompressedData,
    grid: BlockGrid,
    body: Body,
    *,
    most_cuts: int = 10,
    simulations: int = 200,
    seed: int = 1,
    progress: Callable[[int, int], None] | None = None,
) -> BodyExtent:
    """Squeeze a body from below and from above.

    Parameters
    ----------
    compressed : CompressedData
        The data.
    grid : BlockGrid
        The blocks.
    body : Body
        The body; the columns are those of its domain.
    most_cuts : int, optional
        Most depths tried from each side.
    simulations, seed
        As for :func:`rayloom.appraisal.squeezing.squeeze`.
    progress : callable, optional
        Told (depths done, depths in all), for either side.

    Returns
    -------
    BodyExtent
    """
    columns = np.asarray(body.region.domain.any(axis=2))
    top, base = (body.interval(name).estimate for name in ("top_km", "base_km"))
    cuts = cut_depths_km(grid, top, base, most=most_cuts)
    below, above = (
        scan_depths(
            compressed,
            grid,
            side,
            cuts,
            columns=columns,
            simulations=simulations,
            seed=seed,
            progress=progress,
        )
        for side in ("below", "above")
    )
    return BodyExtent(below=below, above=above, base_km=base, top_km=top)


def cut_depths_km(
    grid: BlockGrid, top_km: float, base_km: float, *, most: int
) -> NDArray[np.float64]:
    """Choose layer edges from above a body to below it, evenly if there are many.

    Parameters
    ----------
    grid : BlockGrid
        The blocks.
    top_km, base_km : float
        The body's ends, km.
    most : int
        Most edges.

    Returns
    -------
    (n,) array
        Depths, rising, km.
    """
    edges = grid.depth_edges_km[1:-1]
    near = edges[(edges >= top_km - _BEYOND_KM) & (edges <= base_km + _BEYOND_KM)]
    chosen = np.linspace(0, near.size - 1, min(most, near.size)).round().astype(int)
    return np.asarray(near[np.unique(chosen)])

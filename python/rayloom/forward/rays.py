"""Traced rays: times, path lengths and poly-lines."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.sparse import csr_array

from rayloom.model import BlockGrid

Floats = NDArray[np.float64]

SAME_COURSE_SHARE = 0.5
"""Two rays that share less of their length, block by block, run in different basins."""


@dataclass(frozen=True, eq=False)
class Rays:
    """Rays of k pairs, in the order of the pairs.

    Attributes
    ----------
    grid : BlockGrid
        The blocks they run through.
    time_s : ndarray, shape (k,)
        Travel times from the event or source to the receiver, s; NaN without a ray.
    outside_time_s : ndarray, shape (k,)
        The part of them outside the blocks, s; zero for sources inside.
    path_lengths : csr_array, shape (k, grid.block_count)
        Length of each ray in each block, km.
    traced : ndarray of bool, shape (k,)
        Whether a ray exists.
    point_offsets : ndarray of int, shape (k + 1,)
        Where each poly-line begins in `all_points`.
    all_points : ndarray, shape (n, 3)
        Poly-lines from the entry or source to the receiver: x, y (degrees, or km in
        a flat frame) and depth_km, one after the other.
    basin_jumps : int
        Rays that took another course than in the rays they were compared with.
    problems : dict of str to int
        Why rays are missing, with their number.
    """

    grid: BlockGrid
    time_s: Floats
    outside_time_s: Floats
    path_lengths: csr_array
    traced: NDArray[np.bool_]
    point_offsets: NDArray[np.int64]
    all_points: Floats
    basin_jumps: int = 0
    problems: dict[str, int] = field(default_factory=dict)

    def __len__(self) -> int:
        return len(self.time_s)

    def __repr__(self) -> str:
        return (
            f"Rays({int(self.traced.sum())} of {len(self)} pairs, {self.grid.block_count} blocks)"
        )

    @property
    def entry(self) -> Floats:
        """First point of each ray, shape (k, 3): x, y, depth_km; NaN without a ray."""
        entry = np.full((len(self), 3), np.nan)
        entry[self.traced] = self.all_points[self.point_offsets[:-1][self.traced]]
        return entry

    def points(self, ray: int) -> Floats:
        """Return one poly-line.

        Parameters
        ----------
        ray : int
            Row of the ray.

        Returns
        -------
        ndarray, shape (m, 3)
            x, y (degrees or km) and depth_km from the entry or source to the receiver;
            empty without a ray.
        """
        start, end = self.point_offsets[ray : ray + 2]
        return self.all_points[start:end]

    def predict_s(self, slowness_s_per_km: ArrayLike) -> Floats:
        """Time other slownesses along the same paths.

        Parameters
        ----------
        slowness_s_per_km : array_like, shape (nx, ny, nz)
            Slowness of the blocks, s/km.

        Returns
        -------
        ndarray, shape (k,)
            Travel times, s; NaN without a ray.
        """
        slowness = np.ravel(np.asarray(slowness_s_per_km, dtype=np.float64))
        return np.asarray(self.path_lengths @ slowness + self.outside_time_s)

    def course_changes(self, other: Rays) -> int:
        """Count rays whose course differs from that of the same pair in other rays.

        Parameters
        ----------
        other : Rays
            Rays of the same pairs in the same blocks.

        Returns
        -------
        int
            Rays that share less than half of their length, block by block.
        """
        both = self.traced & other.traced
        shared = self.path_lengths.minimum(other.path_lengths).sum(axis=1)
        length = self.path_lengths.sum(axis=1)
        return int(np.sum(shared[both] < SAME_COURSE_SHARE * length[both]))

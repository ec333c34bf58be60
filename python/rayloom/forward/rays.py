"""Traced rays: times, path lengths and poly-lines."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.sparse import csr_array

from rayloom.forward.bound_check import BoundCheck
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
        Length of each ray in each block, km; in single precision if asked for.
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
    bound_check : BoundCheck
        What a wider search found for a hundredth of the bent rays.
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
    bound_check: BoundCheck = field(default_factory=BoundCheck)

    def __len__(self) -> int:
        return len(self.time_s)

    def __getitem__(self, rows: NDArray[np.int64]) -> Rays:
        """Return the rays of some rows, in their order."""
        starts, lengths = self.point_offsets[rows], np.diff(self.point_offsets)[rows]
        offsets = np.concatenate([[0], np.cumsum(lengths)])
        within = np.arange(offsets[-1]) - np.repeat(offsets[:-1], lengths)
        return Rays(
            grid=self.grid,
            time_s=self.time_s[rows],
            outside_time_s=self.outside_time_s[rows],
            path_lengths=self.path_lengths[rows],
            traced=self.traced[rows],
            point_offsets=offsets,
            all_points=self.all_points[np.repeat(starts, lengths) + within],
        )

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

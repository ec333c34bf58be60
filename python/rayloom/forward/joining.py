"""Rays traced in parts, brought together in the order of their pairs."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass, replace
from functools import reduce
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array, vstack

from rayloom.forward.bound_check import BoundCheck
from rayloom.forward.rays import Rays
from rayloom.model import BlockGrid

Rows = NDArray[np.int64]

LARGEST_NUMBER_OF_PARTS = 64


@dataclass(frozen=True)
class Part:
    """Some of the rays.

    Attributes
    ----------
    rays : Rays
        n rays.
    rows : ndarray of int, shape (n,)
        Their rows among all pairs.
    kept : ndarray of bool, shape (n,)
        Those to keep; the others count as not traced.
    """

    rays: Rays
    rows: Rows
    kept: NDArray[np.bool_]


def joined(
    grid: BlockGrid, parts: Sequence[Part], count: int, *, problems: dict[str, int]
) -> Rays:
    """Join parts.

    Parameters
    ----------
    grid : BlockGrid
        The blocks of all rays.
    parts : sequence of Part
        No row may occur twice.
    count : int
        Number of pairs; those in no part have no ray.
    problems : dict of str to int
        Why rays are missing.

    Returns
    -------
    Rays
        In the order of the pairs.
    """
    if len(parts) == 1 and _is_whole(parts[0], count):
        return replace(parts[0].rays, problems=problems)
    rows = np.concatenate([part.rows[part.kept] for part in parts])
    order = np.argsort(rows, kind="stable")
    rows = rows[order]
    time_s, outside_time_s = np.full((2, count), np.nan)
    traced = np.zeros(count, dtype=bool)
    time_s[rows] = np.concatenate([part.rays.time_s[part.kept] for part in parts])[order]
    outside = np.concatenate([part.rays.outside_time_s[part.kept] for part in parts])
    outside_time_s[rows] = outside[order]
    traced[rows] = np.concatenate([part.rays.traced[part.kept] for part in parts])[order]
    paths = csr_array(vstack([part.rays.path_lengths[part.kept] for part in parts]))[order]
    path_lengths = csr_array(
        (paths.data, paths.indices, _starts(rows, np.diff(paths.indptr), count)),
        shape=(count, grid.block_count),
    )
    points, lengths = _points(parts, order)
    return Rays(
        grid=grid,
        time_s=time_s,
        outside_time_s=outside_time_s,
        path_lengths=path_lengths,
        traced=traced,
        point_offsets=_starts(rows, lengths, count),
        all_points=points,
        problems=problems,
        bound_check=reduce(BoundCheck.joined, (part.rays.bound_check for part in parts)),
    )


def _is_whole(part: Part, count: int) -> bool:
    return bool(part.kept.all()) and np.array_equal(part.rows, np.arange(count))


def _starts(rows: Rows, lengths: Rows, count: int) -> Rows:
    """Return where each row begins, and the end, if `rows` hold `lengths` entries."""
    stored = np.zeros(count + 1, dtype=np.int64)
    stored[rows + 1] = lengths
    return np.cumsum(stored)


def _points(parts: Sequence[Part], order: Rows) -> tuple[NDArray[np.float64], Rows]:
    """Return the kept poly-lines one after the other in the given order, and their lengths."""
    lengths = np.concatenate([np.diff(part.rays.point_offsets)[part.kept] for part in parts])
    points = np.concatenate(
        [
            part.rays.all_points[np.repeat(part.kept, np.diff(part.rays.point_offsets))]
            for part in parts
        ]
    )
    first = np.concatenate([[0], np.cumsum(lengths)[:-1]])[order]
    lengths = lengths[order]
    within = np.arange(lengths.sum()) - np.repeat(np.cumsum(lengths) - lengths, lengths)
    return points[np.repeat(first, lengths) + within], lengths


def trace_in_parts(
    trace_part: Callable[..., Rays],
    by_row: dict[str, Any],
    groups: Rows,
    *,
    executor: Executor,
    progress: Callable[[int, int], object] | None,
) -> Rays:
    """Trace parts of the pairs through an executor.

    Parameters
    ----------
    trace_part : callable
        Traces some pairs; picklable if the executor runs other processes.
    by_row : dict of str to ndarray, each of shape (k, …)
        Keyword arguments of `trace_part` that hold one entry per pair.
    groups : ndarray of int, shape (k,)
        Pairs of a group, which share a search, stay together.
    executor : concurrent.futures.Executor
        Runs the parts.
    progress : callable, optional
        Told (rays done, rays in all) after each part.

    Returns
    -------
    Rays
        In the order of the pairs.
    """
    distinct = np.unique(groups)
    shares = np.array_split(distinct, min(len(distinct), LARGEST_NUMBER_OF_PARTS))
    members = [np.flatnonzero(np.isin(groups, share)) for share in shares]
    futures = [
        executor.submit(trace_part, **{name: values[rows] for name, values in by_row.items()})
        for rows in members
    ]
    parts, done, problems = [], 0, Counter[str]()
    try:
        for rows, future in zip(members, futures, strict=True):
            rays = future.result()
            parts.append(Part(rays, rows, np.ones(len(rows), dtype=bool)))
            problems.update(rays.problems)
            done += len(rows)
            if progress is not None:
                progress(done, len(groups))
    finally:
        for future in futures:
            future.cancel()
    return joined(parts[0].rays.grid, parts, len(groups), problems=dict(problems))

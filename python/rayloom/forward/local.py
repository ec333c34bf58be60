"""Rays between points inside a model."""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import Executor
from functools import partial
from typing import get_args

import numpy as np
from numpy.typing import ArrayLike

from rayloom import _core
from rayloom.errors import InputError
from rayloom.forward.core_arrays import (
    block_model,
    checked_pairs,
    checked_points,
    points_km,
    rays_of,
)
from rayloom.forward.joining import trace_in_parts
from rayloom.forward.rays import Rays
from rayloom.forward.settings import LengthsType, LocalMethod, Quality
from rayloom.model import BlockGrid, SlownessModel

Progress = Callable[[int, int], object]

MOST_FACE_NODES = 4


def trace(
    model: SlownessModel,
    sources: ArrayLike,
    receivers: ArrayLike,
    *,
    pairs: ArrayLike | None = None,
    method: LocalMethod = "bent",
    quality: Quality = "standard",
    face_nodes: int | None = None,
    lengths_dtype: LengthsType = "float64",
    threads: int | None = None,
    executor: Executor | None = None,
    progress: Progress | None = None,
) -> Rays:
    """Trace first arrivals between points inside a model.

    Parameters
    ----------
    model : SlownessModel
        The blocks.
    sources : array_like, shape (n, 3)
        x, y (degrees, or km in a flat frame) and depth_km.
    receivers : array_like, shape (m, 3)
        Likewise.
    pairs : array_like of int, shape (k, 2), optional
        Rows of source and receiver; all pairs, source by source, by default.
    method : {"bent", "graph", "straight"}
        The ray of least time, the raw path of the coarse graph, or the chord.
    quality : {"standard", "thorough"}
        How close to the true first arrival a bent ray must come.
    face_nodes : int, optional
        Coarse graph nodes inside each block edge, and squared inside each face (1 to
        4); by default that of the quality (2 or 3), more along longer edges.
    lengths_dtype : {"float64", "float32"}
        Type of the path lengths; single precision saves a third of their memory.
    threads : int, optional
        Number of threads; all cores by default, one with an executor. The result
        does not depend on it.
    executor : concurrent.futures.Executor, optional
        Traces the rays of some receivers each in its workers, here or elsewhere.
    progress : callable, optional
        Told (rays done, rays in all).

    Returns
    -------
    Rays
        In the order of the pairs.

    Raises
    ------
    InputError
        If a point lies outside the model, or an argument has a wrong form.

    References
    ----------
    Moser, T. J. (1991). Shortest path calculation of seismic rays. Geophysics 56, 59-67.
    """
    source_points = _inside("sources", model.grid, sources)
    receiver_points = _inside("receivers", model.grid, receivers)
    require_choice("method", method, get_args(LocalMethod))
    require_choice("quality", quality, get_args(Quality))
    require_choice("lengths_dtype", lengths_dtype, get_args(LengthsType))
    require_counts(face_nodes, threads)
    pair_rows = checked_pairs(pairs, len(source_points), len(receiver_points))
    if executor is not None and len(pair_rows):
        part = partial(
            trace,
            model,
            source_points,
            receiver_points,
            method=method,
            quality=quality,
            face_nodes=face_nodes,
            lengths_dtype=lengths_dtype,
            threads=threads or 1,
        )
        return trace_in_parts(
            part,
            {"pairs": pair_rows},
            pair_rows[:, 1].astype(np.int64),
            executor=executor,
            progress=progress,
        )
    arrays = _core.trace_between(
        block_model(model),
        points_km(model.grid, source_points),
        points_km(model.grid, receiver_points),
        pair_rows,
        method=method,
        quality=quality,
        coarse_nodes=face_nodes,
        threads=threads,
        progress=progress,
    )
    return rays_of(model.grid, arrays, lengths_dtype=lengths_dtype)


def require_counts(face_nodes: int | None, threads: int | None) -> None:
    """Refuse numbers of graph nodes and threads out of range.

    Raises
    ------
    InputError
        If one is.
    """
    if face_nodes is not None and not 1 <= face_nodes <= MOST_FACE_NODES:
        raise InputError(f"expected 1 to {MOST_FACE_NODES}, got {face_nodes}", where="face_nodes")
    if threads is not None and threads < 1:
        raise InputError(f"expected at least 1, got {threads}", where="threads")


def require_choice(name: str, value: str, allowed: tuple[str, ...]) -> None:
    """Refuse a value that is not one of those allowed.

    Raises
    ------
    InputError
        If it is not.
    """
    if value not in allowed:
        raise InputError(f"expected one of {', '.join(allowed)}; got {value!r}", where=name)


def _inside(name: str, grid: BlockGrid, points: ArrayLike) -> np.ndarray:
    array = checked_points(name, points)
    outside = np.flatnonzero(grid.locate(array) < 0)
    if outside.size:
        raise InputError(
            f"row {outside[0]} {array[outside[0]].tolist()} lies outside the blocks; "
            "move the point or extend the grid",
            where=name,
        )
    return array

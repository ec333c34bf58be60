"""Rays of distant events into a model."""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import Executor
from dataclasses import replace
from functools import partial
from typing import get_args

import numpy as np
from numpy.typing import ArrayLike, NDArray

from rayloom import _core
from rayloom.earth import PHASES, ReferenceEarth, phase_wave, standard_phase
from rayloom.errors import InputError
from rayloom.forward.core_arrays import (
    block_model,
    checked_pairs,
    points_km,
    polylines_km,
    rays_of,
)
from rayloom.forward.joining import Part, joined, trace_in_parts
from rayloom.forward.local import require_choice, require_counts
from rayloom.forward.rays import Rays
from rayloom.forward.settings import DistantMethod, LengthsType, Quality
from rayloom.model import SlownessModel
from rayloom.survey import Events, Stations

Floats = NDArray[np.float64]
Names = NDArray[np.str_]
Progress = Callable[[int, int], object]

NEAREST_ENTRY_DEG = 25.0
"""Closer than this the upper mantle's triplications make P and S ambiguous."""

DIRECT = ("P", "S")
"""Phases that this distance holds for."""

OUTSIDE = "station outside the blocks"
NO_WAVE = "no wave of the phase enters the blocks"
TOO_NEAR = f"ray enters closer than {NEAREST_ENTRY_DEG:g}° to the event"


def trace_distant(
    model: SlownessModel,
    earth: ReferenceEarth,
    events: Events,
    stations: Stations,
    *,
    pairs: ArrayLike | None = None,
    phases: str | ArrayLike = "P",
    method: DistantMethod = "bent",
    quality: Quality = "standard",
    face_nodes: int | None = None,
    lengths_dtype: LengthsType = "float64",
    previous: Rays | None = None,
    threads: int | None = None,
    executor: Executor | None = None,
    progress: Progress | None = None,
) -> Rays:
    """Trace first arrivals of distant events through a model to stations.

    Outside the blocks the wave runs through the one-dimensional Earth; it enters
    through the base or a side, wherever the sum of both times is least, but only
    where it travels upwards and inwards; P and S nowhere closer than 25° to the event.

    Parameters
    ----------
    model : SlownessModel
        The blocks, on a sphere.
    earth : ReferenceEarth
        The Earth outside them.
    events : Events
        Geographic latitudes, longitudes and depths.
    stations : Stations
        Geographic latitudes, longitudes and depths of the sensors.
    pairs : array_like of int, shape (k, 2), optional
        Rows of event and station; all pairs, event by event, by default.
    phases : str or array_like of str, shape (k,), optional
        Phase of every pair, one that arrives as the model's wave type: P, Pdiff, PcP,
        PKPdf, pP or sP in a model of P velocity, S, ScS or SKS in one of S velocity.
    method : {"bent", "reference", "straight"}
        Rays of least time in the model; rays of least time in the reference model,
        timed in the model; or chords from the reference rays' entry points.
    quality : {"standard", "thorough"}
        How close to the true first arrival a bent ray must come.
    face_nodes : int, optional
        Coarse graph nodes inside each block edge, and squared inside each face (1 to
        4); by default that of the quality (2 or 3), more along longer edges.
    lengths_dtype : {"float64", "float32"}
        Type of the path lengths; single precision saves a third of their memory.
    previous : Rays, optional
        Rays of the same pairs in the same blocks with similar slowness. Bent rays
        start from them, which costs less, though they are still searched for; changes
        of course are counted.
    threads : int, optional
        Number of threads; all cores by default, one with an executor. The result
        does not depend on it.
    executor : concurrent.futures.Executor, optional
        Traces the rays of some stations each in its workers, here or elsewhere.
    progress : callable, optional
        Told (rays done, rays in all).

    Returns
    -------
    Rays
        In the order of the pairs; a pair without a ray has NaN times, an empty row
        and its reason counted in ``problems``.

    Raises
    ------
    InputError
        If the frame is flat, a phase does not belong to the model's wave type, or an
        argument has a wrong form.
    """
    if model.grid.frame.is_flat:
        raise InputError("distant events need a frame on the sphere", where="model")
    require_choice("method", method, get_args(DistantMethod))
    require_choice("quality", quality, get_args(Quality))
    require_choice("lengths_dtype", lengths_dtype, get_args(LengthsType))
    require_counts(face_nodes, threads)
    pair_rows = checked_pairs(pairs, len(events), len(stations))
    _require_same_pairs(model, previous, len(pair_rows))
    names = _phase_names(model, phases, len(pair_rows))
    if executor is not None and len(pair_rows):
        part = partial(
            trace_distant,
            model,
            earth,
            events,
            stations,
            method=method,
            quality=quality,
            face_nodes=face_nodes,
            lengths_dtype=lengths_dtype,
            threads=threads or 1,
        )
        rays = trace_in_parts(
            part,
            {"pairs": pair_rows, "phases": names} | ({"previous": previous} if previous else {}),
            pair_rows[:, 1].astype(np.int64),
            executor=executor,
            progress=progress,
        )
        return _compared(rays, previous)
    traced_model = model if method == "bent" else model.with_slowness(model.reference)
    rays = _first_arrivals(
        traced_model,
        earth,
        events,
        stations,
        pair_rows,
        names,
        quality,
        face_nodes,
        lengths_dtype,
        previous if method == "bent" else None,
        threads,
        progress,
    )
    if method == "straight":
        rays = _chords(model, rays, stations, pair_rows, lengths_dtype)
    if method != "bent":
        rays = replace(rays, time_s=rays.predict_s(model.slowness_s_per_km))
    return _compared(rays, previous)


def _require_same_pairs(model: SlownessModel, previous: Rays | None, count: int) -> None:
    if previous is None:
        return
    if len(previous) != count:
        raise InputError(
            f"expected rays of the same {count} pairs, got {len(previous)}", where="previous"
        )
    before, now = previous.grid, model.grid
    edges = zip(
        (before.x_edges, before.y_edges, before.depth_edges_km),
        (now.x_edges, now.y_edges, now.depth_edges_km),
        strict=True,
    )
    if before.frame != now.frame or not all(np.array_equal(*pair) for pair in edges):
        raise InputError("expected rays through the same blocks", where="previous")


def _compared(rays: Rays, previous: Rays | None) -> Rays:
    if previous is None:
        return rays
    return replace(rays, basin_jumps=rays.course_changes(previous))


def _phase_names(model: SlownessModel, phases: str | ArrayLike, count: int) -> Names:
    """Usual name of the phase of every pair."""
    if np.ndim(phases) > 0 and np.shape(phases) != (count,):
        raise InputError(
            f"expected one phase per pair ({count}), got shape {np.shape(phases)}", where="phases"
        )
    given, number = np.unique(np.asarray(phases, dtype=np.str_), return_inverse=True)
    usual = [standard_phase(str(name)) for name in given]
    fitting = [name for name in PHASES if phase_wave(name) == model.wave]
    foreign = [name for name in usual if name not in fitting]
    if foreign:
        raise InputError(
            f"phase {foreign[0]!r} does not fit a model of {model.wave} velocity; "
            f"expected {', '.join(fitting)}",
            where="phases",
        )
    return np.broadcast_to(np.array(usual, dtype=np.str_)[number], count)


def station_points(model: SlownessModel, stations: Stations) -> Floats:
    """Place stations in a model's frame.

    Returns
    -------
    ndarray, shape (n, 3)
        x, y in degrees and depth_km (negative above sea level).
    """
    x, y = model.grid.frame.local_coordinates(stations.longitude_deg, stations.latitude_deg)
    return np.column_stack([x, y, stations.depth_km])


def _first_arrivals(
    model: SlownessModel,
    earth: ReferenceEarth,
    events: Events,
    stations: Stations,
    pairs: NDArray[np.uint32],
    phases: Names,
    quality: Quality,
    face_nodes: int | None,
    lengths_dtype: LengthsType,
    previous: Rays | None,
    threads: int | None,
    progress: Progress | None,
) -> Rays:
    grid = model.grid
    points = station_points(model, stations)
    inside = grid.locate(points) >= 0
    used = inside[pairs[:, 1]]
    epicentre_x, epicentre_y = grid.frame.local_coordinates(
        events.longitude_deg, events.latitude_deg
    )
    epicentres = points_km(grid, np.column_stack([epicentre_x, epicentre_y, events.depth_km]))
    anywhere = points_km(grid, np.where(inside[:, None], points, grid.centres[0]))
    wave_event, wave_phase, wave = _waves(pairs[used, 0], phases[used])
    arrays = _core.trace_distant(
        block_model(model),
        earth.layered_earth,
        wave_phase,
        np.ascontiguousarray(epicentres[wave_event, :2]),
        np.ascontiguousarray(events.depth_km[wave_event], dtype=np.float64),
        anywhere,
        np.column_stack([wave, pairs[used, 1]]),
        quality=quality,
        coarse_nodes=face_nodes,
        earlier=None if previous is None else polylines_km(previous, used),
        threads=threads,
        progress=progress,
    )
    rays = rays_of(grid, arrays, lengths_dtype=lengths_dtype)
    distance_deg = _entry_distance_deg(rays, events, pairs[used])
    far_enough = (distance_deg >= NEAREST_ENTRY_DEG) | ~np.isin(phases[used], DIRECT)
    problems = {
        OUTSIDE: int((~used).sum()),
        NO_WAVE: int((~rays.traced).sum()),
        TOO_NEAR: int((rays.traced & ~far_enough).sum()),
    }
    kept = ~rays.traced | far_enough
    part = Part(rays, np.flatnonzero(used), kept)
    found = {reason: number for reason, number in problems.items() if number}
    return joined(grid, [part], len(pairs), problems=found)


def _waves(
    event: NDArray[np.uint32], phases: Names
) -> tuple[NDArray[np.int64], list[str], NDArray[np.uint32]]:
    """Event and phase of each distinct wave, and the wave of every pair."""
    names, code = np.unique(phases, return_inverse=True)
    count = max(len(names), 1)
    waves, wave = np.unique(event.astype(np.int64) * count + code, return_inverse=True)
    return waves // count, names[waves % count].tolist(), wave.astype(np.uint32)


def _entry_distance_deg(rays: Rays, events: Events, pairs: NDArray[np.uint32]) -> Floats:
    frame = rays.grid.frame
    entry = rays.entry
    event_x, event_y = frame.local_coordinates(events.longitude_deg, events.latitude_deg)
    here = frame.unit_vectors(entry[:, 0], entry[:, 1])
    there = frame.unit_vectors(event_x, event_y)[pairs[:, 0]]
    cosine = np.clip(np.sum(here * there, axis=1), -1.0, 1.0)
    return np.asarray(np.degrees(np.arccos(cosine)))


def _chords(
    model: SlownessModel,
    rays: Rays,
    stations: Stations,
    pairs: NDArray[np.uint32],
    lengths_dtype: LengthsType,
) -> Rays:
    grid = model.grid
    points = station_points(model, stations)[pairs[:, 1]]
    arrays = _core.straight_from_entries(
        block_model(model),
        points_km(grid, rays.entry),
        np.ascontiguousarray(rays.outside_time_s),
        points_km(grid, points),
    )
    return rays_of(grid, arrays, lengths_dtype=lengths_dtype, problems=rays.problems)

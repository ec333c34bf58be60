"""A known structure put in, and what comes back.

Main function: :func:`restore`. Times come from the rays of the inversion, or
from rays traced through the structure in finer blocks and inverted as the data
were; errors have the size of the data's own, and each event a mean of its own.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from itertools import pairwise
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from rayloom.appraisal.patterns import PatternSettings, pattern_percent
from rayloom.appraisal.rowspace import Floats, RowSpace
from rayloom.appraisal.samples import MOST_ITERATIONS, TOLERANCE
from rayloom.errors import InputError
from rayloom.forward import trace_distant
from rayloom.inversion import InversionResult, InversionSettings, LinearisedProblem, invert
from rayloom.model import BlockGrid, SlownessModel

GROUP_MEAN_STD_S = 0.5
"""Spread of the means of the events in synthetic times; they leave by projection."""

_STREAMS = {"noise": 0, "means": 1}
Report = Callable[[str, int, int], None]
Noise = Literal["uncertainties", "none"]


@dataclass(frozen=True)
class Judgement:
    """How well a structure came back in one region.

    Attributes
    ----------
    region : str
        Depth range.
    blocks : int
        Covered blocks in it.
    amplitude_percent : float
        Root mean square of the structure put in, percent, weighted by volume.
    restored_share : float
        Slope of the restored on the true perturbation: 1 if amplitudes came back
        whole; NaN where the structure is empty.
    similarity : float
        Cosine of the angle between both: 1 for the same pattern, 0 for an
        unrelated one; NaN where one of them is empty.
    """

    region: str
    blocks: int
    amplitude_percent: float
    restored_share: float
    similarity: float


@dataclass(frozen=True)
class Restoration:
    """One restoration.

    Attributes
    ----------
    name : str
        Name of the pattern.
    truth_percent, restored_percent : (nx, ny, nz) arrays
        Velocity perturbation put in and found, percent.
    judgements : tuple of Judgement
        Region by region, the whole box last.
    """

    name: str
    truth_percent: Floats
    restored_percent: Floats
    judgements: tuple[Judgement, ...]


def restore(
    pattern: PatternSettings,
    problem: LinearisedProblem,
    *,
    regions_km: Sequence[tuple[float, float]],
    covered: NDArray[np.bool_],
    noise: Noise = "uncertainties",
    seed: int = 61,
    pattern_model: SlownessModel | None = None,
    space: RowSpace | None = None,
) -> Restoration:
    """Restore a structure along the rays of the inversion.

    Parameters
    ----------
    pattern : PatternSettings
        The structure.
    problem : LinearisedProblem
        A finished inversion.
    regions_km : sequence of (top, bottom)
        Depth ranges to judge in, km.
    covered : (nx, ny, nz) bool array
        Blocks that count.
    noise : {"uncertainties", "none"}, optional
        Errors added to the times.
    seed : int, optional
        Seed of the errors.
    pattern_model : SlownessModel, optional
        The model of a pattern of kind ``model``.
    space : RowSpace, optional
        The problem's row space, if it is at hand.

    Returns
    -------
    Restoration
    """
    grid = problem.model.grid
    truth = block_means(pattern, grid, pattern_model)
    space = RowSpace.of_problem(problem) if space is None else space
    slowness = 1.0 / (1.0 + truth.ravel() / 100.0) - 1.0
    rows = space.predicted(slowness[:, None])
    if noise == "uncertainties":
        rows[:, 0] += space.noise(_stream(seed, "noise"))
    found = space.estimate(rows, tolerance=0.3 * TOLERANCE, max_iterations=MOST_ITERATIONS)
    fractional = found[: grid.block_count, 0].reshape(grid.shape)
    restored = 100.0 * (1.0 / (1.0 + fractional) - 1.0)
    judged = judge(grid, truth, restored, regions_km=regions_km, covered=covered)
    return Restoration(pattern.name, truth, restored, judged)


def restore_through_finer_blocks(
    pattern: PatternSettings,
    result: InversionResult,
    settings: InversionSettings,
    *,
    regions_km: Sequence[tuple[float, float]],
    covered: NDArray[np.bool_],
    noise: Noise = "uncertainties",
    seed: int = 61,
    pattern_model: SlownessModel | None = None,
    progress: Report | None = None,
) -> Restoration:
    """Restore a structure from times traced through it, inverted like the data.

    Rays are traced in blocks half as wide along each axis, and the whole inversion
    is done again with its own settings: retracing, robust weights and all.

    Parameters
    ----------
    pattern, regions_km, covered, noise, seed, pattern_model
        As for :func:`restore`.
    result : InversionResult
        The inversion of the data.
    settings : InversionSettings
        The settings it was made with.
    progress : callable, optional
        Told (stage, done, total).

    Returns
    -------
    Restoration
    """
    used = np.flatnonzero(result.used)
    data = result.data.select(used)
    grid = result.model.grid
    fine = halved(grid)
    percent = pattern_percent(pattern, grid, fine.centres, model=pattern_model)
    reference = SlownessModel.from_earth(fine, data.earth, wave=result.model.wave)
    structure = reference.with_slowness(
        reference.reference / (1.0 + percent.reshape(fine.shape) / 100.0)
    )
    pairs = np.column_stack([data.event_index, data.station_index])
    phases = np.asarray(data.phase).astype(str)
    times = [
        trace_distant(
            model,
            data.earth,
            data.events,
            data.stations,
            pairs=pairs,
            phases=phases,
            method="bent",
            quality=settings.quality,
            threads=settings.threads,
            progress=_told(progress, stage),
        ).time_s
        for model, stage in ((reference, "reference times"), (structure, "true times"))
    ]
    delay_s = times[1] - times[0]
    traced = np.isfinite(delay_s)
    if not np.any(traced):
        raise InputError(f"no ray could be traced through the pattern {pattern.name!r}")
    synthetic = delay_s + _event_means(data.event_index, phases, seed)
    if noise == "uncertainties":
        drawn = _stream(seed, "noise").standard_normal(synthetic.size)
        synthetic = synthetic + drawn * np.asarray(data.uncertainty_s, dtype=np.float64)
    kept = data.select(np.flatnonzero(traced))
    model = SlownessModel.from_earth(grid, data.earth, wave=result.model.wave)
    found = invert(replace(kept, residual_s=synthetic[traced]), model, settings, progress=progress)
    truth = block_means(pattern, grid, pattern_model)
    restored = np.asarray(found.model.perturbation_percent)
    judged = judge(grid, truth, restored, regions_km=regions_km, covered=covered)
    return Restoration(pattern.name, truth, restored, judged)


def halved(grid: BlockGrid) -> BlockGrid:
    """Return the same box in blocks half as wide along each axis."""
    edges = []
    for axis in (grid.x_edges, grid.y_edges, grid.depth_edges_km):
        middles = 0.5 * (axis[:-1] + axis[1:])
        edges.append(np.sort(np.concatenate([axis, middles])))
    return BlockGrid(grid.frame, *edges)


def block_means(pattern: PatternSettings, grid: BlockGrid, model: SlownessModel | None) -> Floats:
    """Mean perturbation of a pattern in each block, (nx, ny, nz), percent."""
    fine = halved(grid)
    values = pattern_percent(pattern, grid, fine.centres, model=model)
    nx, ny, nz = grid.shape
    weights = fine.volumes_km3.reshape(nx, 2, ny, 2, nz, 2)
    parts = values.reshape(nx, 2, ny, 2, nz, 2)
    return np.asarray(np.sum(weights * parts, axis=(1, 3, 5)) / np.sum(weights, axis=(1, 3, 5)))


def judge(
    grid: BlockGrid,
    truth: Floats,
    restored: Floats,
    *,
    regions_km: Sequence[tuple[float, float]],
    covered: NDArray[np.bool_],
) -> tuple[Judgement, ...]:
    """Compare a structure with what came back, weighted by volume.

    Parameters
    ----------
    grid : BlockGrid
        The blocks.
    truth, restored : (nx, ny, nz) arrays
        Put in and found, percent.
    regions_km : sequence of (top, bottom)
        Depth ranges, km; a block belongs where its middle lies.
    covered : (nx, ny, nz) bool array
        Blocks that count.
    """
    depth = grid.depth_centres_km
    judged = []
    for top, bottom in (*regions_km, (-np.inf, np.inf)):
        inside = covered & ((depth >= top) & (depth < bottom))
        weight = np.where(inside, grid.volumes_km3, 0.0)
        name = f"{top:g} to {bottom:g} km" if np.isfinite(top) else "all depths"
        judged.append(_judgement(name, weight, truth, restored))
    return tuple(judged)


def default_regions_km(grid: BlockGrid) -> tuple[tuple[float, float], ...]:
    """Thirds of the box, cut at the nearest edges of blocks."""
    edges = grid.depth_edges_km
    cuts = np.linspace(edges[0], edges[-1], 4)
    ends = [float(edges[np.argmin(np.abs(edges - cut))]) for cut in cuts]
    return tuple((top, bottom) for top, bottom in pairwise(ends) if top < bottom)


def _judgement(name: str, weight: Floats, truth: Floats, restored: Floats) -> Judgement:
    total = float(weight.sum())
    nan = float("nan")
    if total == 0.0:
        return Judgement(name, 0, nan, nan, nan)
    true_power = float(np.sum(weight * truth**2))
    found_power = float(np.sum(weight * restored**2))
    shared = float(np.sum(weight * truth * restored))
    both = np.sqrt(true_power * found_power)
    return Judgement(
        region=name,
        blocks=int(np.count_nonzero(weight)),
        amplitude_percent=float(np.sqrt(true_power / total)),
        restored_share=shared / true_power if true_power > 0.0 else nan,
        similarity=shared / float(both) if both > 0.0 else nan,
    )


def _event_means(event: NDArray[np.int64], phases: NDArray[np.str_], seed: int) -> Floats:
    """Draw one mean per event and phase, (rows,), s."""
    _, code = np.unique(phases, return_inverse=True)
    key = event * (int(code.max()) + 1) + code
    _, group = np.unique(key, return_inverse=True)
    drawn = _stream(seed, "means").standard_normal(int(group.max()) + 1)
    return np.asarray(GROUP_MEAN_STD_S * drawn[group])


def _stream(seed: int, use: str) -> np.random.Generator:
    return np.random.default_rng(np.random.SeedSequence(seed, spawn_key=(_STREAMS[use],)))


def _told(progress: Report | None, stage: str) -> Callable[[int, int], None] | None:
    if progress is None:
        return None
    return lambda done, total: progress(stage, done, total)

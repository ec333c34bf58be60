"""The resolution matrix seen through random models: its diagonal and how far it smears.

Main function: :func:`probe_resolution`. R = ∂m̂/∂m maps true block perturbations
to those that the inversion finds.
"""

from __future__ import annotations

from concurrent.futures import Executor
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rayloom.appraisal.chunks import Arrays, Checkpoints, Progress, run_chunks
from rayloom.appraisal.rowspace import Floats, RowSpace
from rayloom.appraisal.samples import COLUMNS_AT_ONCE, MOST_ITERATIONS, TOLERANCE
from rayloom.errors import InputError
from rayloom.inversion import LinearisedProblem
from rayloom.model import BlockGrid

_NEIGHBOURS = 1
"""Blocks on each side over which correlations of the probed models are averaged."""


@dataclass(frozen=True)
class Probing:
    """What random probes tell of the resolution matrix.

    Attributes
    ----------
    probes : int
        Number of random models.
    diagonal : (nx, ny, nz) array
        Estimate of R_ii.
    diagonal_error : (nx, ny, nz) array
        Standard error of the estimate.
    width_x_km, width_y_km, width_depth_km : (nx, ny, nz) arrays
        Full width at half height of the smearing along x, y and depth, km; NaN
        where the probes do not tell it, infinite where it exceeds the box.
    """

    probes: int
    diagonal: Floats
    diagonal_error: Floats
    width_x_km: Floats
    width_y_km: Floats
    width_depth_km: Floats


@dataclass(frozen=True)
class _ProbeTask:
    space: RowSpace
    seed: int

    def __call__(self, start: int, stop: int) -> Arrays:
        signs = np.column_stack(
            [
                random_signs(self.seed, number, self.space.block_count)
                for number in range(start, stop)
            ]
        )
        found = self.space.estimate(
            self.space.predicted(signs), tolerance=TOLERANCE, max_iterations=MOST_ITERATIONS
        )
        return {"found": found[: self.space.block_count].T.astype(np.float32)}


def probe_resolution(
    problem: LinearisedProblem,
    probes: int = 64,
    seed: int = 41,
    *,
    executor: Executor | None = None,
    progress: Progress | None = None,
    checkpoints: Checkpoints | None = None,
) -> Probing:
    """Estimate the diagonal of the resolution matrix and its smearing lengths.

    Each probe is a model v of independent random signs, put through rays and
    inversion. The diagonal is the mean of v ⊙ Rv over the probes; its standard
    deviation √(Σ_{j≠i} R_ij²/s) with s probes, estimated from their scatter. As
    E[(Rv)(Rv)ᵀ] = RRᵀ, the autocorrelation of Rv around a block decays like that
    of its row of R; for a bell-shaped row the full width at half height is √2
    times the distance at which the autocorrelation has fallen to one half.

    Parameters
    ----------
    problem : LinearisedProblem
        A finished inversion.
    probes : int, optional
        Number of random models, at least 2.
    seed : int, optional
        Seed of the signs.
    executor, progress, checkpoints
        As for :func:`rayloom.appraisal.posterior_samples`.

    Returns
    -------
    Probing

    Raises
    ------
    InputError
        If fewer than two probes are asked for.

    References
    ----------
    Bekas, C., Kokiopoulou, E. & Saad, Y. (2007). An estimator for the diagonal of
    a matrix. Appl. Numer. Math. 57, 1214-1229.
    Fichtner, A. & van Leeuwen, T. (2015). Resolution analysis by random probing.
    J. Geophys. Res. Solid Earth 120, 5549-5573 (smearing from autocorrelations).
    """
    if probes < 2:
        raise InputError(f"at least 2 probes are needed, got {probes}")
    space = RowSpace.of_problem(problem)
    made = run_chunks(
        _ProbeTask(space, seed),
        probes,
        size=COLUMNS_AT_ONCE,
        name=f"probes_{seed}",
        executor=executor,
        progress=progress,
        checkpoints=checkpoints,
    )
    grid = problem.model.grid
    found = made["found"]
    total, squares = np.zeros(grid.block_count), np.zeros(grid.block_count)
    for number, image in enumerate(found):
        product = random_signs(seed, number, grid.block_count) * image
        total += product
        squares += product**2
    mean = total / probes
    scatter = np.maximum(squares / probes - mean**2, 0.0) / (probes - 1)
    widths = smearing_widths_km(grid, found.reshape(probes, *grid.shape))
    return Probing(probes, mean.reshape(grid.shape), np.sqrt(scatter).reshape(grid.shape), *widths)


def random_signs(seed: int, number: int, size: int) -> Floats:
    """Draw the signs of one probe, (size,) of −1 and 1."""
    stream = np.random.default_rng(np.random.SeedSequence(seed, spawn_key=(number,)))
    return 2.0 * stream.integers(0, 2, size).astype(np.float64) - 1.0


def smearing_widths_km(
    grid: BlockGrid, images: NDArray[np.float32]
) -> tuple[Floats, Floats, Floats]:
    """Full widths of the smearing from models that random signs came back as.

    Parameters
    ----------
    grid : BlockGrid
        The blocks.
    images : (probes, nx, ny, nz) array
        R v of each probe.

    Returns
    -------
    tuple of three (nx, ny, nz) arrays
        Along x, y and depth, km.
    """
    widths = grid.widths
    along = (widths.x_km, widths.y_km, widths.depth_km)
    x, y, z = (_width_along(images, axis, km) for axis, km in enumerate(along))
    return x, y, z


def _width_along(images: NDArray[np.float32], axis: int, width_km: Floats) -> Floats:
    """√2 times the distance at which the autocorrelation along an axis falls to a half."""
    values = np.moveaxis(images, axis + 1, 1).astype(np.float64)
    power = _smooth(np.mean(values**2, axis=0))
    centre = np.cumsum(width_km) - 0.5 * width_km
    half = np.full(power.shape, np.inf)
    before, distance_before = np.ones(power.shape), np.zeros(power.shape)
    count = power.shape[0]
    for lag in range(1, count):
        now, distance = _correlation(values, power, centre, lag)
        drop = before - now
        share = (before - 0.5) / np.where(drop > 0.0, drop, 1.0)
        crossing = distance_before + share * (distance - distance_before)
        half = np.where(np.isinf(half) & (now < 0.5) & (before >= 0.5), crossing, half)
        before, distance_before = now, distance
        if np.all(np.isfinite(half)):
            break
    half = np.where(power > 0.0, half, np.nan)
    return np.moveaxis(np.sqrt(2.0) * half, 0, axis)


def _correlation(values: Floats, power: Floats, centre: Floats, lag: int) -> tuple[Floats, Floats]:
    """Mean of the correlations with the blocks ``lag`` further on both sides, and its distance."""
    product = np.mean(values[:, lag:] * values[:, :-lag], axis=0)
    ahead, behind = np.full(power.shape, np.nan), np.full(power.shape, np.nan)
    scale = np.sqrt(power[lag:] * power[:-lag])
    ratio = _smooth(product) / np.where(scale > 0.0, scale, 1.0)
    ahead[:-lag], behind[lag:] = ratio, ratio
    step = np.full((2, centre.size), np.nan)
    step[0, :-lag] = step[1, lag:] = centre[lag:] - centre[:-lag]
    known = np.isfinite(ahead).astype(np.float64) + np.isfinite(behind)
    some = np.maximum(known, 1.0)
    mean = (np.nan_to_num(ahead) + np.nan_to_num(behind)) / some
    distance = np.nansum(step, axis=0)[:, None, None] / some
    return np.where(known > 0.0, mean, 1.0), distance


def _smooth(values: Floats) -> Floats:
    from scipy.ndimage import uniform_filter

    return np.asarray(uniform_filter(values, 2 * _NEIGHBOURS + 1, mode="nearest"))

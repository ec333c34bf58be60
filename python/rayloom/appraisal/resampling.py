"""Errors of the model from those of the data alone.

Main functions: :func:`event_bootstrap` weighs events anew, :func:`event_jackknife`
leaves them out one at a time, :func:`noise_repeats` repeats the survey with other
errors of the size stated. All keep rays and prior; none of them knows how far the
prior pulls the model from the truth.
"""

from __future__ import annotations

from concurrent.futures import Executor
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rayloom.appraisal.chunks import Arrays, Checkpoints, Progress, run_chunks
from rayloom.appraisal.rowspace import Floats, RowSpace
from rayloom.appraisal.samples import (
    COLUMNS_AT_ONCE,
    MOST_ITERATIONS,
    TOLERANCE,
    posterior_mean,
)
from rayloom.errors import InputError
from rayloom.inversion import LinearisedProblem

_AT_ONCE = 4


@dataclass(frozen=True)
class Resampled:
    """Models of data sets made from the one at hand.

    Attributes
    ----------
    shape : tuple of int
        (nx, ny, nz).
    fractional : (count, blocks) float32 array
        Fractional slowness perturbations of each.
    mean_fractional : (blocks,) array
        Those of the data as they are.
    factor : float
        Standard error = √factor · root of the mean squared deviation.
    """

    shape: tuple[int, int, int]
    fractional: NDArray[np.float32]
    mean_fractional: Floats
    factor: float

    @property
    def count(self) -> int:
        """Number of models."""
        return int(self.fractional.shape[0])

    def sigma_percent(self) -> Floats:
        """Return the standard error of the velocity perturbation, (nx, ny, nz), percent."""
        variance = self.factor * np.var(self.fractional, axis=0, dtype=np.float64)
        slope = 100.0 / (1.0 + self.mean_fractional) ** 2
        return np.asarray(slope * np.sqrt(variance)).reshape(self.shape)


@dataclass(frozen=True)
class _ReweightTask:
    """Inverts with the weights of each replicate: those of its event times its factor."""

    space: RowSpace
    target_s: Floats
    event: NDArray[np.int64]
    seed: int | None

    def __call__(self, start: int, stop: int) -> Arrays:
        models = [self._invert(self._factors(number)) for number in range(start, stop)]
        return {"fractional": np.stack(models).astype(np.float32)}

    def _factors(self, number: int) -> Floats:
        events = int(self.event.max()) + 1
        if self.seed is None:
            return np.where(np.arange(events) == number, 0.0, 1.0)
        stream = np.random.default_rng(np.random.SeedSequence(self.seed, spawn_key=(number,)))
        return np.asarray(stream.exponential(size=events))

    def _invert(self, factors: Floats) -> Floats:
        space = self.space.with_weights(
            self.space.means.root_weights * np.sqrt(factors[self.event])
        )
        blocks = slice(0, space.block_count)
        rows = space.weighted(self.target_s[:, None])
        found = space.estimate(rows, tolerance=TOLERANCE, max_iterations=MOST_ITERATIONS)
        return np.asarray(found[blocks, 0])


@dataclass(frozen=True)
class _NoiseTask:
    """Inverts errors of unit variance of the weighted rows and nothing else."""

    space: RowSpace
    mean: Floats
    seed: int

    def __call__(self, start: int, stop: int) -> Arrays:
        seeds = (np.random.SeedSequence(self.seed, spawn_key=(n,)) for n in range(start, stop))
        noise = np.column_stack([self.space.noise(np.random.default_rng(s)) for s in seeds])
        found = self.space.estimate(noise, tolerance=TOLERANCE, max_iterations=MOST_ITERATIONS)
        blocks = slice(0, self.space.block_count)
        return {"fractional": (self.mean[blocks, None] + found[blocks]).T.astype(np.float32)}


def noise_repeats(
    problem: LinearisedProblem,
    count: int = 32,
    seed: int = 71,
    *,
    executor: Executor | None = None,
    progress: Progress | None = None,
    checkpoints: Checkpoints | None = None,
) -> Resampled:
    """Invert the data with further errors of the size that the uncertainties state.

    The scatter is the standard error about the *filtered* truth: what the inversion
    would find of the true structure without errors.

    Parameters
    ----------
    problem : LinearisedProblem
        A finished inversion.
    count : int, optional
        Number of repeats, at least 2.
    seed : int, optional
        Seed of the errors.
    executor, progress, checkpoints
        As for :func:`rayloom.appraisal.posterior_samples`.

    Returns
    -------
    Resampled

    Raises
    ------
    InputError
        If fewer than two repeats are asked for.
    """
    if count < 2:
        raise InputError(f"at least 2 repeats are needed, got {count}")
    space = RowSpace.of_problem(problem)
    mean = posterior_mean(problem, space)
    made = run_chunks(
        _NoiseTask(space, mean, seed),
        count,
        size=COLUMNS_AT_ONCE,
        name=f"repeats_{seed}",
        executor=executor,
        progress=progress,
        checkpoints=checkpoints,
    )
    return Resampled(
        shape=problem.model.grid.shape,
        fractional=made["fractional"],
        mean_fractional=mean[: space.block_count],
        factor=count / (count - 1.0),
    )


def event_bootstrap(
    problem: LinearisedProblem,
    count: int = 32,
    seed: int = 51,
    *,
    executor: Executor | None = None,
    progress: Progress | None = None,
    checkpoints: Checkpoints | None = None,
) -> Resampled:
    """Weight events with independent draws of Exp(1) and invert again.

    The scatter shows the errors that the events' own scatter causes, whatever the
    uncertainties say; the pull of the model towards its prior is not in it.

    Parameters
    ----------
    problem : LinearisedProblem
        A finished inversion.
    count : int, optional
        Number of replicates, at least 2.
    seed : int, optional
        Seed of the weights.
    executor, progress, checkpoints
        As for :func:`rayloom.appraisal.posterior_samples`.

    Raises
    ------
    InputError
        If fewer than two replicates are asked for.

    References
    ----------
    Rubin, D. B. (1981). The Bayesian bootstrap. Ann. Statist. 9, 130-134.
    """
    if count < 2:
        raise InputError(f"at least 2 bootstrap replicates are needed, got {count}")
    return _resampled(
        problem,
        count,
        seed,
        factor=count / (count - 1.0),
        name=f"bootstrap_{seed}",
        executor=executor,
        progress=progress,
        checkpoints=checkpoints,
    )


def event_jackknife(
    problem: LinearisedProblem,
    *,
    executor: Executor | None = None,
    progress: Progress | None = None,
    checkpoints: Checkpoints | None = None,
) -> Resampled:
    """Leave out each event in turn and invert again.

    With n events the squared standard error is (n − 1)/n · Σ (x_i − x̄)².

    Parameters
    ----------
    problem : LinearisedProblem
        A finished inversion.
    executor, progress, checkpoints
        As for :func:`rayloom.appraisal.posterior_samples`.

    Raises
    ------
    InputError
        If there are fewer than two events.

    References
    ----------
    Efron, B. (1982). The Jackknife, the Bootstrap and Other Resampling Plans.
    SIAM, chapter 3.
    """
    events = np.unique(problem.rows.event[problem.active]).size
    if events < 2:
        raise InputError("a jackknife over events needs at least two events with rows in use")
    return _resampled(
        problem,
        events,
        None,
        factor=events - 1.0,
        name="jackknife",
        executor=executor,
        progress=progress,
        checkpoints=checkpoints,
    )


def _resampled(
    problem: LinearisedProblem,
    count: int,
    seed: int | None,
    *,
    factor: float,
    name: str,
    executor: Executor | None,
    progress: Progress | None,
    checkpoints: Checkpoints | None,
) -> Resampled:
    space = RowSpace.of_problem(problem)
    made = run_chunks(
        _ReweightTask(space, problem.target_s, _event_numbers(problem), seed),
        count,
        size=_AT_ONCE,
        name=name,
        executor=executor,
        progress=progress,
        checkpoints=checkpoints,
    )
    return Resampled(
        shape=problem.model.grid.shape,
        fractional=made["fractional"] + problem.prior_mean.astype(np.float32),
        mean_fractional=posterior_mean(problem, space)[: space.block_count],
        factor=factor,
    )


def _event_numbers(problem: LinearisedProblem) -> NDArray[np.int64]:
    """Give each row the number of its event, from 0; rows without weight have 0."""
    numbers = np.zeros(problem.rows.count, dtype=np.int64)
    active = problem.active
    numbers[active] = np.unique(problem.rows.event[active], return_inverse=True)[1]
    return numbers

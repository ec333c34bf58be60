"""Models that the data and the prior allow: samples of the posterior.

Main function: :func:`posterior_samples`. Rays and weights are those of the
finished inversion; with robust weights the samples are an approximation, to be
set beside an event bootstrap.
"""

from __future__ import annotations

from concurrent.futures import Executor
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rayloom.appraisal.chunks import Arrays, Checkpoints, Progress, run_chunks
from rayloom.appraisal.rowspace import Floats, RowSpace
from rayloom.errors import InputError
from rayloom.inversion import LinearisedProblem, SpectralPrior

TOLERANCE = 3e-4
"""Residual norm over norm of the right-hand side at which solves end."""

MOST_ITERATIONS = 2000
COLUMNS_AT_ONCE = 16
"""Right-hand sides solved together; part of what a sample's last digits depend on."""

Singles = NDArray[np.float32]


@dataclass(frozen=True)
class Samples:
    """Samples of the posterior, all for the same rays and weights.

    Attributes
    ----------
    shape : tuple of int
        (nx, ny, nz).
    fractional : (count, blocks) float32 array
        Fractional slowness perturbations of each sample.
    prior_draws : (count, blocks) float32 array
        The draw of the prior that each sample was made from, about the prior's mean:
        what it would be without data.
    mean_fractional : (blocks,) array
        Mean of the posterior.
    prior_std : (blocks,) array
        Standard deviation of the prior, exact.
    approximate : bool
        Whether weights are robust ones, so that the posterior is not Gaussian.
    """

    shape: tuple[int, int, int]
    fractional: Singles
    prior_draws: Singles
    mean_fractional: Floats
    prior_std: Floats
    approximate: bool

    @property
    def count(self) -> int:
        """Number of samples."""
        return int(self.fractional.shape[0])

    @property
    def perturbation_percent(self) -> Singles:
        """Velocity perturbation of each sample, (count, nx, ny, nz) float32, percent."""
        percent = np.float32(100.0) * (1.0 / (1.0 + self.fractional) - 1.0)
        return np.asarray(percent, dtype=np.float32).reshape(self.count, *self.shape)

    @property
    def mean_percent(self) -> Floats:
        """Velocity perturbation of the mean, (nx, ny, nz), percent."""
        return np.asarray(100.0 * (1.0 / (1.0 + self.mean_fractional) - 1.0)).reshape(self.shape)

    def variance(self) -> Floats:
        """Posterior variance of each fractional perturbation, (blocks,).

        The prior's variance is known exactly, and sample and prior draw agree where
        no ray runs; the draw therefore serves as a control variate with the factor
        (variance ratio)², which is the best one for Gaussian pairs. Where the data
        say nothing the estimate is exact.

        References
        ----------
        Glasserman, P. (2004). Monte Carlo Methods in Financial Engineering.
        Springer, section 4.1 (control variates).
        """
        deviation = self.fractional - self.mean_fractional.astype(np.float32)
        sampled = np.mean(np.square(deviation, dtype=np.float64), axis=0)
        drawn = np.mean(np.square(self.prior_draws, dtype=np.float64), axis=0)
        ratio = np.minimum(sampled / np.where(drawn > 0.0, drawn, 1.0), 1.0)
        corrected = sampled - ratio**2 * (drawn - self.prior_std**2)
        return np.asarray(np.clip(corrected, 0.0, self.prior_std**2))

    def sigma_percent(self) -> Floats:
        """Return the standard error of the velocity perturbation, (nx, ny, nz), percent."""
        slope = 100.0 / (1.0 + self.mean_fractional) ** 2
        return np.asarray(slope * np.sqrt(self.variance())).reshape(self.shape)

    def resolution_mask(self) -> Floats:
        """1 − (σ_posterior/σ_prior)²: 0 where the data say nothing, 1 where they say all."""
        known = self.prior_std > 0.0
        ratio = self.variance() / np.where(known, self.prior_std, 1.0) ** 2
        return np.where(known, 1.0 - ratio, 0.0).reshape(self.shape)


@dataclass(frozen=True)
class _SampleTask:
    """Draws samples ``start`` … ``stop`` − 1; each has a random stream of its own."""

    space: RowSpace
    mean: Floats
    seed: int

    def __call__(self, start: int, stop: int) -> Arrays:
        streams = [_stream(self.seed, number) for number in range(start, stop)]
        draws = np.column_stack([self.space.draw(stream) for stream in streams])
        noise = np.column_stack([self.space.noise(stream) for stream in streams])
        correction = self.space.estimate(
            noise - self.space.predicted(draws),
            tolerance=TOLERANCE,
            max_iterations=MOST_ITERATIONS,
        )
        blocks = slice(0, self.space.block_count)
        sample = self.mean[blocks, None] + draws[blocks] + correction[blocks]
        return {
            "fractional": sample.T.astype(np.float32),
            "prior": draws[blocks].T.astype(np.float32),
        }


def posterior_samples(
    problem: LinearisedProblem,
    count: int = 64,
    seed: int = 31,
    *,
    executor: Executor | None = None,
    progress: Progress | None = None,
    checkpoints: Checkpoints | None = None,
) -> Samples:
    """Draw samples of the posterior at fixed rays and weights.

    Each minimises ‖Ã z − d̃ − (I − QQᵀ) ε‖² + ‖z − η‖² with ε, η ~ N(0, I).

    Parameters
    ----------
    problem : LinearisedProblem
        A finished inversion.
    count : int, optional
        Number of samples.
    seed : int, optional
        Seed; sample i is the same whatever the count but for the last digits.
    executor : Executor, optional
        Any executor of :mod:`concurrent.futures`.
    progress : callable, optional
        Told (samples done, samples).
    checkpoints : Checkpoints, optional
        Where finished samples are kept.

    Returns
    -------
    Samples
        Two float32 arrays of count × blocks are held.

    Raises
    ------
    InputError
        If fewer than two samples are asked for.

    References
    ----------
    Tarantola, A. (2005). Inverse Problem Theory. SIAM, sections 3.2 and 2.4
    (Gaussian posterior); Bardsley, J. M. et al. (2014). Randomize-then-optimize.
    SIAM J. Sci. Comput. 36, A1895-A1910 (the minimisation that samples it).
    """
    if count < 2:
        raise InputError(f"at least 2 posterior samples are needed, got {count}")
    space = RowSpace.of_problem(problem)
    mean = posterior_mean(problem, space)
    made = run_chunks(
        _SampleTask(space, mean, seed),
        count,
        size=COLUMNS_AT_ONCE,
        name=f"samples_{seed}",
        executor=executor,
        progress=progress,
        checkpoints=checkpoints,
    )
    return Samples(
        shape=problem.model.grid.shape,
        fractional=made["fractional"],
        prior_draws=made["prior"],
        mean_fractional=mean[: space.block_count],
        prior_std=block_prior_std(problem),
        approximate=has_robust_weights(problem),
    )


def posterior_mean(problem: LinearisedProblem, space: RowSpace) -> Floats:
    """Parameters of all groups that the linearised inversion finds, (parameters,)."""
    mean = space.estimate(
        problem.right_hand_side[:, None], tolerance=0.1 * TOLERANCE, max_iterations=MOST_ITERATIONS
    )[:, 0]
    mean[: space.block_count] += problem.prior_mean
    return mean


def block_prior_std(problem: LinearisedProblem) -> Floats:
    """Prior standard deviation of each block's fractional perturbation, (blocks,)."""
    prior = problem.system.groups[0].prior
    if isinstance(prior, SpectralPrior):
        return prior.standard_deviation()
    rows = (prior.colour(unit) for unit in np.eye(prior.size))
    return np.asarray(np.sqrt(np.sum([row**2 for row in rows], axis=0)))


def has_robust_weights(problem: LinearisedProblem) -> bool:
    """Whether any row in use has another weight than 1."""
    return bool(np.any(problem.weights[problem.active] != 1.0))


def _stream(seed: int, number: int) -> np.random.Generator:
    return np.random.default_rng(np.random.SeedSequence(seed, spawn_key=(number,)))

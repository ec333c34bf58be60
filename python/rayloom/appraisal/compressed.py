"""A linearised problem in few numbers: the data combined into those that say something.

Main type: :class:`CompressedData`. Rows are combined by the orthonormal vectors
of a Krylov space of ÃÃᵀ, so that their errors stay white and every further
inversion of these numbers, under any prior, costs small dense algebra.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rayloom.inversion import LinearisedProblem, Prior

Floats = NDArray[np.float64]

_EXHAUSTED = 1e-9
"""Share of the first step's norm under which a further vector is rounding error."""


@dataclass(frozen=True)
class CompressedData:
    """Combinations of the whitened rows, and what each parameter does to them.

    Attributes
    ----------
    data : (k,) array
        Vᵀd̃, with errors of unit variance.
    sensitivity : tuple of (size, k) arrays
        Change of each combination per unit of each parameter, group by group;
        the blocks are the first group.
    priors : tuple of Prior
        The priors that the problem was solved with.
    resolved : float
        tr H of the combinations: the number of parameters that they resolve.
    """

    data: Floats
    sensitivity: tuple[Floats, ...]
    priors: tuple[Prior, ...]
    resolved: float

    @property
    def size(self) -> int:
        """Number of combinations k."""
        return self.data.size

    def covariance(self, block_prior: Prior | None = None) -> Floats:
        """Prior covariance of the predicted combinations, (k, k): VᵀÃÃᵀV.

        Parameters
        ----------
        block_prior : Prior, optional
            In the place of the problem's prior of the blocks.
        """
        priors = self.priors if block_prior is None else (block_prior, *self.priors[1:])
        total = np.zeros((self.size, self.size))
        for prior, sensitivity in zip(priors, self.sensitivity, strict=True):
            total += prior_covariance(prior, sensitivity)
        return total


def prior_covariance(prior: Prior, sensitivity: Floats) -> Floats:
    """Covariance of linear functions of a group's parameters under its prior.

    Parameters
    ----------
    prior : Prior
        n parameters.
    sensitivity : (n, k) array
        One function per column.

    Returns
    -------
    (k, k) array
        Sᵀ C S.
    """
    white = np.empty((sensitivity.shape[1], prior.size))
    for row, column in zip(white, sensitivity.T, strict=True):
        row[:] = prior.colour_adjoint(np.ascontiguousarray(column))
    return np.asarray(white @ white.T)


def compress(
    problem: LinearisedProblem,
    *,
    size: int = 800,
    seed: int = 1,
    progress: Callable[[int, int], None] | None = None,
) -> CompressedData:
    """Combine the rows into the few numbers that bear on the model.

    The combinations span the Krylov space of ÃÃᵀ from a random vector, with
    full reorthogonalisation. They do not depend on the data, hence a test made
    on them is exact whatever their number; fewer only see less.

    Parameters
    ----------
    problem : LinearisedProblem
        A finished inversion.
    size : int, optional
        Largest number of combinations; ten per cent more than the parameters
        resolved is ample.
    seed : int, optional
        Seed of the first vector.
    progress : callable, optional
        Told (combinations done, combinations in all).

    Returns
    -------
    CompressedData

    References
    ----------
    Lanczos, C. (1950). An iteration method for the solution of the eigenvalue
    problem of linear differential and integral operators. J. Res. Natl Bur.
    Stand. 45, 255-282.
    """
    vectors = _krylov_vectors(problem, size=size, seed=seed, progress=progress)
    means = problem.system.means
    weighted = np.column_stack([means.root_weights * means.project(row) for row in vectors])
    groups = problem.system.groups
    compressed = CompressedData(
        data=vectors @ problem.right_hand_side,
        sensitivity=tuple(np.asarray(group.matrix.T @ weighted) for group in groups),
        priors=tuple(group.prior for group in groups),
        resolved=float("nan"),
    )
    values = np.linalg.eigvalsh(compressed.covariance())
    resolved = float(np.sum(values / (1.0 + values)))
    return CompressedData(
        compressed.data, compressed.sensitivity, compressed.priors, resolved=resolved
    )


def _krylov_vectors(
    problem: LinearisedProblem,
    *,
    size: int,
    seed: int,
    progress: Callable[[int, int], None] | None,
) -> Floats:
    """Orthonormal rows that span the Krylov space, (k, rows)."""
    system = problem.system
    random = np.random.default_rng(seed)
    start = system.means.project(
        np.where(problem.active, random.standard_normal(problem.rows.count), 0.0)
    )
    size = min(size, problem.free_count)
    vectors = np.empty((size, start.size))
    vectors[0] = start / np.linalg.norm(start)
    first_norm = 0.0
    for done in range(1, size):
        image = system.times(system.transposed_times(vectors[done - 1]))
        for _ in range(2):
            image -= (vectors[:done] @ image) @ vectors[:done]
        norm = float(np.linalg.norm(image))
        first_norm = max(first_norm, norm)
        if norm <= _EXHAUSTED * first_norm:
            return vectors[:done]
        vectors[done] = image / norm
        if progress is not None:
            progress(done + 1, size)
    return vectors

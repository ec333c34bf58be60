"""Many right-hand sides of one linearised problem at a time, solved in the space of the rows.

Main type: :class:`RowSpace`. With Ã = B C^½ (B = (I − QQᵀ) W^½ A), the solution of
the regularised problem for data y is C Bᵀ (B C Bᵀ + I)⁻¹ y: vectors as long as
the data are iterated on, not vectors as long as the blocks, and no square root
of the prior is needed. All right-hand sides share one Krylov space.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array, hstack

from rayloom.appraisal.blas import one_blas_thread
from rayloom.inversion import GroupMeans, LinearisedProblem, Prior

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class RowSolution:
    """What the solver found.

    Attributes
    ----------
    rows : (rows, k) array
        (B C Bᵀ + I)⁻¹ y, one column per right-hand side.
    iterations : int
        Steps taken.
    largest_error : float
        Largest residual norm over the norm of its right-hand side.
    """

    rows: Floats
    iterations: int
    largest_error: float


@dataclass(frozen=True)
class RowSpace:
    """A linearised problem without its solution; plain arrays that can be sent elsewhere.

    Attributes
    ----------
    matrix : (rows, parameters) csr_array
        Columns of all parameter groups side by side, the blocks first; s per unit.
    transposed : (parameters, rows) csr_array
        Its transpose.
    priors : tuple of Prior
        Priors of the groups.
    means : GroupMeans
        Weights and the projection that eliminates the means.
    """

    matrix: csr_array
    transposed: csr_array
    priors: tuple[Prior, ...]
    means: GroupMeans

    @classmethod
    def of_problem(cls, problem: LinearisedProblem) -> RowSpace:
        """Take rays, priors and weights from a linearised problem."""
        groups = problem.system.groups
        matrix = csr_array(hstack([group.matrix for group in groups], format="csr"))
        return cls(
            matrix=matrix,
            transposed=csr_array(matrix.T),
            priors=tuple(group.prior for group in groups),
            means=problem.system.means,
        )

    @property
    def row_count(self) -> int:
        """Number of rows, those without weight included."""
        return int(self.matrix.shape[0])

    @property
    def parameter_count(self) -> int:
        """Number of parameters of all groups."""
        return int(self.matrix.shape[1])

    @property
    def block_count(self) -> int:
        """Number of blocks: the parameters that come first."""
        return self.priors[0].size

    def with_weights(self, root_weights: Floats) -> RowSpace:
        """Return the same rays under other weights.

        Parameters
        ----------
        root_weights : (rows,) array
            Square roots of the weights, 1/s.
        """
        return replace(self, means=GroupMeans.of_rows(self.means.group, root_weights))

    def project(self, rows: Floats) -> Floats:
        """Apply I − QQᵀ to each column of (rows, k)."""
        return _each(self.means.project, rows)

    def weighted(self, seconds: Floats) -> Floats:
        """Weight times, (rows, k) in s, and take off the group means."""
        return self.project(self.means.root_weights[:, None] * seconds)

    def predicted(self, parameters: Floats) -> Floats:
        """B x: weighted times without group means of (parameters or blocks, k)."""
        if parameters.shape[0] == self.parameter_count:
            return self.weighted(np.asarray(self.matrix @ parameters))
        padded = np.zeros((self.parameter_count, parameters.shape[1]))
        padded[: parameters.shape[0]] = parameters
        return self.weighted(np.asarray(self.matrix @ padded))

    def gathered(self, rows: Floats) -> Floats:
        """Bᵀ y, (parameters, k), of (rows, k)."""
        weighted = self.means.root_weights[:, None] * self.project(rows)
        return np.asarray(self.transposed @ weighted)

    def covary(self, parameters: Floats) -> Floats:
        """C x: the prior covariance times each column of (parameters, k)."""
        parts = zip(self.priors, self._split(parameters), strict=True)
        return np.vstack([_covaried(prior, part) for prior, part in parts])

    def draw(self, random: np.random.Generator) -> Floats:
        """Draw one set of parameters from the prior, (parameters,)."""
        return np.concatenate(
            [prior.colour(random.standard_normal(prior.size)) for prior in self.priors]
        )

    def noise(self, random: np.random.Generator) -> Floats:
        """Draw errors of unit variance of the rows with weight, without group means, (rows,)."""
        drawn = random.standard_normal(self.row_count)
        return self.means.project(np.where(self.means.root_weights > 0.0, drawn, 0.0))

    def estimate(self, rows: Floats, *, tolerance: float, max_iterations: int) -> Floats:
        """Parameters that the regularised inversion finds from weighted data (rows, k)."""
        found = self.solve(rows, tolerance=tolerance, max_iterations=max_iterations)
        return self.covary(self.gathered(found.rows))

    def solve(self, rows: Floats, *, tolerance: float, max_iterations: int) -> RowSolution:
        """Solve (B C Bᵀ + I) w = y for all columns of y by block conjugate gradients.

        Parameters
        ----------
        rows : (rows, k) array
            y.
        tolerance : float
            Residual norm over the norm of y at which every column may stop. As no
            eigenvalue is under 1, the norm of the error is not larger than that of
            the residual.
        max_iterations : int
            Most steps.

        Returns
        -------
        RowSolution

        References
        ----------
        Dubrulle, A. A. (2001). Retooling the method of block conjugate gradients.
        Electron. Trans. Numer. Anal. 12, 216-233 (the variant with QR factors).
        """
        with one_blas_thread():
            return self._solve(rows, tolerance, max_iterations)

    def _solve(self, rows: Floats, tolerance: float, max_iterations: int) -> RowSolution:
        wanted = np.linalg.norm(rows, axis=0)
        size = np.where(wanted > 0.0, wanted, 1.0)
        found = np.zeros_like(rows)
        residual, coefficients = np.linalg.qr(rows)
        direction = residual
        iterations, error = 0, float(np.any(wanted > 0.0))
        while error > tolerance and iterations < max_iterations:
            image = direction + self.predicted(self.covary(self.gathered(direction)))
            inverse = np.linalg.inv(direction.T @ image)
            found += direction @ (inverse @ coefficients)
            residual, rest = np.linalg.qr(residual - image @ inverse)
            coefficients = rest @ coefficients
            direction = residual + direction @ rest.T
            iterations += 1
            error = float(np.max(np.linalg.norm(coefficients, axis=0) / size))
        return RowSolution(found, iterations, error)

    def _split(self, parameters: Floats) -> list[Floats]:
        return np.split(parameters, np.cumsum([prior.size for prior in self.priors])[:-1])


def _covaried(prior: Prior, columns: Floats) -> Floats:
    return _each(lambda column: prior.colour(prior.colour_adjoint(column)), columns)


def _each(function: Callable[[Floats], Floats], columns: Floats) -> Floats:
    """Apply a function of vectors to each column."""
    if columns.shape[1] == 0:
        return columns
    return np.column_stack([function(np.ascontiguousarray(column)) for column in columns.T])

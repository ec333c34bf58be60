"""One Golub-Kahan bidiagonalisation that serves every damping.

Main type: :class:`Bidiagonal`. Started from the data it gives the regularised
residual at any damping; started from random signs it gives traces of functions
of the operator, those of GCV and of the evidence among them.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import eigh_tridiagonal, solveh_banded

Floats = NDArray[np.float64]
_CHECK_EVERY = 10
_NEGLIGIBLE = 1e-14


class Operator(Protocol):
    """A matrix known by its products."""

    @property
    def shape(self) -> tuple[int, int]:
        """Numbers of rows and unknowns."""

    def times(self, white: Floats) -> Floats:
        """Return A z, (rows,)."""

    def transposed_times(self, rows: Floats) -> Floats:
        """Return Aᵀ y, (unknowns,)."""


@dataclass(frozen=True)
class Bidiagonal:
    """What an operator does to a starting vector b, for every damping.

    With A V = U B and B lower bidiagonal, A Aᵀ acts on b as B Bᵀ on the first unit
    vector. Regularised residuals r = (I + A Aᵀ/λ²)⁻¹ b and quadratic forms
    bᵀ f(A Aᵀ) b follow from the eigenvalues of B Bᵀ.

    Attributes
    ----------
    left : (k + 1, rows) array
        Orthonormal vectors U, one per row.
    norm : float
        ‖b‖.
    squares : (k + 1,) array
        Eigenvalues of B Bᵀ: squared Ritz values of A, one of them 0.
    vectors : (k + 1, k + 1) array
        Eigenvectors of B Bᵀ, one per column.
    converged : bool
        Whether the smallest damping asked for reached the accuracy asked.
    """

    left: Floats
    norm: float
    squares: Floats
    vectors: Floats
    converged: bool

    @property
    def weights(self) -> Floats:
        """Squared components of b along the eigenvectors, (k + 1,); their sum is ‖b‖²."""
        return np.asarray((self.norm * self.vectors[0]) ** 2)

    def residual(self, damping: float) -> Floats:
        """Regularised residual (I + A Aᵀ/λ²)⁻¹ b, (rows,)."""
        shrunk = self.norm * self.vectors[0] / (1.0 + self.squares / damping**2)
        return np.asarray((self.vectors @ shrunk) @ self.left)

    def residual_squared(self, damping: Floats) -> Floats:
        """Squared norm of the regularised residual at each damping."""
        return (_filters(self.squares, damping) ** 2) @ self.weights

    def solution_squared(self, damping: Floats) -> Floats:
        """Squared norm of the regularised solution Aᵀ r/λ² at each damping."""
        filters = _filters(self.squares, damping)
        return np.asarray((filters**2) @ (self.weights * self.squares) / damping**4)

    def quadratic(self, function: Callable[[Floats], Floats]) -> float:
        """bᵀ f(A Aᵀ) b.

        References
        ----------
        Golub, G. H. & Meurant, G. (2010). Matrices, moments and quadrature.
        Princeton University Press (Gauss-Radau rules by bidiagonalisation).
        """
        return float(self.weights @ function(self.squares))


def _filters(squares: Floats, damping: Floats) -> Floats:
    """λ²/(θ² + λ²), (dampings, k + 1)."""
    square = np.asarray(damping)[:, None] ** 2
    return np.asarray(square / (squares + square))


def bidiagonalise(
    operator: Operator,
    start: Floats,
    *,
    damping: float,
    tolerance: float,
    max_steps: int,
) -> Bidiagonal:
    """Bidiagonalise until the solution at the smallest damping has converged.

    The vectors in the space of the rows are kept and each new one is made
    orthogonal to all of them, which keeps those in the space of the unknowns
    orthogonal as well; the latter are not stored.

    Parameters
    ----------
    operator : Operator
        A.
    start : (rows,) array
        b.
    damping : float
        Smallest damping λ that will be asked for.
    tolerance : float
        Norm of the gradient of ‖A z − b‖² + λ²‖z‖² over that at z = 0 that suffices.
    max_steps : int
        Most steps.

    References
    ----------
    Golub, G. & Kahan, W. (1965). Calculating the singular values and
    pseudo-inverse of a matrix. SIAM J. Numer. Anal. B 2, 205-224.
    Simon, H. D. & Zha, H. (2000). Low-rank matrix approximation using the
    Lanczos bidiagonalization process. SIAM J. Sci. Comput. 21, 2257-2274
    (reorthogonalising one side suffices).
    """
    norm = float(np.linalg.norm(start))
    if norm == 0.0:
        return Bidiagonal(start[None, :], 0.0, np.zeros(1), np.ones((1, 1)), True)
    left = _Basis(start / norm)
    right = operator.transposed_times(left.last)
    alpha, beta = [float(np.linalg.norm(right))], list[float]()
    converged = alpha[0] == 0.0
    while not converged and len(beta) < max_steps:
        right = right / alpha[-1]
        beta.append(left.add(operator.times(right) - alpha[-1] * left.last))
        if beta[-1] <= _NEGLIGIBLE * max(alpha):
            converged = True
            beta[-1] = 0.0
            break
        right = operator.transposed_times(left.last) - beta[-1] * right
        alpha.append(float(np.linalg.norm(right)))
        if alpha[-1] <= _NEGLIGIBLE * max(beta):
            converged = True
        elif len(beta) % _CHECK_EVERY == 0:
            converged = _gradient_share(alpha, beta, damping) <= tolerance
    squares, vectors = eigh_tridiagonal(*_tridiagonal(alpha, beta))
    return Bidiagonal(
        left=left.vectors,
        norm=norm,
        squares=np.maximum(squares, 0.0),
        vectors=np.asarray(vectors, dtype=np.float64),
        converged=converged,
    )


def _tridiagonal(alpha: list[float], beta: list[float]) -> tuple[Floats, Floats]:
    """Diagonal and off-diagonal of B Bᵀ."""
    steps = len(beta)
    a, b = np.array(alpha[:steps]), np.array(beta)
    diagonal = np.zeros(steps + 1)
    diagonal[:steps] += a**2
    diagonal[1:] += b**2
    return diagonal, a * b


def _gradient_share(alpha: list[float], beta: list[float], damping: float) -> float:
    """Norm of the gradient at a damping over that of the start."""
    diagonal, beside = _tridiagonal(alpha, beta)
    banded = np.zeros((2, diagonal.size))
    banded[0, 1:] = beside / damping**2
    banded[1] = 1.0 + diagonal / damping**2
    first = np.zeros(diagonal.size)
    first[0] = 1.0
    residual = solveh_banded(banded, first)
    return abs(float(residual[-1])) * alpha[-1] / alpha[0]


class _Basis:
    """Orthonormal vectors, one per row of an array that grows."""

    def __init__(self, first: Floats) -> None:
        self._store = np.empty((64, first.size))
        self._store[0] = first
        self._count = 1

    @property
    def vectors(self) -> Floats:
        vectors: Floats = self._store[: self._count]
        return vectors

    @property
    def last(self) -> Floats:
        last: Floats = self._store[self._count - 1]
        return last

    def add(self, vector: Floats) -> float:
        """Append what of a vector is new, and return its norm (0 vector if nothing is)."""
        known = self._store[: self._count]
        vector = vector - (known @ vector) @ known
        vector = vector - (known @ vector) @ known
        norm = float(np.linalg.norm(vector))
        if self._count == len(self._store):
            self._store = np.concatenate([self._store, np.empty_like(self._store)])
        self._store[self._count] = vector / norm if norm > 0.0 else 0.0
        self._count += 1
        return norm

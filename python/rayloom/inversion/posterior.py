"""Exact posterior errors of chosen quantities, many at a time.

Main functions: :func:`posterior_variance` for any linear functions of the
whitened unknowns, :func:`group_standard_deviation` for the parameters of one
group.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from rayloom.inversion.system import WhitenedSystem

_COLUMNS_AT_ONCE = 48
"""Enough for the columns to help each other; bounds the memory."""
_SAFE_RATIO = 1e-5
"""Of the diagonal of a Cholesky factor; below it columns are nearly dependent."""


def posterior_variance(
    system: WhitenedSystem,
    columns: NDArray[np.float64],
    *,
    tolerance: float = 1e-3,
    max_iterations: int = 500,
    progress: Callable[[int, int], None] | None = None,
) -> NDArray[np.float64]:
    """Posterior variances bᵀ (ÃᵀÃ + I)⁻¹ b of linear functions bᵀz.

    Block conjugate gradients from all b of a batch: each step adds to every
    variance, so that the sums rise to their limits and stop once a step adds
    less than a share ``tolerance`` of any. Variances hold for the weights and
    the rays of the system, and for uncertainties as they stand.

    Parameters
    ----------
    system : WhitenedSystem
        The operator Ã.
    columns : (unknowns, k) array
        One b per column.
    tolerance : float, optional
        Share of a variance below which a step ends the sum.
    max_iterations : int, optional
        Most steps per batch of columns.
    progress : callable, optional
        Told (columns done, columns).

    Returns
    -------
    (k,) array
        Variances, in the squared unit of bᵀz.

    References
    ----------
    Dubrulle, A. A. (2001). Retooling the method of block conjugate gradients.
    Electron. Trans. Numer. Anal. 12, 216-233 (the variant with QR factors).
    """
    count = columns.shape[1]
    variance = np.zeros(count)
    for start in range(0, count, _COLUMNS_AT_ONCE):
        batch = slice(start, min(start + _COLUMNS_AT_ONCE, count))
        variance[batch] = _batch(
            system, columns[:, batch], tolerance=tolerance, max_iterations=max_iterations
        )
        if progress is not None:
            progress(batch.stop, count)
    return variance


def group_standard_deviation(
    system: WhitenedSystem,
    name: str,
    *,
    tolerance: float = 1e-3,
    max_iterations: int = 500,
    progress: Callable[[int, int], None] | None = None,
) -> NDArray[np.float64]:
    """Posterior standard deviation of each parameter of a group.

    Parameters
    ----------
    system : WhitenedSystem
        The operator Ã.
    name : str
        Name of the group, "station_terms" for instance.
    tolerance, max_iterations, progress
        As for :func:`posterior_variance`.

    Returns
    -------
    (size of the group,) array
        In the unit of the parameters.
    """
    start = 0
    for group in system.groups:
        if group.name == name:
            break
        start += group.size
    columns = np.zeros((system.shape[1], group.size))
    for parameter, unit in enumerate(np.eye(group.size)):
        columns[start : start + group.size, parameter] = group.prior.colour_adjoint(unit)
    variance = posterior_variance(
        system,
        columns,
        tolerance=tolerance,
        max_iterations=max_iterations,
        progress=progress,
    )
    return np.sqrt(variance)


def _batch(
    system: WhitenedSystem,
    columns: NDArray[np.float64],
    *,
    tolerance: float,
    max_iterations: int,
) -> NDArray[np.float64]:
    """Sum of Bᵀ P (Pᵀ A P)⁻¹ C over the block directions P, A = ÃᵀÃ + I."""
    residual, coefficients = _orthonormal(columns)
    direction = residual
    variance = np.zeros(columns.shape[1])
    for _ in range(max_iterations):
        image = _normal_times(system, direction)
        inverse = np.linalg.inv(direction.T @ image)
        added = np.einsum("ki,ij,jk->k", columns.T @ direction, inverse, coefficients)
        variance += added
        if np.all(added <= tolerance * variance):
            break
        residual, rest = _orthonormal(residual - image @ inverse)
        coefficients = rest @ coefficients
        direction = residual + direction @ rest.T
    return np.maximum(variance, 0.0)


def _orthonormal(
    columns: NDArray[np.float64],
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """QR factors: Cholesky twice, a fifth of the work of reflections where it is safe.

    References
    ----------
    Yamamoto, Y., Nakatsukasa, Y., Yanagisawa, Y. & Fukaya, T. (2015). Roundoff error
    analysis of the CholeskyQR2 algorithm. Electron. Trans. Numer. Anal. 44, 306-326.
    """
    try:
        first = np.linalg.cholesky(columns.T @ columns).T
        if np.diag(first).min() > _SAFE_RATIO * np.diag(first).max():
            once = columns @ np.linalg.inv(first)
            second = np.linalg.cholesky(once.T @ once).T
            return once @ np.linalg.inv(second), second @ first
    except np.linalg.LinAlgError:
        pass
    return np.linalg.qr(columns)


def _normal_times(system: WhitenedSystem, columns: NDArray[np.float64]) -> NDArray[np.float64]:
    """(ÃᵀÃ + I) applied to each column."""
    return np.column_stack(
        [column + system.transposed_times(system.times(column)) for column in columns.T]
    )

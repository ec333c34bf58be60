"""Least squares that outliers do not spoil: :func:`robust_fit`."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np

from rayloom.residuals.screens.pattern import sigma_of
from rayloom.survey.tables import FloatArray

_HUBER: Final = 1.345
_ROUNDS: Final = 5


@dataclass(frozen=True, eq=False)
class Fit:
    """A fitted linear model.

    Parameters
    ----------
    value, error : (k,) float arrays
        Coefficients and their standard errors.
    scatter : float
        Robust standard deviation of what is left, in the unit of the data.
    """

    value: FloatArray
    error: FloatArray
    scatter: float


def robust_fit(columns: FloatArray, data: FloatArray) -> Fit:
    """Fit data by columns with Huber weights on the robust scale of the residuals.

    Parameters
    ----------
    columns : (n, k) float array
        The linear model.
    data : (n,) float array
        What to fit.

    Returns
    -------
    Fit

    References
    ----------
    Huber, P.J. (1981). Robust Statistics. Wiley, chapter 7.
    """
    weight = np.ones(len(data))
    value = np.zeros(columns.shape[1])
    scatter = 0.0
    inverse: FloatArray = np.zeros((columns.shape[1], columns.shape[1]))
    for _ in range(_ROUNDS):
        weighted = columns * weight[:, np.newaxis]
        inverse = _inverse(weighted.T @ columns)
        value = inverse @ (weighted.T @ data)
        left = data - columns @ value
        scatter = max(sigma_of(left), 1e-9)
        weight = np.minimum(1.0, _HUBER * scatter / np.maximum(np.abs(left), 1e-12))
    error = scatter * np.sqrt(np.maximum(np.diag(inverse), 0.0))
    return Fit(value, error, scatter)


def _inverse(normal: FloatArray) -> FloatArray:
    """Invert normal equations; the pseudo-inverse where they are singular."""
    try:
        return np.asarray(np.linalg.inv(normal), dtype=np.float64)
    except np.linalg.LinAlgError:
        return np.asarray(np.linalg.pinv(normal, hermitian=True), dtype=np.float64)

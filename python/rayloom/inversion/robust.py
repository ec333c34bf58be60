"""Robust weights: how far each residual may be trusted.

Main types: :class:`Huber`, :class:`StudentT` and :class:`LeastSquares`, each of
which :class:`Rejecting` may cut off, and the :class:`RobustFit` of one mean per
group under any of them.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

_MAD_TO_SIGMA = 1.4826  # 1/Φ⁻¹(3/4): median absolute deviation of a Gaussian (textbook)
_LOCATION_ROUNDS = 100
_LOCATION_TOLERANCE = 1e-10


class RobustLoss(Protocol):
    """A loss whose minimum is found by repeated weighting."""

    def weights(self, standardised: NDArray[np.float64]) -> NDArray[np.float64]:
        """Weights of standardised residuals, 1 or about 1 for small ones."""

    def loss(self, standardised: NDArray[np.float64]) -> NDArray[np.float64]:
        """Loss of each residual, its square if small."""


@dataclass(frozen=True)
class LeastSquares:
    """The plain square: every weight is 1."""

    def weights(self, standardised: NDArray[np.float64]) -> NDArray[np.float64]:
        """Ones."""
        return np.ones_like(standardised)

    def loss(self, standardised: NDArray[np.float64]) -> NDArray[np.float64]:
        """Squares."""
        return standardised**2


@dataclass(frozen=True)
class Huber:
    """Square up to ``k`` standard deviations, linear beyond.

    References
    ----------
    Huber, P. J. (1964). Robust estimation of a location parameter. Annals of
    Mathematical Statistics 35, 73-101. With k = 1.345 the estimate keeps 95 %
    of the efficiency of least squares for Gaussian errors (textbook).
    """

    k: float = 1.345

    def weights(self, standardised: NDArray[np.float64]) -> NDArray[np.float64]:
        """min(1, k/|u|)."""
        return self.k / np.maximum(np.abs(standardised), self.k)

    def loss(self, standardised: NDArray[np.float64]) -> NDArray[np.float64]:
        """u² within k, 2k|u| − k² beyond."""
        size = np.abs(standardised)
        return np.where(size <= self.k, size**2, 2.0 * self.k * size - self.k**2)


@dataclass(frozen=True)
class StudentT:
    """Negative log-likelihood of Student's t with ``degrees`` of freedom.

    References
    ----------
    Lange, K. L., Little, R. J. A. & Taylor, J. M. G. (1989). Robust statistical
    modeling using the t distribution. J. Am. Statist. Assoc. 84, 881-896.
    """

    degrees: float = 4.0

    def weights(self, standardised: NDArray[np.float64]) -> NDArray[np.float64]:
        """(ν + 1)/(ν + u²)."""
        return (self.degrees + 1.0) / (self.degrees + standardised**2)

    def loss(self, standardised: NDArray[np.float64]) -> NDArray[np.float64]:
        """(ν + 1) ln(1 + u²/ν)."""
        return (self.degrees + 1.0) * np.log1p(standardised**2 / self.degrees)


@dataclass(frozen=True)
class Rejecting:
    """Another loss that stays flat ``beyond`` so many standard deviations.

    Rows out there lose all weight. As the scale of the residuals falls from
    iteration to iteration, rows are turned away only once the model explains
    the others.
    """

    inner: RobustLoss
    beyond: float

    def weights(self, standardised: NDArray[np.float64]) -> NDArray[np.float64]:
        """Those of the inner loss, 0 beyond."""
        near = np.abs(standardised) <= self.beyond
        return np.where(near, self.inner.weights(standardised), 0.0)

    def loss(self, standardised: NDArray[np.float64]) -> NDArray[np.float64]:
        """Inner loss, constant beyond."""
        return self.inner.loss(np.clip(standardised, -self.beyond, self.beyond))


@dataclass(frozen=True)
class RobustFit:
    """Residuals measured from the robust mean of their group.

    Attributes
    ----------
    centred_s : (rows,) array
        Residual minus the mean of its group, s.
    standardised : (rows,) array
        The same over the row's uncertainty.
    scale : float
        Spread of the standardised residuals that the weights assume: 1.4826
        times their median absolute value, and at least 1. It keeps the weights
        meaningful while the model still leaves structure in the residuals.
    weights : (rows,) array
        Robust weights; 0 for rows that take no part.
    misfit : float
        Sum of the losses, the robust counterpart of χ².
    """

    centred_s: NDArray[np.float64]
    standardised: NDArray[np.float64]
    scale: float
    weights: NDArray[np.float64]
    misfit: float


def robust_fit(
    residual_s: NDArray[np.float64],
    uncertainty_s: NDArray[np.float64],
    group: NDArray[np.int64],
    active: NDArray[np.bool_],
    loss: RobustLoss,
    *,
    scale: float | None = None,
) -> RobustFit:
    """Find the robust mean of every group, starting from its median.

    Parameters
    ----------
    residual_s, uncertainty_s : (rows,) arrays
        Residuals and their standard errors, s.
    group : (rows,) int array
        Group of each row; −1 for a row without a free mean.
    active : (rows,) bool array
        Rows that take part.
    loss : RobustLoss
        Which loss to minimise.
    scale : float, optional
        Spread to assume instead of the one estimated, to compare fits.
    """
    clean = np.where(active, residual_s, 0.0)
    centred = clean - _per_row(_medians(clean, group, active), group)
    if scale is None:
        size = np.abs(centred / uncertainty_s)[active]
        scale = max(1.0, _MAD_TO_SIGMA * float(np.median(size))) if size.size else 1.0
    precision = np.where(active, uncertainty_s**-2, 0.0)
    for _ in range(_LOCATION_ROUNDS):
        weights = precision * loss.weights(centred / (uncertainty_s * scale))
        shift = _means(centred, weights, group)
        centred = centred - _per_row(shift, group)
        if np.max(np.abs(shift), initial=0.0) <= _LOCATION_TOLERANCE:
            break
    centred = np.where(active, centred, np.nan)
    standardised = centred / uncertainty_s
    reduced = np.where(active, standardised, 0.0) / scale
    return RobustFit(
        centred_s=centred,
        standardised=standardised,
        scale=scale,
        weights=np.where(active, loss.weights(reduced), 0.0),
        misfit=scale**2 * float(np.sum(loss.loss(reduced)[active])),
    )


def _medians(
    values: NDArray[np.float64], group: NDArray[np.int64], active: NDArray[np.bool_]
) -> NDArray[np.float64]:
    """Median of the active rows of each group, 0 for a group without any."""
    kept = active & (group >= 0)
    order = np.lexsort((values[kept], group[kept]))
    ranked, owner = values[kept][order], group[kept][order]
    sizes = np.bincount(owner, minlength=_group_total(group))
    ends = np.cumsum(sizes)
    filled = sizes > 0
    starts = (ends - sizes)[filled]
    low, high = starts + (sizes[filled] - 1) // 2, starts + sizes[filled] // 2
    medians = np.zeros(sizes.size)
    medians[filled] = 0.5 * (ranked[low] + ranked[high])
    return medians


def _means(
    values: NDArray[np.float64], weights: NDArray[np.float64], group: NDArray[np.int64]
) -> NDArray[np.float64]:
    """Weighted mean of each group, 0 for a group without weight."""
    slot = np.maximum(group, 0)
    grouped = np.where(group >= 0, weights, 0.0)
    total = _group_total(group)
    sums = np.bincount(slot, weights=grouped * values, minlength=total)
    mass = np.bincount(slot, weights=grouped, minlength=total)
    return sums / np.where(mass > 0.0, mass, 1.0)


def _per_row(means: NDArray[np.float64], group: NDArray[np.int64]) -> NDArray[np.float64]:
    return np.where(group >= 0, means[np.maximum(group, 0)], 0.0)


def _group_total(group: NDArray[np.int64]) -> int:
    return max(int(group.max(initial=-1)) + 1, 1)

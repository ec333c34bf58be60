"""What χ² and RMS ought to be if the uncertainties are right.

A misfit of robustly weighted residuals is smaller than one of plain residuals
even where all errors are Gaussian. The expectations here allow for it, so that
a misfit can be compared with them as it stands.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rayloom.inversion.robust import LeastSquares, Rejecting, RobustLoss

_NODES = np.linspace(-12.0, 12.0, 24001)


@dataclass(frozen=True)
class ExpectedMisfit:
    """Expectations for Gaussian errors of the size stated.

    Attributes
    ----------
    chi2 : float
        Of Σ w (r/σ)².
    chi2_kept : float
        Of Σ (r/σ)² over the rows not suspected as outliers.
    rms_kept_s : float
        Root mean square residual of those rows, s.
    """

    chi2: float
    chi2_kept: float
    rms_kept_s: float


def expected_misfit(
    loss: RobustLoss,
    *,
    scale: float,
    outlier_std: float,
    weighted: NDArray[np.bool_],
    kept: NDArray[np.bool_],
    uncertainty_s: NDArray[np.float64],
    lost: float,
) -> ExpectedMisfit:
    """Work out the expectations.

    N rows of which ``lost`` degrees of freedom went into means and parameters
    keep standardised residuals of variance τ² = (N − lost)/N, taken to be the
    same in all rows. Weights w(r/s) turn the expectation of Σ w r² into
    N τ² E[w(τu/s) u² | w > 0], u ~ N(0, 1).

    Parameters
    ----------
    loss : RobustLoss
        The loss that the weights come from.
    scale : float
        s, the spread of standardised residuals that the weights assume.
    outlier_std : float
        Rows beyond so many times ``scale`` are suspected as outliers.
    weighted, kept : (rows,) bool arrays
        Rows with weight; rows in use and not suspected.
    uncertainty_s : (rows,) array
        Standard errors of the rows, s.
    lost : float
        N_g + tr H: means eliminated and parameters resolved.
    """
    count, kept_count = int(np.sum(weighted)), int(np.sum(kept))
    spread = np.sqrt(max(count - lost, 0.0) / count) if count else 0.0
    cut = Rejecting(LeastSquares(), outlier_std)
    chi2_kept = max(kept_count - lost, 0.0) * share_of_square(cut, spread / scale)
    mean_square = float(np.mean(uncertainty_s[kept] ** 2)) if kept_count else 0.0
    return ExpectedMisfit(
        chi2=max(count - lost, 0.0) * share_of_square(loss, spread / scale),
        chi2_kept=chi2_kept,
        rms_kept_s=float(np.sqrt(mean_square * chi2_kept / max(kept_count, 1))),
    )


def share_of_square(loss: RobustLoss, spread: float) -> float:
    """E[w(τu) u² | w(τu) > 0] for u ~ N(0, 1): what weighting leaves of a square.

    For Huber's weights it is 2Φ(k/τ) − 1.

    Parameters
    ----------
    loss : RobustLoss
        The loss that the weights come from.
    spread : float
        τ, standard deviation of what is weighted.
    """
    weights = loss.weights(spread * _NODES)
    density = np.exp(-0.5 * _NODES**2)
    counted = float(np.sum(density[weights > 0.0]))
    squares = float(np.sum(density * weights * _NODES**2))
    return squares / counted if counted > 0.0 else 0.0

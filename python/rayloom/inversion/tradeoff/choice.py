"""Rules that pick a damping on one curve: corner, GCV, discrepancy, evidence."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from rayloom.inversion.tradeoff.curve import Curve

Floats = NDArray[np.float64]

SHARPEST_STRAIGHT = 0.1
"""Curvature below which an L-curve is called straight: a right angle drawn over one
decade bends by π/2 over 2.3, that is 0.7."""


def corner_damping(damping: Floats, curvature: Floats, bracket: NDArray[np.bool_]) -> float | None:
    """Damping at the sharpest corner of the L-curve inside a bracket.

    Only a maximum with lower curvature on both sides counts: at the ends of a
    curve, and where it follows rounding errors, there are false corners.

    Parameters
    ----------
    damping : (n,) array
        λ, rising.
    curvature : (n,) array
        Curvature there.
    bracket : (n,) bool array
        Where to look; see :func:`plausible`.

    Returns
    -------
    float or None
        None if the curve has no corner there.

    References
    ----------
    Hansen, P. C. & O'Leary, D. P. (1993). The use of the L-curve in the
    regularization of discrete ill-posed problems. SIAM J. Sci. Comput. 14,
    1487-1503.
    """
    inner = np.arange(1, damping.size - 1)
    peaks = inner[
        (curvature[inner] >= curvature[inner - 1])
        & (curvature[inner] >= curvature[inner + 1])
        & (curvature[inner] > SHARPEST_STRAIGHT)
        & bracket[inner]
    ]
    if peaks.size == 0:
        return None
    return vertex(damping, -curvature, int(peaks[np.argmax(curvature[peaks])]))


def plausible(resolved: Floats, free_count: int) -> NDArray[np.bool_]:
    """Where the data resolve at least one parameter and at most half as many as they are.

    Parameters
    ----------
    resolved : (n,) array
        tr H.
    free_count : int
        N − N_g.
    """
    return np.asarray((resolved >= 1.0) & (resolved <= 0.5 * free_count))


def gcv_damping(curve: Curve) -> float:
    """Damping with the least GCV."""
    return vertex(curve.damping, curve.gcv, int(np.argmin(curve.gcv)))


def evidence_damping(curve: Curve) -> float:
    """Damping under whose prior the data are most probable."""
    loss = -curve.log_evidence
    return vertex(curve.damping, loss, int(np.argmin(loss)))


def discrepancy_damping(curve: Curve) -> float | None:
    """Strongest damping at which χ² is no more than expected, or None.

    χ² is compared with its expectation N − N_g − tr H. Where Huber weights or
    generous uncertainties make every χ² too small the rule has no answer.

    References
    ----------
    Morozov, V. A. (1966). On the solution of functional equations by the method
    of regularization. Soviet Math. Dokl. 7, 414-417.
    """
    excess = np.log(curve.chi2 / curve.chi2_expected)
    rising = np.flatnonzero((excess[:-1] <= 0.0) & (excess[1:] > 0.0))
    if rising.size == 0:
        return None
    at = int(rising[-1])
    share = -excess[at] / (excess[at + 1] - excess[at])
    low, high = np.log(curve.damping[at : at + 2])
    return float(np.exp(low + share * (high - low)))


def vertex(damping: Floats, values: Floats, lowest: int) -> float:
    """Place of a minimum between samples: parabola through three in log λ."""
    if not 0 < lowest < damping.size - 1:
        return float(damping[lowest])
    logs = np.log(damping[lowest - 1 : lowest + 2])
    a, b, c = values[lowest - 1 : lowest + 2]
    left, right = logs[1] - logs[0], logs[2] - logs[1]
    bend = (c - b) / right - (b - a) / left
    if bend <= 0.0:
        return float(damping[lowest])
    slope = ((b - a) / left * right + (c - b) / right * left) / (left + right)
    shift = np.clip(-slope * (left + right) / (2.0 * bend), -left, right)
    return float(np.exp(logs[1] + shift))

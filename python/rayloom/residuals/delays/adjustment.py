"""From delays of pairs to one time per station by least squares: :func:`adjust`."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np

from rayloom.survey.tables import BoolArray, FloatArray, IndexArray

SUSPECT_SIGMAS: Final = 4.0
"""A delay whose normalised misfit exceeds this is suspected of being wrong."""

_LEAST_REDUNDANCY: Final = 0.05
"""A delay that the others hardly check cannot be told to be wrong."""

_MAD_TO_SIGMA: Final = 1.4826


@dataclass(frozen=True, eq=False)
class Adjustment:
    """Times of some stations that fit their delays best.

    Parameters
    ----------
    time_s : (n,) float array
        Relative arrival time, s; the times of each connected part have zero mean.
    error_s : (n,) float array
        Standard error of it, s.
    part : (n,) int array
        Connected part, the largest is 0; stations without a delay are parts of their own.
    closure_s : (m,) float array
        Delay measured minus delay of the times, s.
    suspected : (m,) bool array
        Delays left out because the others contradict them.
    unit_error : float
        Root of the reduced chi-square; above 1 the uncertainties are too small. NaN where
        nothing is measured more often than need be.
    """

    time_s: FloatArray
    error_s: FloatArray
    part: IndexArray
    closure_s: FloatArray
    suspected: BoolArray
    unit_error: float


def adjust(
    first: IndexArray,
    second: IndexArray,
    delay_s: FloatArray,
    uncertainty_s: FloatArray,
    count: int,
) -> Adjustment:
    """Find the times whose differences fit measured delays best.

    Minimises Σ ((t_a − t_b − d)/σ)² with Σ t = 0 over each connected part (VanDecar &
    Crosson 1990, weighted). The delay with the largest normalised misfit is taken for wrong
    and left out if that exceeds :data:`SUSPECT_SIGMAS` times the usual one, and the rest
    is adjusted anew, until none is left (Baarda 1968). Standard errors follow from the
    uncertainties, enlarged where the misfit says that these are too small.

    Parameters
    ----------
    first, second : (m,) int arrays
        Stations a and b of each delay, numbered from 0.
    delay_s, uncertainty_s : (m,) float arrays
        Arrival at a minus arrival at b, and its standard deviation, s.
    count : int
        Number of stations n.

    Returns
    -------
    Adjustment

    References
    ----------
    VanDecar, J.C. & Crosson, R.S. (1990). Determination of teleseismic relative phase
    arrival times using multi-channel cross-correlation and least squares. Bulletin of the
    Seismological Society of America 80, 150-169.

    Baarda, W. (1968). A testing procedure for use in geodetic networks. Netherlands
    Geodetic Commission, Publications on Geodesy 2(5).
    """
    used = np.ones(len(delay_s), dtype=bool)
    while True:
        part = _parts(first[used], second[used], count)
        time_s, covariance = _solve(
            first[used], second[used], delay_s[used], uncertainty_s[used], part, count
        )
        closure_s = delay_s - (time_s[first] - time_s[second])
        worst = _worst(first, second, closure_s, uncertainty_s, covariance, used)
        if worst is None:
            break
        used[worst] = False
    freedom = int(used.sum()) - count + int(part.max(initial=-1)) + 1
    chi2 = float(np.sum((closure_s[used] / uncertainty_s[used]) ** 2))
    unit_error = float(np.sqrt(chi2 / freedom)) if freedom > 0 else float("nan")
    error_s = np.sqrt(np.maximum(np.diag(covariance), 0.0)) * np.fmax(unit_error, 1.0)
    return Adjustment(time_s, error_s, part, closure_s, ~used, unit_error)


def _parts(first: IndexArray, second: IndexArray, count: int) -> IndexArray:
    """Give the connected part of each station, the largest first."""
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components

    links = coo_array((np.ones(len(first)), (first, second)), shape=(count, count))
    _, label = connected_components(links, directed=False)
    order = np.argsort(-np.bincount(label, minlength=1), kind="stable")
    rank = np.empty(len(order), dtype=np.int64)
    rank[order] = np.arange(len(order))
    return np.asarray(rank[label], dtype=np.int64)


def _solve(
    first: IndexArray,
    second: IndexArray,
    delay_s: FloatArray,
    uncertainty_s: FloatArray,
    part: IndexArray,
    count: int,
) -> tuple[FloatArray, FloatArray]:
    """Solve the normal equations with the mean of each part fixed to zero.

    Adding u uᵀ, u the unit vector over a part, makes the matrix regular and leaves the
    solution of zero mean as it is; the covariance then is its inverse less u uᵀ.
    """
    weight = uncertainty_s**-2
    normal = np.zeros((count, count))
    np.add.at(normal, (first, first), weight)
    np.add.at(normal, (second, second), weight)
    np.add.at(normal, (first, second), -weight)
    np.add.at(normal, (second, first), -weight)
    right = np.bincount(first, weight * delay_s, count) - np.bincount(
        second, weight * delay_s, count
    )
    sizes = np.bincount(part)
    together = (part[:, np.newaxis] == part) / sizes[part]
    scale = float(np.median(weight)) if len(weight) else 1.0
    inverse = np.linalg.inv(normal + scale * together)
    return inverse @ right, inverse - together / scale


def _worst(
    first: IndexArray,
    second: IndexArray,
    closure_s: FloatArray,
    uncertainty_s: FloatArray,
    covariance: FloatArray,
    used: BoolArray,
) -> int | None:
    """Return the delay to take for wrong, if there is one.

    Its misfit over the standard deviation that the misfit has by itself, σ √r with the
    redundancy number r = 1 − (C_aa + C_bb − 2 C_ab)/σ².
    """
    variance = (
        covariance[first, first] + covariance[second, second] - 2.0 * covariance[first, second]
    )
    redundancy = 1.0 - variance / uncertainty_s**2
    checked = used & (redundancy > _LEAST_REDUNDANCY)
    if not checked.any():
        return None
    normalised = np.zeros(len(closure_s))
    normalised[checked] = np.abs(closure_s[checked]) / (
        uncertainty_s[checked] * np.sqrt(redundancy[checked])
    )
    usual = max(1.0, _MAD_TO_SIGMA * float(np.median(normalised[checked])))
    worst = int(np.argmax(normalised))
    return worst if normalised[worst] > SUSPECT_SIGMAS * usual else None

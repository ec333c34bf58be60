"""Which of the priors tried to take, why, and which are as good.

Main function: :func:`recommend`.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rayloom.inversion.tradeoff.cross_validation import EventScores
from rayloom.inversion.tradeoff.curve import Curve

Floats = NDArray[np.float64]
_ENOUGH_EVENTS = 4


@dataclass(frozen=True)
class Recommendation:
    """One prior out of a table, and all that are as good.

    Attributes
    ----------
    curve, damping : int
        Indices of the prior recommended.
    equally_good : (curves, dampings) bool array
        Priors whose score lies within one standard error of the best.
    rule : {"cross-validation", "gcv"}
        What decided.
    at_edge : bool
        Whether the prior lies at an end of the standard deviations tried.
    """

    curve: int
    damping: int
    equally_good: NDArray[np.bool_]
    rule: str
    at_edge: bool


def recommend(curves: Sequence[Curve], scores: EventScores | None) -> Recommendation:
    """Take the prior that predicts unseen events best.

    Without scores, or with fewer than four events, GCV decides instead. Equally good
    are all priors whose score exceeds the best by at most its standard error (Breiman
    et al. 1984); the standard error of a GCV score is taken as that of a χ² with
    N − N_g − tr H degrees of freedom, √(2/(N − N_g − tr H)) of it.

    Parameters
    ----------
    curves : sequence of Curve
        One per shape of the prior, all with the same dampings.
    scores : EventScores, optional
        Cross-validation of the same priors.

    References
    ----------
    Breiman, L., Friedman, J. H., Olshen, R. A. & Stone, C. J. (1984). Classification
    and regression trees. Wadsworth, section 3.4.3.
    """
    if scores is not None and int(np.sum(scores.freedom > 0.0)) >= _ENOUGH_EVENTS:
        values, rule = scores.score, "cross-validation"
        best = np.unravel_index(int(np.argmin(values)), values.shape)
        error = float(scores.standard_error[best])
    else:
        values, rule = np.array([curve.gcv for curve in curves]), "gcv"
        best = np.unravel_index(int(np.argmin(values)), values.shape)
        error = float(values[best] * np.sqrt(2.0 / curves[int(best[0])].chi2_expected[best[1]]))
    curve, damping = int(best[0]), int(best[1])
    return Recommendation(
        curve=curve,
        damping=damping,
        equally_good=values <= values[best] + error,
        rule=rule,
        at_edge=damping in (0, values.shape[1] - 1),
    )

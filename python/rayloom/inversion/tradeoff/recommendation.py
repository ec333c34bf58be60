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
        Priors that no score tells from the best.
    validated : bool
        Whether events left out had a say.
    at_edge : bool
        Whether the prior lies at an end of the standard deviations tried.
    """

    curve: int
    damping: int
    equally_good: NDArray[np.bool_]
    validated: bool
    at_edge: bool


def recommend(curves: Sequence[Curve], scores: EventScores | None) -> Recommendation:
    """Take the prior of least GCV among those that predict unseen events well.

    GCV varies least from one draw of the noise to the next, but trusts errors to be
    independent; cross-validation of whole events does not. Equally good are all priors
    whose score exceeds the best by at most its standard error (Breiman et al. 1984).
    Without scores, or with fewer than four events, they are those whose GCV exceeds the
    least by at most the share √(2/(N − N_g − tr H)), the scatter of a χ².

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
    gcv = np.array([curve.gcv for curve in curves])
    validated = scores is not None and int(np.sum(scores.freedom > 0.0)) >= _ENOUGH_EVENTS
    if scores is not None and validated:
        best = _lowest(scores.score)
        equally_good = scores.score <= scores.score[best] + scores.standard_error[best]
    else:
        best = _lowest(gcv)
        scatter = np.sqrt(2.0 / curves[best[0]].chi2_expected[best[1]])
        equally_good = gcv <= gcv[best] * (1.0 + scatter)
    curve, damping = _lowest(np.where(equally_good, gcv, np.inf))
    return Recommendation(
        curve=curve,
        damping=damping,
        equally_good=equally_good,
        validated=validated,
        at_edge=damping in (0, gcv.shape[1] - 1),
    )


def _lowest(values: Floats) -> tuple[int, int]:
    curve, damping = np.unravel_index(int(np.argmin(values)), values.shape)
    return int(curve), int(damping)

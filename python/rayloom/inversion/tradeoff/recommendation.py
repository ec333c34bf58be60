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
_EVIDENCE_APART = 3.0


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
    """Take the most probable prior among those that predict unseen events well.

    The evidence varies least from one draw of truth and noise to the next, but trusts
    that the structure is like the prior and that errors are independent;
    cross-validation of whole events does neither. Equally good are all priors whose
    score exceeds the best by at most its standard error (Breiman et al. 1984). Without
    scores, or with fewer than four events, they are those whose log evidence lies within
    3 of the highest: 95 % of a likelihood in two parameters.

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
    evidence = np.array([curve.log_evidence for curve in curves])
    validated = scores is not None and int(np.sum(scores.freedom > 0.0)) >= _ENOUGH_EVENTS
    if scores is not None and validated:
        best = _lowest(scores.score)
        equally_good = scores.score <= scores.score[best] + scores.standard_error[best]
    else:
        equally_good = evidence >= evidence.max() - _EVIDENCE_APART
    curve, damping = _lowest(np.where(equally_good, -evidence, np.inf))
    return Recommendation(
        curve=curve,
        damping=damping,
        equally_good=equally_good,
        validated=validated,
        at_edge=damping in (0, evidence.shape[1] - 1),
    )


def _lowest(values: Floats) -> tuple[int, int]:
    curve, damping = np.unravel_index(int(np.argmin(values)), values.shape)
    return int(curve), int(damping)

"""The trade-off between fit and prior, and the choice of the prior.

:func:`sweep` compares many priors on the rays and weights of one inversion
(:class:`rayloom.inversion.LinearisedProblem`) and returns a :class:`Tradeoff`.
"""

from rayloom.inversion.tradeoff.agreement import Agreement
from rayloom.inversion.tradeoff.bidiagonal import Bidiagonal, bidiagonalise
from rayloom.inversion.tradeoff.choice import (
    corner_damping,
    discrepancy_damping,
    evidence_damping,
    gcv_damping,
    plausible,
)
from rayloom.inversion.tradeoff.cross_validation import EventScores, cross_validate
from rayloom.inversion.tradeoff.curve import Accuracy, Curve, curvature, measure_curve
from rayloom.inversion.tradeoff.explanation import explain
from rayloom.inversion.tradeoff.marginal import MarginalSystem, TermElimination
from rayloom.inversion.tradeoff.recommendation import Recommendation, recommend
from rayloom.inversion.tradeoff.settings import TradeoffSettings
from rayloom.inversion.tradeoff.sweep import (
    CurveChoice,
    Tradeoff,
    TriedPrior,
    prior_settings,
    sweep,
)

__all__ = [
    "Accuracy",
    "Agreement",
    "Bidiagonal",
    "Curve",
    "CurveChoice",
    "EventScores",
    "MarginalSystem",
    "Recommendation",
    "TermElimination",
    "Tradeoff",
    "TradeoffSettings",
    "TriedPrior",
    "bidiagonalise",
    "corner_damping",
    "cross_validate",
    "curvature",
    "discrepancy_damping",
    "evidence_damping",
    "explain",
    "gcv_damping",
    "measure_curve",
    "plausible",
    "prior_settings",
    "recommend",
    "sweep",
]

"""The inversion: from residuals to a model, its terms and its history.

:func:`invert` is the call; :class:`InversionSettings` says what is believed
and when to stop; :class:`InversionResult` carries the model and everything that
was left unexplained. :func:`linearise` freezes the last rays and weights
of an inversion; trade-offs and appraisals start from there.
"""

from rayloom.inversion.adopting import adopt_model
from rayloom.inversion.assembly import block_prior, build_problem
from rayloom.inversion.elimination import GroupMeans
from rayloom.inversion.forward_map import ForwardMap, Prediction, Report
from rayloom.inversion.groups import ParameterGroup
from rayloom.inversion.inverting import invert
from rayloom.inversion.linearised import LinearisedProblem, linearise
from rayloom.inversion.outer import run_outer_loop
from rayloom.inversion.posterior import group_standard_deviation, posterior_variance
from rayloom.inversion.prior_strength import PriorStrength, choose_prior_strength
from rayloom.inversion.priors import (
    IndependentPrior,
    Prior,
    SpectralPrior,
    ZeroSumPrior,
    damping_smoothing_prior,
    matern_prior,
)
from rayloom.inversion.problem import Problem
from rayloom.inversion.result import Counts, InversionResult
from rayloom.inversion.robust import Huber, LeastSquares, StudentT, robust_fit
from rayloom.inversion.rows import DataRows, LeftOutGroup
from rayloom.inversion.settings import InversionSettings
from rayloom.inversion.state import (
    InversionState,
    Iteration,
    history_frame,
    load_state,
    save_state,
)
from rayloom.inversion.structure import StructureDemand
from rayloom.inversion.system import (
    Solution,
    WhitenedSystem,
    resolution_trace,
    resolved_parameters,
    solve,
)

__all__ = [
    "Counts",
    "DataRows",
    "ForwardMap",
    "GroupMeans",
    "Huber",
    "IndependentPrior",
    "InversionResult",
    "InversionSettings",
    "InversionState",
    "Iteration",
    "LeastSquares",
    "LeftOutGroup",
    "LinearisedProblem",
    "ParameterGroup",
    "Prediction",
    "Prior",
    "PriorStrength",
    "Problem",
    "Report",
    "Solution",
    "SpectralPrior",
    "StructureDemand",
    "StudentT",
    "WhitenedSystem",
    "ZeroSumPrior",
    "adopt_model",
    "block_prior",
    "build_problem",
    "choose_prior_strength",
    "damping_smoothing_prior",
    "group_standard_deviation",
    "history_frame",
    "invert",
    "linearise",
    "load_state",
    "matern_prior",
    "posterior_variance",
    "resolution_trace",
    "resolved_parameters",
    "robust_fit",
    "run_outer_loop",
    "save_state",
    "solve",
]

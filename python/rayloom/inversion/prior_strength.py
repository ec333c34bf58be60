"""How large the perturbations are: the prior's standard deviation, told by the data.

Main type: :class:`PriorStrength`. A prior that is too wide lets the model follow
the noise, one that is too narrow flattens what is there. The value in between at
which the data are most probable is found on the rays of the reference model,
before any model is traced.

References
----------
MacKay, D. J. C. (1992). Bayesian interpolation. Neural Computation 4, 415-447
(the evidence, and the fixed point ‖z‖² = γ at its maximum).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from rayloom.inversion.forward_map import Report
from rayloom.inversion.groups import block_matrix
from rayloom.inversion.problem import Problem, TracedModel
from rayloom.inversion.robust import LeastSquares, Rejecting
from rayloom.inversion.system import WhitenedSystem, solve

_SMALLEST_FACTOR = 0.05
_LARGEST_FACTOR = 8.0
_SETTLED = 0.04
"""Change of the logarithm of the factor at which the search ends."""
_MOST_TRIALS = 8
_LONGEST_STEP = 1.0
_TINY = 1e-12
_PROBES = 3
_TOLERANCE = 1e-4
_WEIGHTING_ROUNDS = 3
_SAME_ERRORS = 0.01
"""Change of the error scale below which two trials lie on one curve."""


@dataclass(frozen=True)
class PriorStrength:
    """The prior's standard deviation that makes the data most probable.

    Attributes
    ----------
    factor : float
        By which the standard deviation given was multiplied.
    resolved : float
        γ, number of block parameters that the data determine.
    error_scale : float
        Factor by which the data's errors seem to exceed their uncertainties, at
        least 1; it was allowed for in the search only.
    trials : int
        Strengths tried.
    at_limit : bool
        Whether the search ended at the smallest or the largest factor: data
        without structure, or uncertainties far too small.
    """

    factor: float
    resolved: float
    error_scale: float
    trials: int
    at_limit: bool


def with_chosen_prior(problem: Problem, report: Report | None = None) -> Problem:
    """Return the problem with the standard deviation that its data favour.

    Parameters
    ----------
    problem : Problem
        Its settings leave the choice to the data.
    report : callable, optional
        Told ("choosing the prior", trial, trials at most).
    """
    strength = choose_prior_strength(problem, report)
    start = problem.settings.starting_prior_std_percent
    settings = problem.settings.with_prior_std_percent(float(f"{start * strength.factor:.3g}"))
    return replace(
        problem,
        settings=settings,
        block_prior=problem.block_prior.times(settings.starting_prior_std_percent / start),
        prior_strength=strength,
    )


@dataclass(frozen=True)
class _Trial:
    """One strength tried.

    Attributes
    ----------
    log_factor : float
        Logarithm of the factor.
    log_ratio : float
        Logarithm of ‖z‖²/γ: zero at the maximum, positive where the prior is too
        narrow.
    resolved : float
        γ.
    error_scale : float
        Estimated from what the model leaves, at least 1.
    """

    log_factor: float
    log_ratio: float
    resolved: float
    error_scale: float


def choose_prior_strength(problem: Problem, report: Report | None = None) -> PriorStrength:
    """Find the standard deviation of the block prior that the data favour.

    At the maximum of the evidence the squared norm of the blocks' whitened
    unknowns equals γ, the number of them that the data determine. γ is estimated
    with random probes of a fixed seed; the priors of all other groups stay.

    Parameters
    ----------
    problem : Problem
        With a block prior of any strength.
    report : callable, optional
        Told ("choosing the prior", trial, trials at most).
    """
    start = _reference(problem)
    search = _Search(problem, start, problem.system(start, _robust_weights(problem, start)))
    search.settle_weights()
    trials: list[_Trial] = []
    log_factor = 0.0
    while True:
        if report is not None:
            report("choosing the prior", len(trials), _MOST_TRIALS)
        trials.append(search.attempt(log_factor))
        wanted = _next_log_factor(trials)
        following = _clip(wanted)
        if len(trials) == _MOST_TRIALS or abs(following - log_factor) < _SETTLED:
            break
        log_factor = following
    last = trials[-1]
    return PriorStrength(
        factor=float(np.exp(following)),
        resolved=last.resolved,
        error_scale=last.error_scale,
        trials=len(trials),
        at_limit=following != wanted,
    )


def _reference(problem: Problem) -> TracedModel:
    """Explain the data by the prior's mean along the rays of the reference, terms at zero."""
    white = np.zeros(problem.unknown_count)
    reference = problem.model.with_slowness(problem.model.reference)
    start = problem.explain(white, reference, problem.reference_rays, problem.active)
    paths = problem.reference_rays.path_lengths[problem.rows.ray]
    share_s = block_matrix(paths, problem.model.reference.ravel()) @ problem.prior_mean
    return replace(start, unexplained_s=start.unexplained_s - np.where(start.active, share_s, 0.0))


def _robust_weights(problem: Problem, start: TracedModel) -> NDArray[np.float64]:
    loss = problem.settings.loss(rejecting=False)
    return problem.fit(start.unexplained_s, start.active, loss).weights


class _Search:
    """Tries strengths one after the other; the error scale follows the fits.

    Parameters
    ----------
    problem : Problem
        The problem.
    start : TracedModel
        The reference model.
    system : WhitenedSystem
        Its columns under the first robust weights.
    """

    def __init__(self, problem: Problem, start: TracedModel, system: WhitenedSystem) -> None:
        self._problem = problem
        self._start = start
        self._system = system
        self._weights = system.means.root_weights * problem.rows.uncertainty_s
        self._weights *= self._weights
        self._error_scale = 1.0

    def settle_weights(self) -> None:
        """Tell outliers from structure with the prior as it was given.

        From here on a pick counts in full or, as a suspected outlier, not at all:
        γ of graded weights would not be that of Gaussian errors.
        """
        settings = self._problem.settings
        if settings.robust == "none":
            return
        loss = Rejecting(LeastSquares(), settings.outlier_std)
        for _ in range(_WEIGHTING_ROUNDS):
            left_s = self._left_s(self._scaled_system(0.0))
            self._weights = self._problem.fit(left_s, self._start.active, loss).weights

    def attempt(self, log_factor: float) -> _Trial:
        """Fit with one strength and compare ‖z‖² with γ."""
        system = self._scaled_system(log_factor)
        blocks = self._problem.block_prior.size
        white = self._solve(system, system.whiten_rows(self._start.unexplained_s))
        resolved, resolved_in_all = self._resolved(system)
        left = system.whiten_rows(self._start.unexplained_s - system.seconds(white))
        freedom = float(np.sum(self._weights > 0.0)) - system.means.count - resolved_in_all
        growth = np.sqrt(float(left @ left) / max(freedom, 1.0))
        self._error_scale = max(1.0, self._error_scale * float(growth))
        size = float(white[:blocks] @ white[:blocks])
        return _Trial(
            log_factor=log_factor,
            log_ratio=float(np.log(max(size, _TINY) / max(resolved, _TINY))),
            resolved=resolved,
            error_scale=self._error_scale,
        )

    def _left_s(self, system: WhitenedSystem) -> NDArray[np.float64]:
        target_s = self._start.unexplained_s
        return target_s - system.seconds(self._solve(system, system.whiten_rows(target_s)))

    def _scaled_system(self, log_factor: float) -> WhitenedSystem:
        blocks, *others = self._system.groups
        prior = self._problem.block_prior.times(float(np.exp(log_factor)))
        means = self._problem.means(self._weights / self._error_scale**2)
        groups = (replace(blocks, prior=prior), *others)
        return replace(self._system, groups=groups, means=means)

    def _solve(
        self, system: WhitenedSystem, right_hand_side: NDArray[np.float64]
    ) -> NDArray[np.float64]:
        limit = self._problem.settings.solver_max_iterations
        return solve(system, right_hand_side, tolerance=_TOLERANCE, max_iterations=limit).white

    def _resolved(self, system: WhitenedSystem) -> tuple[float, float]:
        """γ of the blocks and that of all groups, by random probes of the data."""
        random = np.random.default_rng(self._problem.settings.seed)
        takes_part = system.means.root_weights > 0.0
        blocks = self._problem.block_prior.size
        of_blocks = in_all = 0.0
        for _ in range(_PROBES):
            signs = random.choice([-1.0, 1.0], size=takes_part.size)
            probe = system.means.project(np.where(takes_part, signs, 0.0))
            answered = system.transposed_times(probe) * self._solve(system, probe)
            of_blocks += float(np.sum(answered[:blocks])) / _PROBES
            in_all += float(np.sum(answered)) / _PROBES
        return of_blocks, in_all


def _next_log_factor(trials: list[_Trial]) -> float:
    """Step half the logarithm of ‖z‖²/γ at first, then along the secant."""
    last = trials[-1]
    step = 0.5 * last.log_ratio
    if len(trials) > 1:
        before = trials[-2]
        fall = before.log_ratio - last.log_ratio
        run = last.log_factor - before.log_factor
        comparable = abs(last.error_scale / before.error_scale - 1.0) < _SAME_ERRORS
        if comparable and fall * run > 0.0:
            step = last.log_ratio * run / fall
    return last.log_factor + float(np.clip(step, -_LONGEST_STEP, _LONGEST_STEP))


def _clip(log_factor: float) -> float:
    return float(np.clip(log_factor, np.log(_SMALLEST_FACTOR), np.log(_LARGEST_FACTOR)))

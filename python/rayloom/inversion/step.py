"""One step of the outer loop: plan it on the linearised problem, take it on the real one."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from rayloom.inversion.forward_map import Report
from rayloom.inversion.problem import Problem, TracedModel
from rayloom.inversion.robust import RobustFit, RobustLoss
from rayloom.inversion.system import Solution, WhitenedSystem, solve

_SETTLED_WEIGHT_CHANGE = 1e-3
_EARLY_ROUND_LOOSENING = 10.0
_REPORT_EVERY = 20
_POOR_GAIN = 0.5
_GOOD_GAIN = 0.8
_SHORTEST_FIRST_TRY = 0.25


@dataclass(frozen=True)
class PlannedStep:
    """The minimum of the linearised objective.

    Attributes
    ----------
    white : (unknowns,) array
        Whitened unknowns of the total model there.
    loss : RobustLoss
        Loss of the residuals.
    scale : float
        Spread of residuals that its robust weights assume.
    objective_drop : float
        Share of the objective that the linearised problem promises to lose.
    model_change : float
        Norm of the step over the norm of the new model, in block values.
    solver_iterations : int
        Steps of the solver, all rounds of weighting together.
    solver_converged : bool
        Whether the last round reached the accuracy asked.
    """

    white: NDArray[np.float64]
    loss: RobustLoss
    scale: float
    objective_drop: float
    model_change: float
    solver_iterations: int
    solver_converged: bool


@dataclass(frozen=True)
class TakenStep:
    """A traced model that does not raise the objective.

    Attributes
    ----------
    traced : TracedModel
        The model and its rays.
    length : float
        Share of the planned step that was taken.
    gain : float
        Fall of the objective over the fall that the linearised problem promised
        for that share.
    """

    traced: TracedModel
    length: float
    gain: float


def plan_step(
    problem: Problem,
    current: TracedModel,
    system: WhitenedSystem,
    loss: RobustLoss,
    report: Report | None = None,
) -> PlannedStep:
    """Solve for the total model, weighting anew until the robust weights settle.

    The right-hand side is d − (T_k − T_reference) + A_k m_k, so that the
    penalty acts on the total model, not on the step.

    Parameters
    ----------
    problem : Problem
        The problem.
    current : TracedModel
        Where it is linearised.
    system : WhitenedSystem
        Its columns.
    loss : RobustLoss
        Loss of the residuals.
    report : callable, optional
        Told ("solving", step, 0).

    References
    ----------
    Shaw, P. R. & Orcutt, J. A. (1985). Waveform inversion of seismic refraction
    data and applications to young Pacific crust. Geophys. J. R. Astr. Soc. 82,
    375-414 (jumping and creeping).
    """
    target = current.unexplained_s + system.seconds(current.white)
    weights = problem.fit(current.unexplained_s, current.active, loss).weights
    solution, fit = _solve_in_rounds(
        problem,
        system,
        target,
        weights,
        current=current.white,
        active=current.active,
        loss=loss,
        report=report,
    )
    before = _objective(problem, current, current.active, loss, fit.scale)
    after = fit.misfit + float(solution.white @ solution.white)
    return PlannedStep(
        white=solution.white,
        loss=loss,
        scale=fit.scale,
        objective_drop=(before - after) / before if before > 0.0 else 0.0,
        model_change=_model_change(problem, current.white, solution.white),
        solver_iterations=solution.iterations,
        solver_converged=solution.converged,
    )


def _solve_in_rounds(
    problem: Problem,
    system: WhitenedSystem,
    target_s: NDArray[np.float64],
    weights: NDArray[np.float64],
    *,
    current: NDArray[np.float64],
    active: NDArray[np.bool_],
    loss: RobustLoss,
    report: Report | None,
) -> tuple[Solution, RobustFit]:
    """Solve and weight by turns, each round from the solution of the last one.

    All but the last round are solved loosely.
    """
    settings = problem.settings
    steps = 0
    start = current

    def tell(step: int) -> None:
        if report is not None and step % _REPORT_EVERY == 0:
            report("solving", steps + step, 0)

    left = 1 if settings.robust == "none" else settings.reweightings
    while True:
        left -= 1
        weighted = system.with_means(problem.means(weights))
        found = solve(
            weighted,
            weighted.whiten_rows(target_s),
            tolerance=settings.solver_tolerance * (_EARLY_ROUND_LOOSENING if left else 1.0),
            max_iterations=settings.solver_max_iterations,
            start=start,
            step=tell,
        )
        start = found.white
        steps += found.iterations
        fit = problem.fit(target_s - system.seconds(found.white), active, loss)
        if not left:
            return replace(found, iterations=steps), fit
        if float(np.mean(np.abs(fit.weights - weights))) < _SETTLED_WEIGHT_CHANGE:
            left = 1
        weights = fit.weights


def take_step(
    problem: Problem,
    current: TracedModel,
    planned: PlannedStep,
    *,
    length: float = 1.0,
    report: Report | None = None,
) -> TakenStep | None:
    """Trace the planned model, halving the step while it raises the objective.

    Parameters
    ----------
    problem, current, planned
        Where to step from, and where to.
    length : float, optional
        Share of the planned step to try first.
    report : callable, optional
        Told ("tracing", done, total).

    Returns
    -------
    TakenStep or None
        None if even the shortest step raises it.
    """
    for _ in range(problem.settings.max_halvings + 1):
        white = current.white + length * (planned.white - current.white)
        model = problem.model_of(white)
        if model is not None:
            trial = problem.trace(
                white, model, previous=current.rays, active=current.active, report=report
            )
            measure = (trial.active, planned.loss, planned.scale)
            before = _objective(problem, current, *measure)
            fall = before - _objective(problem, trial, *measure)
            if fall >= 0.0:
                promised = length * (2.0 - length) * planned.objective_drop * before
                gain = fall / promised if promised > 0.0 else 1.0
                return TakenStep(traced=trial, length=length, gain=gain)
        length *= 0.5
    return None


def next_length(last_length: float, last_gain: float) -> float:
    """Share of the next planned step to try first, after what the last one gained.

    Where rays move so much that the linearised problem promises far more than
    it keeps, full steps run from one set of rays to another and back; shorter
    ones settle between them.

    References
    ----------
    Conn, A. R., Gould, N. I. M. & Toint, P. L. (2000). Trust-region methods.
    SIAM (the rule for changing the radius).
    """
    if last_gain < _POOR_GAIN:
        return max(0.5 * last_length, _SHORTEST_FIRST_TRY)
    if last_gain > _GOOD_GAIN:
        return min(2.0 * last_length, 1.0)
    return last_length


def _objective(
    problem: Problem,
    traced: TracedModel,
    active: NDArray[np.bool_],
    loss: RobustLoss,
    scale: float,
) -> float:
    fit = problem.fit(traced.unexplained_s, active, loss, scale=scale)
    return fit.misfit + float(traced.white @ traced.white)


def _model_change(problem: Problem, old: NDArray[np.float64], new: NDArray[np.float64]) -> float:
    """Norm of the change over the norm of the new model, in block values."""
    blocks = problem.block_prior.size
    size = float(np.linalg.norm(problem.block_prior.colour(new[:blocks])))
    change = float(np.linalg.norm(problem.block_prior.colour(new[:blocks] - old[:blocks])))
    if change == 0.0:
        return 0.0
    return change / size if size > 0.0 else float("inf")

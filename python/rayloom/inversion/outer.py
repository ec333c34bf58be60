"""The outer loop: trace, weight, solve, step, trace again; and why it stops."""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from rayloom.errors import InputError
from rayloom.inversion.forward_map import Report
from rayloom.inversion.measure import Stage, measure
from rayloom.inversion.problem import Problem, TracedModel
from rayloom.inversion.rescaling import rescale
from rayloom.inversion.robust import RobustFit
from rayloom.inversion.state import InversionState, Iteration
from rayloom.inversion.step import PlannedStep, next_length, take_step

_NEARLY_SETTLED_DROP = 0.12
"""Share of the objective lost by a step at which suspected outliers are rejected."""
_MOST_RESCALINGS = 4
_SETTLED_PERCENT = 3.0


@dataclass(frozen=True)
class Outcome:
    """Where the loop ended.

    Attributes
    ----------
    traced : TracedModel
        The last accepted model.
    fit : RobustFit
        Its residuals and weights.
    state : InversionState
        Its resumable state with the whole history.
    stopped_because : str
        The reason, as a sentence.
    problem : Problem
        The problem with the uncertainties of the last model.
    """

    traced: TracedModel
    fit: RobustFit
    state: InversionState
    stopped_because: str
    problem: Problem


def run_outer_loop(
    problem: Problem,
    *,
    resume: InversionState | None = None,
    report: Report | None = None,
    checkpoint: Callable[[InversionState], None] | None = None,
) -> Outcome:
    """Iterate until the model settles.

    Parameters
    ----------
    problem : Problem
        The problem.
    resume : InversionState, optional
        State to go on from.
    report : callable, optional
        Told (stage, done, total).
    checkpoint : callable, optional
        Given the state after each accepted model.

    Raises
    ------
    InputError
        If the state to resume belongs to another problem.
    """
    started = time.perf_counter()
    given_s = problem.rows.uncertainty_s
    fingerprint = problem.fingerprint()
    if resume is not None and resume.uncertainty_factor is not None:
        problem = _with_uncertainties(problem, given_s * resume.uncertainty_factor)
    stage, state = _first_stage(problem, resume, report, started, fingerprint)
    if resume is None and checkpoint is not None:
        checkpoint(state)
    while True:
        started = time.perf_counter()
        reason = _reason_to_stop(problem, stage, state)
        if reason:
            break
        planned = stage.plan(problem, report)
        change, small = 0.0, _is_small(problem, planned.model_change, planned.objective_drop)
        if _time_to_reject(problem, stage, state, planned):
            stage = Stage.of(problem, stage.traced, rejecting=True)
            planned = stage.plan(problem, report)
        elif _time_to_rescale(problem, stage, state):
            problem, change = rescale(problem, stage)
            stage = Stage.of(problem, stage.traced, rejecting=stage.rejecting)
            planned = stage.plan(problem, report)
        elif small:
            reason = _nothing_to_gain(planned)
            break
        last = state.history[-1]
        length = next_length(last.step_length, last.step_gain) if last.iteration else 1.0
        taken = take_step(problem, stage.traced, planned, length=length, report=report)
        if taken is None:
            reason = "no step along the computed direction lowers the objective any more"
            break
        stage = Stage.of(problem, taken.traced, rejecting=stage.rejecting)
        row = measure(
            problem,
            stage,
            iteration=state.iteration + 1,
            planned=planned,
            taken=taken,
            seconds=time.perf_counter() - started,
            uncertainty_change=change,
        )
        state = state_of(stage, (*state.history, row), fingerprint, _factor(problem, given_s))
        if checkpoint is not None:
            checkpoint(state)
    return Outcome(
        traced=stage.traced,
        fit=stage.fit,
        state=state,
        stopped_because=reason,
        problem=problem,
    )


def _first_stage(
    problem: Problem,
    resume: InversionState | None,
    report: Report | None,
    started: float,
    fingerprint: str,
) -> tuple[Stage, InversionState]:
    if resume is not None and resume.fingerprint != fingerprint:
        raise InputError(
            "the checkpoint belongs to other data, blocks or priors; start afresh or restore "
            "the settings it was made with",
            where="resume",
        )
    white = problem.starting_unknowns() if resume is None else resume.white
    model = problem.model_of(white)
    if model is None:
        raise InputError(
            "the starting model differs from its reference by more than a factor of two",
            where="model",
        )
    active = problem.active if resume is None else problem.active & resume.active
    if not np.array_equal(model.slowness_s_per_km, model.reference):
        traced = problem.trace(
            white, model, previous=problem.reference_rays, active=active, report=report
        )
    else:
        traced = problem.explain(white, model, problem.reference_rays, active)
    rejecting = resume is not None and resume.rejecting
    stage = Stage.of(problem, traced, rejecting=rejecting)
    if resume is not None:
        return stage, resume
    row = measure(
        problem,
        stage,
        iteration=0,
        planned=None,
        taken=None,
        seconds=time.perf_counter() - started,
    )
    factor = _factor(problem, problem.rows.uncertainty_s)
    return stage, state_of(stage, (row,), fingerprint, factor)


def _with_uncertainties(problem: Problem, uncertainty_s: NDArray[np.float64]) -> Problem:
    return replace(problem, rows=replace(problem.rows, uncertainty_s=uncertainty_s))


def _factor(problem: Problem, given_s: NDArray[np.float64]) -> NDArray[np.float64] | None:
    """By how much the uncertainties given were multiplied; None if not asked for."""
    rescaled = bool(problem.settings.rescale_uncertainties)
    return problem.rows.uncertainty_s / given_s if rescaled else None


def state_of(
    stage: Stage,
    history: tuple[Iteration, ...],
    fingerprint: str,
    uncertainty_factor: NDArray[np.float64] | None = None,
) -> InversionState:
    """Keep what is needed to go on from a model.

    Parameters
    ----------
    stage : Stage
        The model.
    history : tuple of Iteration
        Rows up to it.
    fingerprint : str
        Of the problem.
    uncertainty_factor : (rows,) array, optional
        By which the uncertainties given were multiplied.
    """
    return InversionState(
        white=stage.traced.white,
        active=stage.traced.active,
        rejecting=stage.rejecting,
        history=history,
        fingerprint=fingerprint,
        uncertainty_factor=uncertainty_factor,
    )


def _time_to_reject(
    problem: Problem, stage: Stage, state: InversionState, planned: PlannedStep
) -> bool:
    """Outliers are told from structure only once the model has nearly settled."""
    if not problem.settings.rejects_outliers or stage.rejecting:
        return False
    settled = state.iteration > 1 and _last_drop(state) < _NEARLY_SETTLED_DROP
    return settled or planned.objective_drop < _NEARLY_SETTLED_DROP


def _time_to_rescale(problem: Problem, stage: Stage, state: InversionState) -> bool:
    """Rescale once outliers are out, until the uncertainties hardly change any more."""
    settings = problem.settings
    if not settings.rescale_uncertainties or state.iteration == 0:
        return False
    if settings.rejects_outliers and not stage.rejecting:
        return False
    changes = [row.uncertainty_change_percent for row in state.history]
    times = int(np.count_nonzero(changes))
    return times == 0 or (times < _MOST_RESCALINGS and changes[-1] > _SETTLED_PERCENT)


def _last_drop(state: InversionState) -> float:
    """Share of the objective that the last step took off."""
    before, last = state.history[-2:]
    return 1.0 - last.objective / before.objective if before.objective > 0.0 else 0.0


def _reason_to_stop(problem: Problem, stage: Stage, state: InversionState) -> str:
    """Return why the last step was the last one, or nothing."""
    limit = problem.settings.max_iterations
    if state.iteration >= limit:
        return f"the limit of {limit} iterations was reached"
    outliers_pending = problem.settings.rejects_outliers and not stage.rejecting
    rescaling_pending = _time_to_rescale(problem, stage, state)
    if state.iteration == 0 or outliers_pending or rescaling_pending:
        return ""
    last, drop = state.history[-1], _last_drop(state)
    if not _is_small(problem, last.model_change_percent / 100.0, drop):
        return ""
    return (
        f"converged: the last step changed the model by {last.model_change_percent:.1f} % "
        f"and lowered the objective by {100.0 * drop:.2f} %"
    )


def _nothing_to_gain(planned: PlannedStep) -> str:
    return (
        f"converged: another step would change the model by {100.0 * planned.model_change:.1f} % "
        f"and lower the objective by {100.0 * max(planned.objective_drop, 0.0):.2f} %"
    )


def _is_small(problem: Problem, model_change: float, objective_drop: float) -> bool:
    return (
        model_change < problem.settings.model_tolerance
        and objective_drop < problem.settings.misfit_tolerance
    )

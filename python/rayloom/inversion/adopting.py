"""A model found elsewhere, traced and judged as if it had been found here."""

from __future__ import annotations

import time
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray
from threadpoolctl import threadpool_limits  # type: ignore[import-untyped]

from rayloom.errors import InputError
from rayloom.inversion.assembly import build_problem
from rayloom.inversion.collect import collect_result
from rayloom.inversion.finishing import finish
from rayloom.inversion.forward_map import ForwardMap, Report
from rayloom.inversion.measure import Stage, measure
from rayloom.inversion.outer import Outcome, state_of
from rayloom.inversion.problem import Problem, TracedModel
from rayloom.inversion.result import InversionResult
from rayloom.inversion.settings import InversionSettings
from rayloom.inversion.state import Iteration
from rayloom.inversion.step import PlannedStep, TakenStep
from rayloom.inversion.system import WhitenedSystem, solve
from rayloom.model import SlownessModel

if TYPE_CHECKING:
    from rayloom.residuals import Residuals


def adopt_model(
    data: Residuals,
    model: SlownessModel,
    settings: InversionSettings | None = None,
    *,
    progress: Report | None = None,
    forward: ForwardMap | None = None,
) -> InversionResult:
    """Trace a model that another solver found and tell what it explains.

    The blocks stay as they are; station terms, shifts of events and the means of
    the groups are solved for beside them, with robust weights.

    Parameters
    ----------
    data : Residuals
        Residuals, late positive, s.
    model : SlownessModel
        Blocks, reference and the slowness to judge.
    settings : InversionSettings, optional
        Defaults if not given; ``prior_mean`` has no bearing.
    progress : callable, optional
        Told (stage, done, total).
    forward : ForwardMap, optional
        Another source of rays than :func:`rayloom.trace_distant`.

    Returns
    -------
    InversionResult
        Its history has two rows: the reference model and the one given.

    Raises
    ------
    InputError
        If no row can be used, a value is not finite, or the model differs from its
        reference by more than a factor of two.
    """
    settings = settings if settings is not None else InversionSettings()
    with threadpool_limits(limits=1):
        about_reference = settings.model_copy(update={"prior_mean": "reference"})
        problem = build_problem(data, model, about_reference, forward=forward, report=progress)
        outcome = _judge(problem, progress)
        return collect_result(data, outcome, finish(outcome, progress))


def _judge(problem: Problem, report: Report | None) -> Outcome:
    started = time.perf_counter()
    zero = np.zeros(problem.unknown_count)
    reference = problem.model.with_slowness(problem.model.reference)
    before = problem.explain(zero, reference, problem.reference_rays, problem.active)
    first = _row(problem, Stage.of(problem, before, rejecting=False), started)
    white = problem.starting_unknowns()
    if problem.model_of(white) is None:
        raise InputError(
            "the model differs from its reference by more than a factor of two", where="model"
        )
    traced = problem.trace(
        white,
        problem.model,
        previous=problem.reference_rays,
        active=problem.active,
        report=report,
    )
    traced = _with_terms(problem, traced)
    stage = Stage.of(problem, traced, rejecting=problem.settings.rejects_outliers)
    rows = (first, _row(problem, stage, started, adopted=True))
    return Outcome(
        traced=traced,
        fit=stage.fit,
        state=state_of(stage, rows, problem.fingerprint()),
        stopped_because="the model was found elsewhere; its terms were solved for here",
        problem=problem,
    )


def _with_terms(problem: Problem, traced: TracedModel) -> TracedModel:
    """Solve for the linear groups, the blocks as they are."""
    groups, settings = problem.linear_groups, problem.settings
    if not groups:
        return traced
    target_s = traced.unexplained_s
    loss = settings.loss(rejecting=settings.rejects_outliers)
    left_s, terms = target_s, np.zeros(0)
    for _ in range(settings.reweightings):
        weights = problem.fit(left_s, traced.active, loss).weights
        system = WhitenedSystem.of_groups(groups, problem.means(weights), threads=settings.threads)
        terms = solve(
            system,
            system.whiten_rows(target_s),
            tolerance=settings.solver_tolerance,
            max_iterations=settings.solver_max_iterations,
        ).white
        left_s = target_s - system.seconds(terms)
    white: NDArray[np.float64] = np.append(traced.white[: problem.block_prior.size], terms)
    return problem.explain(white, traced.model, traced.rays, traced.active, traced.seconds)


def _row(problem: Problem, stage: Stage, started: float, *, adopted: bool = False) -> Iteration:
    planned = PlannedStep(
        white=stage.traced.white,
        loss=problem.settings.loss(rejecting=stage.rejecting),
        scale=stage.fit.scale,
        objective_drop=0.0,
        model_change=1.0,
        solver_iterations=0,
        solver_converged=True,
    )
    return measure(
        problem,
        stage,
        iteration=int(adopted),
        planned=planned if adopted else None,
        taken=TakenStep(traced=stage.traced, length=1.0, gain=1.0) if adopted else None,
        seconds=time.perf_counter() - started,
    )

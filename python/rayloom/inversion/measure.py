"""Measures of a traced model that fill a row of the history."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rayloom.inversion.expectation import ExpectedMisfit, expected_misfit
from rayloom.inversion.forward_map import Report
from rayloom.inversion.problem import Problem, TracedModel
from rayloom.inversion.robust import RobustFit
from rayloom.inversion.state import Iteration
from rayloom.inversion.step import PlannedStep, TakenStep, plan_step
from rayloom.inversion.system import WhitenedSystem, resolved_parameters

_PROBE_TOLERANCE = 1e-4


@dataclass(frozen=True)
class Stage:
    """A traced model with its residuals and the linear system about it.

    Attributes
    ----------
    traced : TracedModel
        The model and its rays.
    rejecting : bool
        Whether suspected outliers have lost all weight.
    fit : RobustFit
        Residuals and robust weights.
    system : WhitenedSystem
        The problem linearised, under those weights.
    """

    traced: TracedModel
    rejecting: bool
    fit: RobustFit
    system: WhitenedSystem

    @classmethod
    def of(cls, problem: Problem, traced: TracedModel, *, rejecting: bool) -> Stage:
        """Weight the residuals and linearise."""
        loss = problem.settings.loss(rejecting=rejecting)
        fit = problem.fit(traced.unexplained_s, traced.active, loss)
        system = problem.system(traced, fit.weights)
        return cls(traced=traced, rejecting=rejecting, fit=fit, system=system)

    def plan(self, problem: Problem, report: Report | None) -> PlannedStep:
        """Plan the next step from here."""
        loss = problem.settings.loss(rejecting=self.rejecting)
        return plan_step(problem, self.traced, self.system, loss, report)


def suspected_outliers(fit: RobustFit, *, outlier_std: float) -> NDArray[np.bool_]:
    """Rows beyond ``outlier_std`` standard deviations, (rows,).

    The standard deviation is the row's uncertainty times the spread of all
    standardised residuals where that exceeds one: uncertainties that are
    too small do not make everything an outlier.
    """
    return np.abs(np.nan_to_num(fit.standardised)) > outlier_std * fit.scale


def measure(
    problem: Problem,
    stage: Stage,
    *,
    iteration: int,
    planned: PlannedStep | None,
    taken: TakenStep | None,
    seconds: float,
    uncertainty_change: float = 0.0,
) -> Iteration:
    """Fill the row of the history that describes a traced model.

    Parameters
    ----------
    problem : Problem
        The problem.
    stage : Stage
        The traced model.
    iteration : int
        Its number; 0 is the starting model.
    planned, taken : PlannedStep and TakenStep, or None
        How it was reached; None for the starting model.
    seconds : float
        Time the iteration took before these measures, s.
    uncertainty_change : float, optional
        Largest change of the logarithm of an uncertainty before it.
    """
    traced, fit, settings = stage.traced, stage.fit, problem.settings
    suspected = suspected_outliers(fit, outlier_std=settings.outlier_std)
    kept = traced.active & ~suspected
    precision = fit.weights / problem.rows.uncertainty_s**2
    chi2 = _squared(stage.system.whiten_rows(traced.unexplained_s))
    chi2_reference = _squared(stage.system.whiten_rows(problem.rows.residual_s))
    prior_misfit = _squared(traced.white)
    resolved = _resolved(problem, stage) if planned is not None else None
    expected = _expected(problem, stage, kept, resolved)
    return Iteration(
        iteration=iteration,
        rms_s=_rms(fit.centred_s[traced.active]),
        rms_weighted_s=float(np.sqrt(_ratio(chi2, float(np.sum(precision))))),
        rms_kept_s=_rms(fit.centred_s[kept]),
        rms_kept_expected_s=expected.rms_kept_s,
        chi2=chi2,
        chi2_expected=expected.chi2,
        chi2_kept=_squared(fit.standardised[kept]),
        chi2_kept_expected=expected.chi2_kept,
        resolved=float(np.sum(resolved)) if resolved is not None else float("nan"),
        resolved_blocks=float(resolved[0]) if resolved is not None else float("nan"),
        prior_misfit=prior_misfit,
        objective=fit.misfit + prior_misfit,
        variance_reduction_percent=100.0 * (1.0 - _ratio(chi2, chi2_reference)),
        model_rms_percent=_model_rms_percent(traced),
        model_change_percent=(
            100.0 * planned.model_change * taken.length if planned and taken else 0.0
        ),
        basin_jumps=int(traced.rays.basin_jumps),
        data_count=int(np.sum(traced.active)),
        group_count=stage.system.means.count,
        downweighted=int(np.sum(traced.active & (fit.weights < 1.0))),
        suspected_outliers=int(np.sum(suspected)),
        uncertainty_change_percent=100.0 * float(np.expm1(uncertainty_change)),
        residual_scale=fit.scale,
        step_length=taken.length if taken else 0.0,
        step_gain=taken.gain if taken else 0.0,
        solver_iterations=planned.solver_iterations if planned else 0,
        solver_converged=planned.solver_converged if planned else True,
        seconds=seconds,
        seconds_tracing=traced.seconds,
    )


def _resolved(problem: Problem, stage: Stage) -> NDArray[np.float64] | None:
    """Parameters of each group that the data resolve, by a few probes to about 1 %."""
    settings = problem.settings
    if settings.trace_probes == 0:
        return None
    return resolved_parameters(
        stage.system,
        probes=settings.trace_probes,
        seed=settings.seed,
        tolerance=max(_PROBE_TOLERANCE, settings.solver_tolerance),
        max_iterations=settings.solver_max_iterations,
    )


def _expected(
    problem: Problem,
    stage: Stage,
    kept: NDArray[np.bool_],
    resolved: NDArray[np.float64] | None,
) -> ExpectedMisfit:
    if resolved is None:
        return ExpectedMisfit(float("nan"), float("nan"), float("nan"))
    return expected_misfit(
        problem.settings.loss(rejecting=stage.rejecting),
        scale=stage.fit.scale,
        outlier_std=problem.settings.outlier_std,
        weighted=stage.fit.weights > 0.0,
        kept=kept,
        uncertainty_s=problem.rows.uncertainty_s,
        lost=stage.system.means.count + float(np.sum(resolved)),
    )


def _model_rms_percent(traced: TracedModel) -> float:
    crossed = np.zeros(traced.model.grid.block_count, dtype=bool)
    crossed[traced.rays.path_lengths.indices] = True
    volumes = np.where(crossed, traced.model.grid.volumes_km3.ravel(), 0.0)
    squares = traced.model.perturbation_percent.ravel() ** 2
    return float(np.sqrt(_ratio(float(volumes @ squares), float(np.sum(volumes)))))


def _squared(values: NDArray[np.float64]) -> float:
    return float(np.sum(values**2))


def _rms(values: NDArray[np.float64]) -> float:
    return float(np.sqrt(np.mean(values**2))) if values.size else 0.0


def _ratio(part: float, whole: float) -> float:
    return part / whole if whole > 0.0 else 0.0

"""The trade-off: many priors on the rays and weights of one inversion.

Main function: :func:`sweep`. No ray is traced, and one bidiagonalisation per pair of
correlation lengths serves all standard deviations.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import asdict, dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray
from threadpoolctl import threadpool_limits  # type: ignore[import-untyped]

from rayloom.inversion.assembly import block_prior
from rayloom.inversion.forward_map import Report
from rayloom.inversion.linearised import LinearisedProblem
from rayloom.inversion.priors import Prior
from rayloom.inversion.settings import InversionSettings
from rayloom.inversion.tradeoff.agreement import Agreement
from rayloom.inversion.tradeoff.bidiagonal import Bidiagonal
from rayloom.inversion.tradeoff.choice import (
    corner_damping,
    discrepancy_damping,
    evidence_damping,
    gcv_damping,
    plausible,
)
from rayloom.inversion.tradeoff.cross_validation import EventScores, cross_validate
from rayloom.inversion.tradeoff.curve import Accuracy, Curve, measure_curve
from rayloom.inversion.tradeoff.marginal import MarginalSystem
from rayloom.inversion.tradeoff.recommendation import Recommendation, recommend
from rayloom.inversion.tradeoff.settings import TradeoffSettings
from rayloom.model import SlownessModel

if TYPE_CHECKING:
    import pandas as pd

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class TriedPrior:
    """One row of the table.

    Attributes
    ----------
    prior_std_percent : float
        Standard deviation of the perturbations, percent.
    correlation_horizontal_km, correlation_vertical_km : float
        Correlation lengths, km.
    chi2, chi2_expected : float
        Weighted squared residuals, and (N − N_g) − tr H.
    block_misfit_norm : float
        Norm of the misfit once terms of stations and events have taken their share:
        the ordinate of the L-curve.
    block_norm : float
        Norm of the blocks' whitened unknowns for a standard deviation of 1 %: its abscissa.
    prior_misfit : float
        Squared norm of all whitened unknowns.
    objective_per_datum : float
        Misfit and prior together over their expectation N − N_g.
    resolved_parameters : float
        tr H.
    model_rms_percent : float
        Root mean square perturbation over the blocks crossed by rays, by volume.
    gcv : float
        n‖r̃‖²/(n − tr H)².
    log_evidence : float
        See :class:`Curve`; differences count.
    curvature : float
        Of the L-curve.
    cross_validation, cross_validation_error : float
        Mean squared standardised residual of unseen events, and its standard error;
        NaN if left out.
    equally_good, recommended : bool
        What the recommendation says.
    """

    prior_std_percent: float
    correlation_horizontal_km: float
    correlation_vertical_km: float
    chi2: float
    chi2_expected: float
    block_misfit_norm: float
    block_norm: float
    prior_misfit: float
    objective_per_datum: float
    resolved_parameters: float
    model_rms_percent: float
    gcv: float
    log_evidence: float
    curvature: float
    cross_validation: float
    cross_validation_error: float
    equally_good: bool
    recommended: bool


@dataclass(frozen=True)
class CurveChoice:
    """What each rule would take for one pair of correlation lengths.

    Attributes
    ----------
    correlation_km : pair
        Horizontal and vertical, km.
    gcv, evidence, discrepancy, corner, cross_validation : float
        Standard deviations, percent; NaN where a rule has no answer.
    """

    correlation_km: tuple[float, float]
    gcv: float
    evidence: float
    discrepancy: float
    corner: float
    cross_validation: float


@dataclass(frozen=True)
class Tradeoff:
    """What a trade-off found.

    Attributes
    ----------
    rows : tuple of TriedPrior
        All priors: correlation lengths in the order given, standard deviations falling.
    choices : tuple of CurveChoice
        What each rule takes, per pair of lengths.
    model : SlownessModel
        Linear estimate under the prior recommended, on the rays of the inversion, with
        the fields ``sign_kept``, ``lowest_percent``, ``highest_percent``.
    agreement : Agreement
        What all equally good models have in common.
    validated : bool
        Whether events left out had a say.
    at_edge : bool
        Whether the prior recommended lies at an end of the standard deviations tried.
    noise_scale : float
        Factor by which errors seem to exceed the uncertainties under that prior.
    converged : bool
        Whether all solutions reached the accuracy asked.
    """

    rows: tuple[TriedPrior, ...]
    choices: tuple[CurveChoice, ...]
    model: SlownessModel
    agreement: Agreement
    validated: bool
    at_edge: bool
    noise_scale: float
    converged: bool

    @property
    def recommended(self) -> TriedPrior:
        """The row of the prior recommended."""
        return next(row for row in self.rows if row.recommended)

    @property
    def equally_good(self) -> tuple[TriedPrior, ...]:
        """The rows of all priors as good as that."""
        return tuple(row for row in self.rows if row.equally_good)

    @property
    def share_of_sign_kept(self) -> float:
        """Share of the volume crossed by rays whose sign all equally good models keep."""
        crossed = self.model.fields["hits"] > 0
        volumes = np.broadcast_to(self.model.grid.volumes_km3, crossed.shape)[crossed]
        kept = self.agreement.sign[crossed] != 0.0
        return float(volumes @ kept / volumes.sum())

    def frame(self) -> pd.DataFrame:
        """Return the table, one column per field of :class:`TriedPrior`."""
        import pandas as pd

        return pd.DataFrame([asdict(row) for row in self.rows])


def sweep(
    problem: LinearisedProblem,
    inversion: InversionSettings,
    settings: TradeoffSettings | None = None,
    *,
    progress: Report | None = None,
) -> Tradeoff:
    """Compare priors on the rays and robust weights of a finished inversion.

    Priors of station terms and event shifts stay as they are: only what is believed
    of the blocks changes.

    Parameters
    ----------
    problem : LinearisedProblem
        See :func:`linearise`.
    inversion : InversionSettings
        The settings of the inversion.
    settings : TradeoffSettings, optional
        What to try; defaults if not given.
    progress : callable, optional
        Told ("trade-off", done, total).
    """
    settings = settings if settings is not None else TradeoffSettings()
    with threadpool_limits(limits=1):
        return _Sweep(problem, inversion, settings, progress).run()


def prior_settings(
    inversion: InversionSettings, std_percent: float, lengths_km: tuple[float, float]
) -> InversionSettings:
    """Give the settings of the inversion another prior.

    A prior of damping and smoothing takes damping 100/std_percent and smoothing
    lengths times damping, which stand for the same size and reach.

    Parameters
    ----------
    inversion : InversionSettings
        Settings to change.
    std_percent : float
        Standard deviation, percent.
    lengths_km : pair
        Correlation lengths, horizontal and vertical, km.
    """
    if inversion.prior == "damping":
        damping = 100.0 / std_percent
        smoothing = (damping * lengths_km[0], damping * lengths_km[1])
        return inversion.model_copy(update={"damping": damping, "smoothing_km": smoothing})
    return inversion.model_copy(
        update={"prior_std_percent": std_percent, "correlation_km": lengths_km}
    )


class _Sweep:
    def __init__(
        self,
        problem: LinearisedProblem,
        inversion: InversionSettings,
        settings: TradeoffSettings,
        progress: Report | None,
    ) -> None:
        self._problem = problem
        self._settings = settings
        self._lengths = settings.lengths_km(_base_lengths_km(inversion))
        grid = problem.model.grid
        self._priors = [
            block_prior(grid, prior_settings(inversion, 1.0, pair)) for pair in self._lengths
        ]
        self._std_percent = np.sort(np.unique(settings.prior_std_percent))[::-1]
        self._damping = 1.0 / self._std_percent
        self._accuracy = Accuracy(probes=settings.probes, seed=settings.seed)
        self._system = MarginalSystem.of_system(problem.system, threads=inversion.threads)
        self._progress = progress
        self._done = 0
        self._total = len(self._priors) * (1 + settings.probes + settings.folds)
        self._crossed = np.zeros(grid.block_count, dtype=bool)
        self._crossed[problem.system.groups[0].matrix.indices] = True

    def run(self) -> Tradeoff:
        measured = [self._measure(prior) for prior in self._priors]
        scores = None
        if self._settings.folds >= 2:
            scores = cross_validate(
                self._problem,
                self._system,
                self._priors,
                self._damping,
                folds=self._settings.folds,
                accuracy=self._accuracy,
                step=self._step,
            )
        return self._gather([c for c, _ in measured], [m for _, m in measured], scores)

    def _measure(self, prior: Prior) -> tuple[Curve, list[Floats]]:
        """Measure one prior at every strength; the large basis does not outlive the call."""
        system = self._system.with_prior(prior)
        curve, found = measure_curve(
            system,
            self._problem.target_s,
            self._damping,
            free_count=self._problem.free_count,
            accuracy=self._accuracy,
            step=self._step,
        )
        return curve, self._models(system, found)

    def _gather(
        self, curves: list[Curve], models: list[list[Floats]], scores: EventScores | None
    ) -> Tradeoff:
        chosen = recommend(curves, scores)
        rows: list[TriedPrior] = []
        alike: list[Floats] = []
        best = np.zeros(self._problem.model.grid.shape)
        for index, curve in enumerate(curves):
            for column, percent in enumerate(models[index]):
                row = self._row(index, column, curve, percent, scores, chosen)
                rows.append(row)
                if row.equally_good:
                    alike.append(percent)
                if row.recommended:
                    best = percent
        agreement = Agreement.of_models(alike)
        return Tradeoff(
            rows=tuple(rows),
            choices=tuple(self._choices(curves, scores)),
            model=self._model(best, agreement),
            agreement=agreement,
            validated=chosen.validated,
            at_edge=chosen.at_edge,
            noise_scale=float(curves[chosen.curve].noise_scale[chosen.damping]),
            converged=all(curve.converged for curve in curves),
        )

    def _models(self, system: MarginalSystem, found: Bidiagonal) -> list[Floats]:
        """Velocity perturbations of every strength, percent."""
        models = []
        for damping in self._damping.tolist():
            final = system.final_residual(found.residual(damping))
            white = system.unknowns(final, damping=damping)
            fractional = self._problem.prior_mean + system.blocks.parameters(white)[0]
            percent = 100.0 * (1.0 / (1.0 + fractional) - 1.0)
            models.append(percent.reshape(self._problem.model.grid.shape))
        return models

    def _row(
        self,
        index: int,
        column: int,
        curve: Curve,
        percent: Floats,
        scores: EventScores | None,
        chosen: Recommendation,
    ) -> TriedPrior:
        horizontal_km, vertical_km = self._lengths[index]
        validated = (np.nan, np.nan)
        if scores is not None:
            validated = (scores.score[index, column], scores.standard_error[index, column])
        return TriedPrior(
            prior_std_percent=float(self._std_percent[column]),
            correlation_horizontal_km=horizontal_km,
            correlation_vertical_km=vertical_km,
            chi2=float(curve.chi2[column]),
            chi2_expected=float(curve.chi2_expected[column]),
            block_misfit_norm=float(curve.marginal_norm[column]),
            block_norm=float(curve.solution_norm[column]),
            prior_misfit=float(curve.objective[column] - curve.chi2[column]),
            objective_per_datum=float(curve.objective[column] / curve.free_count),
            resolved_parameters=float(curve.resolved[column]),
            model_rms_percent=self._rms(percent),
            gcv=float(curve.gcv[column]),
            log_evidence=float(curve.log_evidence[column]),
            curvature=float(curve.curvature[column]),
            cross_validation=float(validated[0]),
            cross_validation_error=float(validated[1]),
            equally_good=bool(chosen.equally_good[index, column]),
            recommended=(index, column) == (chosen.curve, chosen.damping),
        )

    def _choices(self, curves: list[Curve], scores: EventScores | None) -> Iterator[CurveChoice]:
        for index, curve in enumerate(curves):
            bracket = plausible(curve.resolved, curve.free_count)
            validated = np.nan
            if scores is not None:
                validated = float(self._std_percent[int(np.argmin(scores.score[index]))])
            yield CurveChoice(
                correlation_km=self._lengths[index],
                gcv=1.0 / gcv_damping(curve),
                evidence=1.0 / evidence_damping(curve),
                discrepancy=_inverse(discrepancy_damping(curve)),
                corner=_inverse(corner_damping(curve.damping, curve.curvature, bracket)),
                cross_validation=validated,
            )

    def _model(self, percent: Floats, agreement: Agreement) -> SlownessModel:
        model = self._problem.model
        hits = np.bincount(
            self._problem.system.groups[0].matrix.indices, minlength=self._crossed.size
        ).astype(np.float64)
        return model.with_slowness(model.reference / (1.0 + percent / 100.0)).with_fields(
            hits=hits.reshape(model.grid.shape),
            sign_kept=agreement.sign,
            lowest_percent=agreement.lowest_percent,
            highest_percent=agreement.highest_percent,
        )

    def _rms(self, percent: Floats) -> float:
        volumes = np.where(self._crossed, self._problem.model.grid.volumes_km3.ravel(), 0.0)
        return float(np.sqrt(volumes @ percent.ravel() ** 2 / max(volumes.sum(), 1e-300)))

    def _step(self) -> None:
        self._done += 1
        if self._progress is not None:
            self._progress("trade-off", self._done, self._total)


def _base_lengths_km(inversion: InversionSettings) -> tuple[float, float]:
    """Correlation lengths of the inversion, or what stands for them."""
    if inversion.prior == "damping":
        horizontal, vertical = (length / inversion.damping for length in inversion.smoothing_km)
        return (max(horizontal, 1.0), max(vertical, 1.0))
    return inversion.correlation_km


def _inverse(damping: float | None) -> float:
    return float("nan") if damping is None else 1.0 / damping

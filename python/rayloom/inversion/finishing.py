"""What is worked out once, about the last model: errors of terms, and the test for structure."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rayloom.inversion.forward_map import Report
from rayloom.inversion.measure import suspected_outliers
from rayloom.inversion.outer import Outcome
from rayloom.inversion.posterior import group_standard_deviation
from rayloom.inversion.structure import StructureDemand, structure_demand


@dataclass(frozen=True)
class Finish:
    """Findings about the last model.

    Attributes
    ----------
    station_term_std : (terms,) array or None
        Posterior standard deviation of each station term, s.
    structure : StructureDemand or None
        Whether the data demand structure.
    """

    station_term_std: NDArray[np.float64] | None
    structure: StructureDemand | None


def finish(outcome: Outcome, report: Report | None) -> Finish:
    """Work out what belongs to the last model alone.

    Parameters
    ----------
    outcome : Outcome
        Where its loop ended.
    report : callable, optional
        Told ("errors of station terms", terms done, terms).
    """
    problem, traced, fit = outcome.problem, outcome.traced, outcome.fit
    suspected = suspected_outliers(fit, outlier_std=problem.settings.outlier_std)
    system = problem.system(traced, fit.weights)
    names = [group.name for group in problem.linear_groups]
    deviation = None
    if problem.settings.station_term_errors and "station_terms" in names:
        deviation = group_standard_deviation(
            system,
            "station_terms",
            progress=lambda done, total: _tell(report, done, total),
        )
    return Finish(
        station_term_std=deviation,
        structure=structure_demand(problem, traced, system, traced.active & ~suspected),
    )


def _tell(report: Report | None, done: int, total: int) -> None:
    if report is not None:
        report("errors of station terms", done, total)

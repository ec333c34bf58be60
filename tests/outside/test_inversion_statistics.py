"""Errors and misfits of whole inversions against linear Gaussian theory (textbook).

Truths are drawn from the prior, the forward map is linear, the noise Gaussian:
then posterior errors and the expectations of misfit and penalty are exact.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pytest
from numpy.typing import NDArray

from inversion_cases import plain_settings, small_case
from rayloom.inversion import (
    InversionResult,
    LinearisedProblem,
    group_standard_deviation,
    invert,
    linearise,
    posterior_variance,
)

Floats = NDArray[np.float64]

STATIONS = 18
TRUTHS = 40
SETTINGS = plain_settings(
    station_terms=True,
    station_term_std_s=0.1 * np.sqrt((STATIONS - 1) / STATIONS),
    max_iterations=1,
)
"""The truth's terms are Gaussian with 0.1 s less their mean."""


@dataclass(frozen=True)
class Run:
    """An inversion, its linear system and its truth."""

    result: InversionResult
    problem: LinearisedProblem
    perturbation: Floats
    station_terms_s: Floats

    @property
    def posterior_covariance(self) -> Floats:
        """(ÃᵀÃ + I)⁻¹, dense."""
        unknowns = self.problem.system.shape[1]
        whole = np.column_stack([self.problem.system.times(unit) for unit in np.eye(unknowns)])
        return np.asarray(np.linalg.inv(whole.T @ whole + np.eye(unknowns)))

    def standard_deviation(self, group: int, covariance: Floats) -> Floats:
        """Posterior standard deviation of a group's parameters, dense."""
        sizes = [one.size for one in self.problem.system.groups]
        mine = slice(sum(sizes[:group]), sum(sizes[: group + 1]))
        prior = self.problem.system.groups[group].prior
        colour = np.column_stack([prior.colour(unit) for unit in np.eye(prior.size)])
        return np.sqrt(np.diag(colour @ covariance[mine, mine] @ colour.T))


@pytest.fixture(scope="module")
def runs() -> list[Run]:
    found = []
    for seed in range(TRUTHS):
        case = small_case(seed=100 + seed, stations=STATIONS)
        result = invert(case.data, case.model, SETTINGS, forward=case.forward)
        problem = linearise(result, SETTINGS)
        found.append(Run(result, problem, case.perturbation, case.station_terms_s))
    return found


def test_truths_lie_within_the_posterior_errors(runs: list[Run]) -> None:
    """(truth − estimate)/posterior σ has standard deviation 1 over blocks and over terms."""
    blocks, terms = [], []
    for run in runs[:12]:
        covariance = run.posterior_covariance
        found = run.result.model.slowness_s_per_km / run.result.model.reference - 1.0
        deviation = run.standard_deviation(0, covariance)
        blocks.append((run.perturbation - found.ravel()) / deviation)
        terms_s = run.result.station_terms_s["P"]
        terms.append((run.station_terms_s - terms_s) / run.standard_deviation(1, covariance))
    assert 0.9 <= np.std(blocks) <= 1.1
    assert 0.85 <= np.std(terms) <= 1.15


def test_misfit_and_prior_together_have_their_expectation(runs: list[Run]) -> None:
    """E(misfit + prior) = N − N_g, within three standard errors of the mean of the repeats."""
    rows = [run.result.history[-1] for run in runs]
    total = np.array([row.chi2 + row.prior_misfit for row in rows])
    degrees = runs[0].problem.free_count
    assert degrees == 14 * STATIONS - 14
    assert abs(total.mean() - degrees) <= 3.0 * total.std(ddof=1) / np.sqrt(TRUTHS)
    assert total.std(ddof=1) == pytest.approx(np.sqrt(2.0 * degrees), rel=0.35)


def test_errors_by_conjugate_gradients_are_those_of_dense_algebra(runs: list[Run]) -> None:
    """The posterior errors offered to users against the inverse of the normal equations."""
    covariance = runs[0].posterior_covariance
    system = runs[0].problem.system
    for group, name in enumerate(("blocks", "station_terms")):
        expected = runs[0].standard_deviation(group, covariance)
        np.testing.assert_allclose(
            group_standard_deviation(system, name, tolerance=1e-10), expected, rtol=1e-6
        )
        coarse = group_standard_deviation(system, name)
        np.testing.assert_allclose(coarse, expected, rtol=0.02)
        assert np.all(coarse <= expected * (1.0 + 1e-6))
    anything = np.random.default_rng(1).standard_normal((system.shape[1], 5))
    np.testing.assert_allclose(
        posterior_variance(system, anything, tolerance=1e-10),
        np.diag(anything.T @ covariance @ anything),
        rtol=1e-6,
    )

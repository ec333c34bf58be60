"""Errors and misfits of whole inversions against linear Gaussian theory (textbook).

Truths are drawn from the prior, the forward map is linear, the noise Gaussian:
then posterior errors and the expectations of misfit and penalty are exact.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.stats import norm

from inversion_cases import SLOWNESS, Case, plain_settings, small_case
from rayloom.inversion import (
    Huber,
    InversionResult,
    InversionSettings,
    LeastSquares,
    LinearisedProblem,
    group_standard_deviation,
    invert,
    linearise,
    posterior_variance,
)
from rayloom.inversion.expectation import share_of_square
from rayloom.inversion.robust import Rejecting

Floats = NDArray[np.float64]

STATIONS = 18
TRUTHS = 40
REPEATS = 8
QUICK = {"station_term_errors": False, "model_tolerance": 0.1}
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


def without_structure(seed: int, *, share: float = 0.0) -> Case:
    """Return noise, station terms and origin times alone, and a share of the structure."""
    case = small_case(seed=seed, events=40)
    change = SLOWNESS * (case.forward.lengths @ case.perturbation)
    residual = case.data.residual_s - (1.0 - share) * change
    return replace(case, data=replace(case.data, residual_s=residual))


def test_pure_noise_gives_a_flat_model_and_the_run_says_so() -> None:
    """Blocks lie within their posterior errors of zero.

    An estimate of nothing has the variance C^½ R (I − R) C^½, R the resolution,
    no larger than the posterior's C^½ (I − R) C^½ (textbook).
    """
    scaled = []
    settings = InversionSettings.model_validate(QUICK)
    for seed in range(3):
        case = without_structure(seed)
        result = invert(case.data, case.model, settings, forward=case.forward)
        assert result.structure is not None
        assert not result.structure.demanded
        assert "do not demand any structure" in result.structure.sentence()
        system = linearise(result, settings).system
        found = result.model.slowness_s_per_km / result.model.reference - 1.0
        scaled.append(found.ravel() / group_standard_deviation(system, "blocks"))
    assert np.std(scaled) <= 1.0
    assert np.abs(scaled).max() <= 4.0


def test_a_fifth_of_the_structure_is_noticed() -> None:
    """The other side of the test: structure of 0.4 % is told from noise."""
    settings = InversionSettings.model_validate(QUICK)
    for seed in range(3):
        case = without_structure(seed, share=0.2)
        result = invert(case.data, case.model, settings, forward=case.forward)
        assert result.structure is not None
        assert result.structure.demanded
        assert "the data demand structure" in result.structure.sentence()


@pytest.mark.parametrize(("robust", "kept_bar"), [("huber", 0.05), ("student_t", 0.08)])
def test_weighted_misfit_has_its_expectation_for_gaussian_errors(
    robust: str, kept_bar: float
) -> None:
    """Robust weights lower χ², and its expectation by as much: 2Φ(k) − 1 for Huber.

    Compared within three standard errors of the mean of the runs, and 1 %. The
    expectation of the RMS without suspected outliers takes the fit for one of least
    squares and is low where the model takes half of the freedom, as here: by 3 % for
    Huber's weights and 5 % for Student's t, which weigh every row (measured).
    """
    settings = InversionSettings.model_validate(
        QUICK | {"robust": robust, "mislocation": False, "station_term_std_s": 0.1}
    )
    ratio, kept = [], []
    for seed in range(REPEATS):
        case = small_case(seed=500 + seed, events=30)
        last = invert(case.data, case.model, settings, forward=case.forward).history[-1]
        ratio.append(last.chi2 / last.chi2_expected)
        kept.append(last.rms_kept_s / last.rms_kept_expected_s)
    assert abs(np.mean(ratio) - 1.0) <= 3.0 * np.std(ratio) / np.sqrt(REPEATS) + 0.01
    assert np.mean(kept) == pytest.approx(1.0, abs=kept_bar)


def test_huber_weights_leave_the_textbook_share_of_a_square() -> None:
    """E[w u²] = 2Φ(k/τ) − 1 for u of standard deviation τ, over τ² (textbook integral)."""
    for spread in (0.7, 1.0):
        expected = 2.0 * norm.cdf(1.345 / spread) - 1.0
        assert share_of_square(Huber(1.345), spread) == pytest.approx(expected, abs=1e-6)
    inside = norm.cdf(4.0) - norm.cdf(-4.0)
    expected = 1.0 - 8.0 * norm.pdf(4.0) / inside
    assert share_of_square(Rejecting(LeastSquares(), 4.0), 1.0) == pytest.approx(
        expected, abs=1e-5
    )

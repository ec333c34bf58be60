"""Squeezing: objective, null distribution, depth extent, what is demanded outside."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.stats import kstest, multivariate_normal

from inversion_cases import plain_settings, small_case
from rayloom.appraisal.compressed import CompressedData, compress
from rayloom.appraisal.masking import MaskedPrior, masked_system
from rayloom.appraisal.squeezing import (
    blocks_beyond,
    scan_depths,
    squeeze,
    squeezed_first,
)
from rayloom.errors import InputError
from rayloom.inversion import LinearisedProblem, invert, linearise, solve

Floats = NDArray[np.float64]
CUT_KM = 120.0


@pytest.fixture(scope="module")
def problem() -> LinearisedProblem:
    case, settings = small_case(), plain_settings(station_terms=True)
    return linearise(invert(case.data, case.model, settings, forward=case.forward), settings)


@pytest.fixture(scope="module")
def compressed(problem: LinearisedProblem) -> CompressedData:
    return compress(problem, size=1000)


@pytest.fixture(scope="module")
def few(problem: LinearisedProblem) -> CompressedData:
    return compress(problem, size=110)


def dense(problem: LinearisedProblem, forbidden: NDArray[np.bool_] | None = None) -> Floats:
    """Matrix of the whitened system, column by column."""
    system = masked_system(problem, forbidden)
    return np.column_stack([system.times(unit) for unit in np.eye(system.shape[1])])


def least_objective(matrix: Floats, data: Floats) -> float:
    """Minimum of ‖Az − d‖² + ‖z‖² by the normal equations."""
    z = np.linalg.solve(matrix.T @ matrix + np.eye(matrix.shape[1]), matrix.T @ data)
    return float(np.sum((matrix @ z - data) ** 2) + z @ z)


def below(problem: LinearisedProblem, depth_km: float) -> NDArray[np.bool_]:
    grid = problem.model.grid
    return np.broadcast_to(blocks_beyond(grid, "below", depth_km), grid.shape)


def truths(
    problem: LinearisedProblem, compressed: CompressedData, count: int, factor: float
) -> list[CompressedData]:
    """Draw data from models with nothing below the cut, ``factor`` times the prior's size."""
    random = np.random.default_rng(5)
    prior = MaskedPrior(compressed.priors[0], ~below(problem, CUT_KM).ravel())
    drawn = []
    for _ in range(count):
        data = random.standard_normal(compressed.size)
        data += (
            factor * compressed.sensitivity[0].T @ prior.colour(random.standard_normal(prior.size))
        )
        for others, columns in zip(compressed.priors[1:], compressed.sensitivity[1:], strict=True):
            data += columns.T @ others.colour(random.standard_normal(others.size))
        drawn.append(dataclasses.replace(compressed, data=data))
    return drawn


def test_rise_equals_dense_linear_algebra(
    problem: LinearisedProblem, compressed: CompressedData
) -> None:
    """Φ of both inversions by the normal equations of the full matrix, block columns scaled."""
    forbidden = below(problem, CUT_KM)
    test = squeeze(compressed, forbidden)
    scale = np.ones(problem.system.shape[1])
    scale[: problem.model.grid.block_count] = test.prior_factor
    squeezed, free = (
        least_objective(matrix * scale, problem.right_hand_side)
        for matrix in (dense(problem, forbidden), dense(problem))
    )
    assert test.rise == pytest.approx(squeezed - free, rel=1e-6, abs=1e-6)


def test_factor_maximises_the_likelihood_of_the_squeezed_data(
    problem: LinearisedProblem, compressed: CompressedData
) -> None:
    """Log N(d; 0, I + K_s) by scipy's multivariate normal, on both sides of the factor."""
    forbidden = below(problem, CUT_KM)
    factor = squeeze(compressed, forbidden).prior_factor
    prior = MaskedPrior(compressed.priors[0], ~forbidden.ravel())
    blocks = compressed.covariance(prior) - compressed.covariance(
        MaskedPrior(compressed.priors[0], np.zeros(prior.size, dtype=bool))
    )
    others = compressed.covariance(prior) - blocks
    here, lower, higher = (
        multivariate_normal.logpdf(
            compressed.data, cov=np.eye(compressed.size) + others + (f * factor) ** 2 * blocks
        )
        for f in (1.0, 0.93, 1.07)
    )
    assert here > max(lower, higher)


def test_resolved_parameters_equal_the_trace_of_the_dense_resolution(
    problem: LinearisedProblem, compressed: CompressedData, few: CompressedData
) -> None:
    assert few.size == 110
    assert 0.0 < few.resolved < compressed.resolved
    matrix = dense(problem)
    values = np.linalg.eigvalsh(matrix @ matrix.T)
    assert compressed.resolved == pytest.approx(float(np.sum(values / (1.0 + values))), rel=1e-6)


def p_values_under_the_null(
    problem: LinearisedProblem, few: CompressedData, factor: float
) -> Floats:
    forbidden = below(problem, CUT_KM)
    tests = [
        squeeze(data, forbidden, simulations=200, seed=number)
        for number, data in enumerate(truths(problem, few, 200, factor))
    ]
    return np.array([test.p_value for test in tests])


def test_p_values_are_uniform_where_the_squeezed_model_holds(
    problem: LinearisedProblem, few: CompressedData
) -> None:
    """200 truths drawn from the squeezed prior: Kolmogorov-Smirnov p > 0.01."""
    assert kstest(p_values_under_the_null(problem, few, 1.0), "uniform").pvalue > 0.01


def test_a_prior_that_expects_too_little_raises_no_false_alarms(
    problem: LinearisedProblem, few: CompressedData
) -> None:
    """200 truths of three times the prior's size: 5 % below 0.05, two standard errors allowed."""
    false_alarms = np.sum(p_values_under_the_null(problem, few, 3.0) < 0.05)
    assert false_alarms <= 10 + 2.0 * np.sqrt(200 * 0.05 * 0.95)


def test_a_deeper_column_is_detected(
    problem: LinearisedProblem, compressed: CompressedData
) -> None:
    """A column that reaches 80 km below the cut: rejected in at least 80 % of 25 cases."""
    grid = problem.model.grid
    x, y, depth_km = grid.centres.T
    column = (np.hypot(x - 160.0, y - 160.0) < 60.0) & (depth_km < CUT_KM + 80.0)
    shifts = compressed.sensitivity[0].T @ np.where(column, 0.04, 0.0)
    random = np.random.default_rng(3)
    p_values = [
        squeeze(
            dataclasses.replace(compressed, data=shifts + random.standard_normal(compressed.size)),
            below(problem, CUT_KM),
            seed=number,
        ).p_value
        for number in range(25)
    ]
    assert np.mean(np.array(p_values) < 0.05) >= 0.8


def test_scan_brackets_the_depth_range_of_a_column(
    problem: LinearisedProblem, compressed: CompressedData
) -> None:
    grid = problem.model.grid
    x, y, depth_km = grid.centres.T
    near = np.hypot(x - 160.0, y - 160.0) < 60.0
    column = near & (depth_km > 80.0) & (depth_km < 200.0)
    random = np.random.default_rng(2)
    data = compressed.sensitivity[0].T @ np.where(column, 0.06, 0.0)
    data += random.standard_normal(compressed.size)
    case = dataclasses.replace(compressed, data=data)
    columns = np.asarray(near.reshape(grid.shape).any(axis=2))
    lower = scan_depths(case, grid, "below", columns=columns)
    upper = scan_depths(case, grid, "above", columns=columns)
    assert lower.depth_km.tolist() == grid.depth_edges_km[1:-1].tolist()
    assert 120.0 <= lower.demanded_km(0.05) <= 200.0
    assert 80.0 <= upper.demanded_km(0.05) <= 160.0
    assert upper.demanded_km(0.05) <= lower.demanded_km(0.05)


def test_noise_alone_demands_nothing(
    problem: LinearisedProblem, compressed: CompressedData
) -> None:
    random = np.random.default_rng(4)
    case = dataclasses.replace(compressed, data=random.standard_normal(compressed.size))
    scan = scan_depths(case, problem.model.grid, "below")
    assert np.isnan(scan.demanded_km(0.01))


def test_forbidden_blocks_stay_at_the_reference(problem: LinearisedProblem) -> None:
    forbidden = below(problem, CUT_KM)
    found = squeezed_first(problem, forbidden)
    assert np.all(found.squeezed_percent[forbidden] == 0.0)
    assert np.ptp(found.squeezed_percent[~forbidden]) > 0.1


def test_what_is_demanded_outside_is_the_free_inversion_of_the_rest(
    problem: LinearisedProblem,
) -> None:
    """Both inversions by the normal equations of the full matrices."""
    forbidden = below(problem, CUT_KM)
    data, blocks = problem.right_hand_side, problem.model.grid.block_count
    total = np.zeros(blocks)
    for mask in (forbidden, None):
        matrix = dense(problem, mask)
        z = np.linalg.solve(matrix.T @ matrix + np.eye(matrix.shape[1]), matrix.T @ data)
        total += masked_system(problem, mask).parameters(z)[0]
        data = data - matrix @ z
    found = squeezed_first(problem, forbidden)
    expected = 100.0 * (1.0 / (1.0 + total) - 1.0)
    together = (found.squeezed_percent + found.demanded_percent).ravel()
    np.testing.assert_allclose(together, expected, atol=2e-3 * np.abs(expected).max())


def test_masked_prior_is_its_own_adjoint(problem: LinearisedProblem) -> None:
    random = np.random.default_rng(6)
    prior = MaskedPrior(problem.system.groups[0].prior, ~below(problem, CUT_KM).ravel())
    z, x = random.standard_normal((2, prior.size))
    assert x @ prior.colour(z) == pytest.approx(prior.colour_adjoint(x) @ z, rel=1e-12)


def test_a_group_can_be_left_out(problem: LinearisedProblem) -> None:
    system = masked_system(problem, without=("station_terms",))
    assert [group.name for group in system.groups] == ["blocks"]
    found = solve(system, problem.right_hand_side, tolerance=1e-6, max_iterations=500)
    assert found.white.size == problem.model.grid.block_count


def test_nothing_forbidden_and_too_few_simulations_are_refused(
    problem: LinearisedProblem, compressed: CompressedData
) -> None:
    nothing = np.zeros(problem.model.grid.shape, dtype=bool)
    with pytest.raises(InputError, match="nothing to test"):
        squeeze(compressed, nothing)
    with pytest.raises(InputError, match="at least 100"):
        squeeze(compressed, ~nothing, simulations=20)
    with pytest.raises(InputError, match="below 500"):
        scan_depths(compressed, problem.model.grid, "below", np.array([500.0]))

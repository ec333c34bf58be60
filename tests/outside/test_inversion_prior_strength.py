"""The prior strength chosen from the data, against the evidence by dense algebra.

The evidence of a linear Gaussian problem is the Gaussian density of the whitened
data with covariance I + f² Ã_b Ã_bᵀ + Ã_t Ã_tᵀ (any textbook; MacKay 1992,
Neural Computation 4, 415-447).
"""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest
from scipy.optimize import minimize_scalar

from inversion_cases import Case, small_case, with_gross_errors
from rayloom.inversion import InversionSettings, Problem, build_problem
from rayloom.inversion.prior_strength import choose_prior_strength


def problem_of(case: Case, **changes: object) -> Problem:
    chosen: dict[str, object] = {"robust": "none", "prior_std_percent": 1.0, **changes}
    return build_problem(
        case.data,
        case.model,
        InversionSettings(**chosen),  # type: ignore[arg-type]
        forward=case.forward,
    )


def dense_columns(problem: Problem) -> tuple[np.ndarray, np.ndarray]:
    """Ã of blocks and of all other groups, means projected off."""
    start = problem.explain(
        np.zeros(problem.unknown_count),
        problem.model.with_slowness(problem.model.reference),
        problem.reference_rays,
        problem.active,
    )
    system = problem.system(start, np.ones(problem.rows.count))
    columns = np.column_stack([system.times(unit) for unit in np.eye(problem.unknown_count)])
    blocks = problem.block_prior.size
    return columns[:, :blocks], columns[:, blocks:]


def drawn(problem: Problem, factor: float, seed: int) -> Problem:
    """Replace the data by a draw from the prior ``factor`` times as wide, with noise."""
    blocks, others = dense_columns(problem)
    random = np.random.default_rng(seed)
    white = factor * blocks @ random.normal(size=blocks.shape[1])
    white += others @ random.normal(size=others.shape[1]) + random.normal(size=len(blocks))
    rows = problem.rows
    moved = dataclasses.replace(rows, residual_s=white * rows.uncertainty_s)
    return dataclasses.replace(problem, rows=moved)


def dense_maximum(problem: Problem) -> float:
    blocks, others = dense_columns(problem)
    data = problem.means(np.ones(problem.rows.count)).project(
        problem.rows.residual_s / problem.rows.uncertainty_s
    )
    fixed = np.eye(len(data)) + others @ others.T
    free = blocks @ blocks.T

    def cost(log_factor: float) -> float:
        covariance = fixed + np.exp(2.0 * log_factor) * free
        _, log_determinant = np.linalg.slogdet(covariance)
        return float(log_determinant + data @ np.linalg.solve(covariance, data))

    return float(np.exp(minimize_scalar(cost, bounds=(-3.0, 2.0), method="bounded").x))


@pytest.mark.parametrize("seed", [1, 2, 3])
@pytest.mark.parametrize("factor", [0.6, 2.5])
def test_it_is_where_the_dense_evidence_has_its_maximum(factor: float, seed: int) -> None:
    problem = drawn(problem_of(small_case()), factor, seed)
    chosen = choose_prior_strength(problem)
    assert chosen.factor == pytest.approx(dense_maximum(problem), rel=0.15)


def test_data_without_structure_end_at_the_smallest_strength() -> None:
    problem = problem_of(small_case(), station_terms=False, mislocation=False)
    rows = problem.rows
    still = dataclasses.replace(rows, residual_s=np.zeros_like(rows.residual_s))
    chosen = choose_prior_strength(dataclasses.replace(problem, rows=still))
    assert chosen.at_limit
    assert chosen.factor < 0.1


def test_gross_errors_do_not_widen_it() -> None:
    clean = small_case()
    spoilt = with_gross_errors(clean, np.array([3, 17, 40]), 6.0)
    without = choose_prior_strength(problem_of(clean, robust="huber"))
    with_errors = choose_prior_strength(problem_of(spoilt, robust="huber"))
    assert with_errors.factor == pytest.approx(without.factor, rel=0.3)

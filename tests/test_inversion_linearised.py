"""A finished inversion frozen as a linear problem."""

from __future__ import annotations

import numpy as np
import pytest

from inversion_cases import plain_settings, small_case, with_gross_errors
from rayloom.inversion import InversionResult, InversionSettings, invert, linearise, solve

ROBUST = InversionSettings(
    max_iterations=20, model_tolerance=1e-6, misfit_tolerance=1e-9, solver_tolerance=1e-9
)


@pytest.fixture(scope="module")
def found() -> InversionResult:
    case = with_gross_errors(small_case(), np.array([3, 17]), 3.0)
    return invert(case.data, case.model, ROBUST, forward=case.forward)


def test_its_solution_is_the_model_that_was_found(found: InversionResult) -> None:
    """At a fixed point of the outer loop a further step changes nothing (definition)."""
    problem = linearise(found, ROBUST)
    again = solve(problem.system, problem.right_hand_side, tolerance=1e-10, max_iterations=3000)
    change = np.linalg.norm(again.white - problem.white) / np.linalg.norm(problem.white)
    assert change < 1e-3


def test_it_counts_rows_with_weight_and_their_means(found: InversionResult) -> None:
    problem = linearise(found, ROBUST)
    assert problem.active.sum() == np.sum(found.weights > 0.0)
    groups = np.unique(problem.rows.group[problem.active]).size
    assert problem.free_count == problem.active.sum() - groups


def test_the_model_is_given_back_in_percent(found: InversionResult) -> None:
    problem = linearise(found, ROBUST)
    np.testing.assert_allclose(
        problem.perturbation_percent(problem.white), found.model.perturbation_percent, atol=1e-9
    )


def test_rows_without_weight_do_not_bear_on_the_solution() -> None:
    case = small_case()
    settings = plain_settings()
    problem = linearise(invert(case.data, case.model, settings, forward=case.forward), settings)
    weights = problem.weights.copy()
    weights[::7] = 0.0
    fewer = problem.with_weights(weights)
    moved = problem.target_s + np.where(weights > 0.0, 0.0, 5.0)
    np.testing.assert_array_equal(
        fewer.system.whiten_rows(moved), fewer.system.whiten_rows(problem.target_s)
    )

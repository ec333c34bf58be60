"""A prior centred on another model than the reference."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from inversion_cases import SLOWNESS, Case, Floats, plain_settings, small_case
from rayloom.inversion import (
    InversionResult,
    InversionSettings,
    build_problem,
    invert,
    linearise,
    solve,
)
from rayloom.inversion.prior_strength import choose_prior_strength
from rayloom.model import SlownessModel

TIGHT = {
    "prior_mean": "starting_model",
    "prior_std_percent": 2.0,
    "max_iterations": 12,
    "model_tolerance": 1e-6,
    "misfit_tolerance": 1e-9,
    "solver_tolerance": 1e-10,
}


@pytest.fixture(scope="module")
def case() -> Case:
    return small_case(curvature=0.1)


def started_at(case: Case, perturbation: Floats) -> SlownessModel:
    ratio = 1.0 + perturbation.reshape(case.model.grid.shape)
    return case.model.with_slowness(case.model.reference * ratio)


def fractional(result: InversionResult) -> Floats:
    return (result.model.slowness_s_per_km / result.model.reference - 1.0).ravel()


def another(case: Case) -> Floats:
    return 0.02 * np.sin(np.arange(case.perturbation.size))


def test_it_equals_taking_the_mean_off_the_data_of_a_linear_problem() -> None:
    """Data d about m0 give m0 plus what data d − G s_ref m0 give about zero (algebra)."""
    case = small_case(seed=4)
    mean = another(case)
    model = started_at(case, mean)
    found = invert(case.data, model, plain_settings(**TIGHT), forward=case.forward)
    change = SLOWNESS * (case.forward.lengths @ mean)
    shifted = replace(case.data, residual_s=case.data.residual_s - change)
    settings = plain_settings(**(TIGHT | {"prior_mean": "reference"}))
    plain = invert(shifted, case.model, settings, forward=case.forward)
    size = np.abs(fractional(plain)).max()
    np.testing.assert_allclose(fractional(found) - mean, fractional(plain), atol=1e-5 * size)


def test_a_prior_without_width_leaves_the_model_at_its_mean(case: Case) -> None:
    """A prior of next to no width leaves the model at its mean."""
    flat = invert(
        case.data,
        started_at(case, another(case)),
        plain_settings(prior_mean="starting_model", prior_std_percent=1e-6),
        forward=case.forward,
    )
    np.testing.assert_allclose(fractional(flat), another(case), atol=1e-6)


def test_the_frozen_problem_knows_the_mean(case: Case) -> None:
    settings = InversionSettings.model_validate(TIGHT)
    found = invert(case.data, started_at(case, another(case)), settings, forward=case.forward)
    problem = linearise(found, settings)
    np.testing.assert_allclose(problem.prior_mean, another(case), atol=1e-12)
    np.testing.assert_allclose(
        problem.perturbation_percent(problem.white), found.model.perturbation_percent, atol=1e-9
    )
    again = solve(problem.system, problem.right_hand_side, tolerance=1e-10, max_iterations=3000)
    change = np.linalg.norm(again.white - problem.white) / np.linalg.norm(problem.white)
    assert change < 1e-3


def test_the_strength_of_the_prior_is_that_of_what_the_mean_leaves() -> None:
    """As for data from which the mean's share was taken off by hand (linear algebra)."""
    case = small_case(seed=4)
    mean = another(case)
    settings = InversionSettings.model_validate({"prior_mean": "starting_model"})
    change = SLOWNESS * (case.forward.lengths @ mean)
    shifted = replace(case.data, residual_s=case.data.residual_s - change)
    about = build_problem(case.data, started_at(case, mean), settings, forward=case.forward)
    plain = build_problem(shifted, case.model, InversionSettings(), forward=case.forward)
    found = [choose_prior_strength(problem).factor for problem in (about, plain)]
    assert found[0] == pytest.approx(found[1], rel=1e-3)

"""How often intervals hold the truth: 200 truths drawn from the prior.

A binomial count with p = 0.9 of 200 lies within 171 to 189 in 97 of 100 cases.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pytest
from numpy.typing import NDArray

from appraisal_cases import small_problem
from rayloom.appraisal import RowSpace, noise_repeats, posterior_samples

Floats = NDArray[np.float64]
TRUTHS = 200
NINE_OF_TEN = 1.6449
"""Half-width of the central 90 % interval of a standard normal variable (table)."""


@dataclass(frozen=True)
class Survey:
    """Truths, what is found of them, and the standard errors claimed.

    Attributes
    ----------
    true, filtered, found : (regions, truths) arrays
        Mean perturbation of the truth, of what the inversion makes of it without
        errors, and of what it finds.
    posterior_std, noise_std : (regions,) arrays
        Standard errors.
    """

    true: Floats
    filtered: Floats
    found: Floats
    posterior_std: Floats
    noise_std: Floats


def regions(shape: tuple[int, int, int]) -> Floats:
    """Weights of three boxes, (regions, blocks)."""
    weights = np.zeros((3, *shape))
    weights[0, 3:5, 3:5, 1:3] = 1.0
    weights[1, 2:6, 2:6, 3:5] = 1.0
    weights[2, 0:3, 0:3, 2:4] = 1.0
    flat = weights.reshape(3, -1)
    return np.asarray(flat / flat.sum(axis=1, keepdims=True))


@pytest.fixture(scope="module")
def survey() -> Survey:
    """Simulate data of each truth: blocks, station terms, errors, means of the events."""
    problem = small_problem()
    space = RowSpace.of_problem(problem)
    weights = regions(problem.model.grid.shape)
    random = np.random.default_rng(2024)
    truths = np.column_stack([space.draw(random) for _ in range(TRUTHS)])
    seconds = np.asarray(space.matrix @ truths)
    noise = random.standard_normal(seconds.shape) * problem.rows.uncertainty_s[:, None]
    means = random.normal(0.0, 2.0, (problem.rows.group.max() + 1, TRUTHS))
    data = space.weighted(seconds + noise + means[problem.rows.group])
    blocks = slice(0, space.block_count)
    found = space.estimate(data, tolerance=1e-5, max_iterations=500)[blocks]
    filtered = space.estimate(space.predicted(truths), tolerance=1e-5, max_iterations=500)[blocks]
    samples = posterior_samples(problem, 256, seed=3)
    repeats = noise_repeats(problem, 256, seed=4)
    return Survey(
        true=weights @ truths[blocks],
        filtered=weights @ filtered,
        found=weights @ found,
        posterior_std=np.std(weights @ samples.fractional.T, axis=1),
        noise_std=np.std(weights @ repeats.fractional.T, axis=1),
    )


def test_posterior_intervals_hold_the_truth_nine_times_of_ten(survey: Survey) -> None:
    """By the definition of a 90 % interval."""
    inside = np.abs(survey.found - survey.true) <= NINE_OF_TEN * survey.posterior_std[:, None]
    held = np.sum(inside, axis=1)
    assert np.all((held >= 171) & (held <= 189)), held


def test_intervals_of_noise_hold_the_filtered_truth_nine_times_of_ten(survey: Survey) -> None:
    """By the definition of a 90 % interval."""
    inside = np.abs(survey.found - survey.filtered) <= NINE_OF_TEN * survey.noise_std[:, None]
    held = np.sum(inside, axis=1)
    assert np.all((held >= 171) & (held <= 189)), held


def test_intervals_of_noise_hold_the_truth_itself_less_often(survey: Survey) -> None:
    """They leave out how far the prior pulls, so the check above can fail."""
    inside = np.abs(survey.found - survey.true) <= NINE_OF_TEN * survey.noise_std[:, None]
    assert np.all(np.sum(inside, axis=1) < 171)

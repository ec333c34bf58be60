"""The prior of block perturbations against the covariance that it stands for.

σ² e^(−ρ) is the Matérn covariance with ν = ½ in three dimensions (Lindgren, Rue
& Lindström 2011, J. R. Statist. Soc. B 73, 423-498).
"""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray

from rayloom.inversion import SpectralPrior, matern_prior
from rayloom.model import BlockGrid, Frame

SIGMA = 0.02
LENGTH_KM = 60.0


@pytest.fixture(scope="module")
def grid() -> BlockGrid:
    return BlockGrid(
        Frame.flat(),
        np.linspace(0.0, 480.0, 17),
        np.linspace(0.0, 480.0, 17),
        np.linspace(0.0, 420.0, 15),
    )


@pytest.fixture(scope="module")
def prior(grid: BlockGrid) -> SpectralPrior:
    return matern_prior(
        grid, standard_deviation=SIGMA, horizontal_km=LENGTH_KM, vertical_km=LENGTH_KM
    )


@pytest.fixture(scope="module")
def samples(prior: SpectralPrior) -> NDArray[np.float64]:
    random = np.random.default_rng(5)
    draws = [prior.colour(random.standard_normal(prior.size)) for _ in range(3000)]
    return np.array(draws).reshape(-1, *prior.modes.shape)


def test_samples_have_the_standard_deviation_asked_inside_and_at_the_sides(
    samples: NDArray[np.float64],
) -> None:
    """Bars: 7 % inside and 10 % at faces and corners, block size at most the length."""
    ratio = samples.std(axis=0) / SIGMA
    inside = ratio[2:-2, 2:-2, 2:-2]
    assert np.abs(inside - 1.0).max() <= 0.07
    assert abs(np.sqrt(np.mean(inside**2)) - 1.0) <= 0.01
    assert np.abs(ratio - 1.0).max() <= 0.10


@pytest.mark.parametrize("axis", [0, 1, 2])
def test_samples_lose_correlation_exponentially(samples: NDArray[np.float64], axis: int) -> None:
    """Correlation e^(−Δ/ℓ) along each axis, at 30 to 120 km, inside the box."""
    core = np.moveaxis(samples[:, 4:-4, 4:-4, 4:-4], axis + 1, 1)
    for lag in range(1, 5):
        pairs = core[:, :-lag] * core[:, lag:]
        correlation = pairs.mean() / np.mean(core**2)
        assert correlation == pytest.approx(np.exp(-lag * 30.0 / LENGTH_KM), abs=0.03)

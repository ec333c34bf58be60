"""Priors: exact against dense matrices, on unequal blocks, flat and spherical."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray

from rayloom.errors import InputError
from rayloom.inversion import (
    IndependentPrior,
    InversionSettings,
    Prior,
    ZeroSumPrior,
    block_prior,
    damping_smoothing_prior,
    matern_prior,
)
from rayloom.inversion.depth_prior import coupling_across_edges
from rayloom.model import BlockGrid, Frame

Floats = NDArray[np.float64]

SPHERE = BlockGrid(
    Frame(longitude=12.0, latitude=-31.0),
    np.array([-1.0, -0.6, 0.0, 0.3, 1.1]),
    np.array([1.0, 1.4, 1.7, 2.5]),
    np.array([-3.0, 10.0, 35.0, 55.0, 95.0, 120.0]),
)
FLAT = BlockGrid(
    Frame.flat(), np.array([0.0, 40.0, 55.0, 100.0]), np.array([0.0, 30.0]), np.arange(0, 90, 20.0)
)


def dense(prior: Prior) -> Floats:
    return np.column_stack([prior.colour(column) for column in np.eye(prior.size)])


def dense_differences(grid: BlockGrid) -> tuple[Floats, Floats, Floats]:
    """Volumes and the flux matrices of all horizontal and all vertical faces, block by block."""
    widths = (grid.widths.x_km, grid.widths.y_km, grid.widths.depth_km)
    index = np.arange(grid.block_count).reshape(grid.shape)
    volume = np.zeros(grid.block_count)
    flux = [np.zeros((grid.block_count, grid.block_count)) for _ in range(2)]
    for position in np.ndindex(*grid.shape):
        here = index[position]
        size = [widths[axis][position[axis]] for axis in range(3)]
        volume[here] = np.prod(size)
        for axis in range(3):
            beside = list(position)
            beside[axis] += 1
            if beside[axis] == grid.shape[axis]:
                continue
            there = index[tuple(beside)]
            distance = 0.5 * (size[axis] + widths[axis][beside[axis]])
            conductance = volume[here] / size[axis] / distance
            matrix = flux[0 if axis < 2 else 1]
            matrix[here, here] += conductance
            matrix[there, there] += conductance
            matrix[here, there] -= conductance
            matrix[there, here] -= conductance
    return volume, flux[0], flux[1]


@pytest.mark.parametrize("grid", [SPHERE, FLAT])
def test_matern_prior_is_the_inverse_of_its_differential_operator(grid: BlockGrid) -> None:
    """Covariance D (LᵀL)⁻¹ D with L = V^½ (I − ∇·H∇), all dense and block by block."""
    prior = matern_prior(grid, standard_deviation=0.03, horizontal_km=50.0, vertical_km=25.0)
    volume, across, along = dense_differences(grid)
    operator = np.diag(np.sqrt(volume)) @ (
        np.eye(volume.size) + (50.0**2 * across + 25.0**2 * along) / volume[:, None]
    )
    covariance = np.linalg.inv(operator.T @ operator)
    scale = 0.03 / np.sqrt(np.diag(covariance))
    expected = scale[:, None] * covariance * scale
    np.testing.assert_allclose(dense(prior) @ dense(prior).T, expected, atol=1e-15)
    np.testing.assert_allclose(prior.standard_deviation(), 0.03, rtol=1e-12)


@pytest.mark.parametrize("grid", [SPHERE, FLAT])
def test_damping_and_smoothing_is_the_sum_over_blocks_and_faces(grid: BlockGrid) -> None:
    prior = damping_smoothing_prior(grid, damping=40.0, horizontal_km=900.0, vertical_km=300.0)
    volume, across, along = dense_differences(grid)
    precision = np.diag(volume) * 40.0**2 + 900.0**2 * across + 300.0**2 * along
    expected = np.linalg.inv(precision / volume.mean())
    np.testing.assert_allclose(dense(prior) @ dense(prior).T, expected, rtol=1e-9, atol=1e-14)
    np.testing.assert_allclose(prior.standard_deviation(), np.sqrt(np.diag(expected)), rtol=1e-9)


def every_prior() -> list[Prior]:
    family = np.array([0, 1, 0, 2, 1, 0])
    return [
        matern_prior(SPHERE, standard_deviation=0.02, horizontal_km=60.0, vertical_km=30.0),
        damping_smoothing_prior(SPHERE, damping=1.0, horizontal_km=20.0, vertical_km=10.0),
        ZeroSumPrior(family, np.array([0.2, 0.5, 0.1])),
        IndependentPrior(np.array([1.0, 2.0, 10.0])),
    ]


@pytest.mark.parametrize("prior", every_prior(), ids=lambda prior: type(prior).__name__)
def test_colouring_and_its_adjoint_agree(prior: Prior) -> None:
    random = np.random.default_rng(3)
    white, parameters = random.standard_normal((2, prior.size))
    left = prior.colour(white) @ parameters
    assert left == pytest.approx(white @ prior.colour_adjoint(parameters), rel=1e-12)


def test_whitening_undoes_colouring() -> None:
    prior = matern_prior(SPHERE, standard_deviation=0.02, horizontal_km=60.0, vertical_km=30.0)
    white = np.random.default_rng(4).standard_normal(prior.size)
    np.testing.assert_allclose(prior.whiten(prior.colour(white)), white, rtol=1e-9, atol=1e-11)


def test_zero_sum_prior_sums_to_zero_with_the_deviation_asked() -> None:
    """Each member keeps its own σ although the sum of a family is fixed."""
    prior = ZeroSumPrior(np.array([0, 0, 0, 1, 1, 2]), np.array([0.2, 0.5, 0.1]))
    covariance = dense(prior) @ dense(prior).T
    np.testing.assert_allclose(covariance[:3].sum(axis=0), 0.0, atol=1e-15)
    np.testing.assert_allclose(
        np.sqrt(np.diag(covariance)), [0.2, 0.2, 0.2, 0.5, 0.5, 0.0], atol=1e-12
    )


@pytest.mark.parametrize("share", [0.0, 0.2])
def test_decoupled_depths_are_a_smaller_flux_across_one_edge(share: float) -> None:
    """Against the dense operator whose vertical flux is reduced across that edge alone."""
    coupling = coupling_across_edges(SPHERE, [35.0, 900.0], share)
    assert coupling is not None
    prior = matern_prior(
        SPHERE,
        standard_deviation=0.03,
        horizontal_km=50.0,
        vertical_km=25.0,
        depth_coupling=coupling,
    )
    volume, across, along = dense_differences(SPHERE)
    depth = np.broadcast_to(SPHERE.depth_centres_km, SPHERE.shape).ravel()
    apart = (depth[:, None] < 35.0) != (depth < 35.0)
    weak = np.where(apart, (1.0 - share) * along, 0.0)
    along = along - weak + np.diag(weak.sum(axis=1))
    operator = np.diag(np.sqrt(volume)) @ (
        np.eye(volume.size) + (50.0**2 * across + 25.0**2 * along) / volume[:, None]
    )
    covariance = np.linalg.inv(operator.T @ operator)
    scale = 0.03 / np.sqrt(np.diag(covariance))
    expected = scale[:, None] * covariance * scale
    np.testing.assert_allclose(dense(prior) @ dense(prior).T, expected, atol=1e-14)
    if share == 0.0:
        assert np.abs((dense(prior) @ dense(prior).T)[apart]).max() < 1e-15


def test_the_deviation_follows_the_table_over_depth() -> None:
    """Linear in between, constant beyond; the marginal deviations stay exact."""
    settings = InversionSettings(
        prior_std_percent=2.0,
        prior_factor_by_depth=((10.0, 1.5), (60.0, 0.5)),
        decoupled_depths_km=(35.0,),
    )
    prior = block_prior(SPHERE, settings)
    expected = np.interp(SPHERE.depth_centres_km, [10.0, 60.0], [3.0, 1.0])
    found = 100.0 * prior.standard_deviation().reshape(SPHERE.shape)
    np.testing.assert_allclose(found, np.broadcast_to(expected, SPHERE.shape), rtol=1e-12)


def test_a_decoupled_depth_within_a_layer_is_refused_by_name() -> None:
    with pytest.raises(InputError, match=r"40 km lies within .* from 35 to 55 km"):
        block_prior(SPHERE, InversionSettings(prior_std_percent=2.0, decoupled_depths_km=(40.0,)))

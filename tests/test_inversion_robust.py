"""Robust weights and the means of groups."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import minimize_scalar

from rayloom.inversion import Huber, LeastSquares, StudentT, robust_fit
from rayloom.inversion.robust import Rejecting, RobustLoss

LOSSES: list[RobustLoss] = [
    Huber(1.345),
    StudentT(4.0),
    LeastSquares(),
    Rejecting(Huber(1.345), 4.0),
]


@pytest.mark.parametrize("loss", LOSSES, ids=lambda loss: type(loss).__name__)
def test_weights_are_the_slope_of_the_loss(loss: RobustLoss) -> None:
    """w(u) = loss′(u)/(2u), by central differences."""
    u = np.linspace(-6.0, 6.0, 101)[1::2]
    slope = (loss.loss(u + 1e-6) - loss.loss(u - 1e-6)) / 2e-6
    np.testing.assert_allclose(loss.weights(u), slope / (2.0 * u), rtol=1e-6)


@pytest.mark.parametrize("loss", LOSSES, ids=lambda loss: type(loss).__name__)
def test_each_group_is_measured_from_its_own_minimum(loss: RobustLoss) -> None:
    """Against scipy's scalar minimiser, uncertainties unequal, one gross error per group."""
    random = np.random.default_rng(2)
    group = np.repeat([0, 1, 2], [6, 7, 9])
    uncertainty = random.uniform(0.05, 0.3, group.size)
    values = np.array([5.0, -2.0, 0.4])[group] + uncertainty * random.standard_normal(group.size)
    values[[0, 8, 20]] += 2.0
    active = np.ones(group.size, dtype=bool)
    active[3] = False
    values[3] = np.nan
    fit = robust_fit(values, uncertainty, group, active, loss, scale=1.0)
    for number in range(3):
        rows = active & (group == number)
        best = minimize_scalar(
            lambda c, rows=rows: float(np.sum(loss.loss((values[rows] - c) / uncertainty[rows]))),
            bracket=(np.median(values[rows]) - 0.1, np.median(values[rows]) + 0.1),
            tol=1e-12,
        )
        np.testing.assert_allclose(values[rows] - fit.centred_s[rows], best.x, atol=1e-6)
    assert np.isnan(fit.centred_s[3])
    assert fit.weights[3] == 0.0


def test_rows_without_a_group_keep_their_own_zero() -> None:
    values = np.array([0.3, 5.0, 5.0, 5.0])
    group = np.array([-1, 0, 0, 0])
    fit = robust_fit(values, np.ones(4), group, np.ones(4, dtype=bool), LeastSquares())
    np.testing.assert_allclose(fit.centred_s, [0.3, 0.0, 0.0, 0.0], atol=1e-12)


def test_structure_in_the_residuals_widens_the_scale_of_the_weights() -> None:
    """Residuals of five standard errors all over are structure, not outliers."""
    random = np.random.default_rng(4)
    values = 0.5 * random.standard_normal(400)
    group, active = np.zeros(400, dtype=np.int64), np.ones(400, dtype=bool)
    fit = robust_fit(values, np.full(400, 0.1), group, active, Huber(1.345))
    assert fit.scale == pytest.approx(5.0, rel=0.15)
    assert np.mean(fit.weights < 1.0) < 0.25


def test_rejected_rows_have_no_weight_and_a_constant_loss() -> None:
    loss = Rejecting(Huber(1.345), 4.0)
    np.testing.assert_array_equal(loss.weights(np.array([0.5, 4.01, -30.0])), [1.0, 0.0, 0.0])
    assert loss.loss(np.array([4.0])) == loss.loss(np.array([-90.0]))

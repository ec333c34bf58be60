"""The trade-off's curves against published regularisation problems and a singular value solution.

The problems shaw, phillips and heat are those of Hansen, P. C. (1994), Regularization tools,
Numerical Algorithms 6, 1-35, built here from their published formulas, with the noise
e_i = 1e-3 √2 sin(i²). They pass through the operator and the curve that users run.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.linalg import toeplitz
from scipy.sparse import csr_array

from rayloom.inversion import GroupMeans, IndependentPrior, ParameterGroup, WhitenedSystem
from rayloom.inversion.tradeoff import (
    Accuracy,
    Curve,
    MarginalSystem,
    corner_damping,
    curvature,
    gcv_damping,
    measure_curve,
    plausible,
)
from rayloom.inversion.tradeoff.bidiagonal import Bidiagonal

Floats = NDArray[np.float64]
EXACT = Accuracy(tolerance=0.0, max_steps=200, probes=120)


def shaw(n: int) -> tuple[Floats, Floats]:
    """One-dimensional image restoration (Shaw 1972)."""
    angle = -np.pi / 2 + (np.arange(n) + 0.5) * np.pi / n
    u = np.pi * (np.sin(angle)[:, None] + np.sin(angle))
    kernel = ((np.cos(angle)[:, None] + np.cos(angle)) * np.sinc(u / np.pi)) ** 2
    truth = 2.0 * np.exp(-6.0 * (angle - 0.8) ** 2) + np.exp(-2.0 * (angle + 0.5) ** 2)
    return kernel * np.pi / n, truth


def phillips(n: int) -> tuple[Floats, Floats]:
    """Phillips' (1962) convolution with 1 + cos(π s/3)."""
    h, quarter, c = 12.0 / n, n // 4, np.pi / 3.0
    cosines = np.cos(np.arange(-1, quarter + 1) * 4.0 * np.pi / n)
    scale = 9.0 / (h * np.pi**2)
    row = np.zeros(n)
    row[:quarter] = h + scale * (2 * cosines[1:-1] - cosines[:-2] - cosines[2:])[:quarter]
    row[quarter] = h / 2 + scale * (np.cos(4.0 * np.pi / n) - 1.0)
    half = (h + np.diff(np.sin(c * h * np.arange(quarter + 1))) / c) / np.sqrt(h)
    truth = np.concatenate([np.zeros(quarter), half[::-1], half, np.zeros(quarter)])
    return toeplitz(row), truth


def heat(n: int) -> tuple[Floats, Floats]:
    """Inverse heat equation (Carasso 1982) with κ = 1."""
    t = (np.arange(n) + 0.5) / n
    column = t**-1.5 * np.exp(-0.25 / t) / (n * 2.0 * np.sqrt(np.pi))
    row = np.zeros(n)
    row[0] = column[0]
    time = np.arange(1, n // 2 + 1) * 20.0 / n
    rise, bow = 0.75 * time**2 / 4.0, 0.75 + (time - 2.0) * (3.0 - time)
    pulse = np.where(time < 2, rise, np.where(time < 3, bow, 0.75 * np.exp(-2.0 * (time - 3.0))))
    return toeplitz(column, row), np.concatenate([pulse, np.zeros(n - n // 2)])


def noisy(matrix: Floats, truth: Floats) -> Floats:
    index = np.arange(1, len(matrix) + 1)
    return matrix @ truth + 1e-3 * np.sqrt(2.0) * np.sin(index.astype(np.float64) ** 2)


def marginal(matrix: Floats) -> MarginalSystem:
    """Put a matrix behind the operator of the inversion: no means, no other groups."""
    rows, columns = matrix.shape
    group = ParameterGroup("blocks", csr_array(matrix), IndependentPrior(np.ones(columns)))
    means = GroupMeans.of_rows(np.full(rows, -1), np.ones(rows))
    return MarginalSystem.of_system(WhitenedSystem.of_groups((group,), means))


def curve_of(matrix: Floats, data: Floats, damping: Floats) -> tuple[Curve, Bidiagonal]:
    return measure_curve(marginal(matrix), data, damping, free_count=len(matrix), accuracy=EXACT)


PROBLEMS = [
    pytest.param(shaw, 32, 1.10e-3, id="shaw"),
    pytest.param(phillips, 64, 6.24e-2, id="phillips"),
    pytest.param(heat, 64, 5.88e-3, id="heat"),
]


@pytest.mark.parametrize(("problem", "size", "optimum"), PROBLEMS)
def test_the_damping_of_least_error(
    problem: Callable[[int], tuple[Floats, Floats]], size: int, optimum: float
) -> None:
    """Optimum λ computed from the singular value decomposition of the same matrices."""
    matrix, truth = problem(size)
    data = noisy(matrix, truth)
    damping = np.geomspace(0.3 * optimum, 3.0 * optimum, 241)
    system = marginal(matrix)
    _, found = curve_of(matrix, data, damping)
    errors = [
        np.linalg.norm(system.unknowns(found.residual(strength), damping=strength) - truth)
        for strength in damping.tolist()
    ]
    assert damping[int(np.argmin(errors))] == pytest.approx(optimum, rel=0.02)


@pytest.mark.parametrize(("problem", "size", "optimum"), PROBLEMS)
def test_curve_equals_the_singular_value_solution(
    problem: Callable[[int], tuple[Floats, Floats]], size: int, optimum: float
) -> None:
    """Filter factors of the SVD (Hansen 1998, Rank-deficient and discrete ill-posed problems)."""
    matrix, truth = problem(size)
    data = noisy(matrix, truth)
    damping = np.geomspace(0.1 * optimum, 10.0 * optimum, 9)
    curve, found = curve_of(matrix, data, damping)
    left, singular, _ = np.linalg.svd(matrix)
    filters = singular**2 / (singular**2 + damping[:, None] ** 2)
    parts = left.T @ data
    misfit = ((1.0 - filters) ** 2) @ parts**2
    norms = (filters**2) @ (parts / singular) ** 2
    np.testing.assert_allclose(curve.chi2, misfit, rtol=1e-6)
    np.testing.assert_allclose(curve.solution_norm**2, norms, rtol=1e-6)
    np.testing.assert_allclose(curve.resolved, filters.sum(axis=1), atol=0.9)
    np.testing.assert_allclose(curve.gcv, size * misfit / (size - curve.resolved) ** 2, rtol=1e-6)
    volume = np.log1p(singular**2 / damping[:, None] ** 2).sum(axis=1)
    evidence = -0.5 * (size * (1.0 + 2.0 * np.log(curve.noise_scale)) + volume)
    np.testing.assert_allclose(curve.log_evidence, evidence, atol=2.0)
    np.testing.assert_allclose(curvature(found, damping), bend(matrix, data, damping), rtol=0.02)


def bend(matrix: Floats, data: Floats, damping: Floats) -> Floats:
    """Curvature of (log misfit norm, log model norm) by finite differences of the SVD solution."""
    left, singular, _ = np.linalg.svd(matrix)
    parts = left.T @ data
    step = 1e-3

    def point(strength: Floats) -> tuple[Floats, Floats]:
        filters = singular**2 / (singular**2 + strength[:, None] ** 2)
        misfit = ((1.0 - filters) ** 2) @ parts**2
        norm = (filters**2) @ (parts / singular) ** 2
        return 0.5 * np.log(misfit), 0.5 * np.log(norm)

    before, here, after = (point(damping * np.exp(shift)) for shift in (-step, 0.0, step))
    first = [(b - a) / (2 * step) for a, b in zip(before, after, strict=True)]
    second = [(b - 2 * h + a) / step**2 for a, h, b in zip(before, here, after, strict=True)]
    return np.asarray(
        (first[0] * second[1] - second[0] * first[1]) / (first[0] ** 2 + first[1] ** 2) ** 1.5
    )


def test_false_corners_are_passed_over() -> None:
    """The sharpest corner of heat(64) lies near λ = 2e-8 to 4e-8, far below the optimum 5.88e-3.

    Computed from the singular value decomposition, to rounding; the bracket and GCV keep
    clear of it.
    """
    matrix, truth = heat(64)
    data = noisy(matrix, truth)
    wide = np.geomspace(1e-9, 1.0, 300)
    sharpest = wide[int(np.argmax(bend(matrix, data, wide)))]
    assert 1e-8 < sharpest < 1e-7
    damping = np.geomspace(1e-6, 1.0, 120)
    curve, _ = curve_of(matrix, data, damping)
    bracket = plausible(curve.resolved, curve.free_count)
    corner = corner_damping(damping, curve.curvature, bracket)
    assert corner is not None
    assert 5.88e-4 < corner < 5.88e-2
    assert gcv_damping(curve) == pytest.approx(5.88e-3, rel=1.0)


def test_a_straight_curve_has_no_corner() -> None:
    damping = np.geomspace(0.1, 10.0, 9)
    everywhere = np.ones(9, dtype=bool)
    slight = 0.02 + 0.03 * np.sin(np.arange(9.0))
    assert corner_damping(damping, slight, everywhere) is None
    at_the_end = np.linspace(0.0, 5.0, 9)
    assert corner_damping(damping, at_the_end, everywhere) is None

"""The inversion's linear algebra against published and textbook values."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.sparse import csr_array

from rayloom.inversion import (
    GroupMeans,
    Huber,
    IndependentPrior,
    ParameterGroup,
    WhitenedSystem,
    robust_fit,
    solve,
)

Floats = NDArray[np.float64]


def system_of(matrix: Floats, *, standard_deviation: float) -> WhitenedSystem:
    """Return plain damped least squares: unit weights, no means, independent parameters."""
    rows, columns = matrix.shape
    prior = IndependentPrior(np.full(columns, standard_deviation))
    group = ParameterGroup("x", csr_array(matrix), prior)
    means = GroupMeans.of_rows(np.full(rows, -1), np.ones(rows))
    return WhitenedSystem.of_groups([group], means)


def damped_solution(matrix: Floats, data: Floats, *, damping: float) -> Floats:
    """Minimise ‖Ax − d‖² + damping² ‖x‖² through the code of an inversion."""
    system = system_of(matrix, standard_deviation=1.0 / damping)
    found = solve(system, system.whiten_rows(data), tolerance=1e-15, max_iterations=2000)
    return system.parameters(found.white)[0]


def published_problem(
    m: int, n: int, d: int, p: int, damp: float
) -> tuple[Floats, Floats, Floats]:
    """P(m, n, d, p) of Paige & Saunders (1982), section 8: matrix, right-hand side, solution.

    A = Y D Z with Householder reflections of sin(4πi/m) and cos(4πi/n),
    D_i = (⌈i/d⌉ d/n)^p, x = (n − 1, …, 0), and a residual such that x is the
    damped solution.
    """
    i, j = np.arange(1, m + 1), np.arange(1, n + 1)
    y, z = np.sin(4.0 * np.pi * i / m), np.cos(4.0 * np.pi * j / n)
    reflect_y = np.eye(m) - 2.0 * np.outer(y, y) / (y @ y)
    reflect_z = np.eye(n) - 2.0 * np.outer(z, z) / (z @ z)
    scale = (np.ceil(j / d) * d / n) ** p
    matrix = reflect_y[:, :n] @ np.diag(scale) @ reflect_z
    x = (n - j).astype(float)
    residual = np.zeros(m)
    residual[:n] = damp**2 * (reflect_z @ x) / scale
    beyond = np.arange(1, m - n + 1)
    residual[n:] = np.where(beyond % 2 == 1, 1.0, -1.0) * beyond / m
    return matrix, matrix @ x + reflect_y @ residual, x


@pytest.mark.parametrize(("m", "printed"), [(40, 77.8466), (80, 77.8688)])
def test_solver_reaches_the_residual_of_published_problems(m: int, printed: float) -> None:
    """P(m, 40, 4, 4), damp 0.01 (Paige & Saunders 1982; norms computed with scipy)."""
    matrix, data, x = published_problem(m, 40, 4, 4, 0.01)
    system = system_of(matrix, standard_deviation=100.0)
    found = solve(system, data, tolerance=1e-14, max_iterations=2000)
    residual = np.append(system.times(found.white) - data, found.white)
    assert np.linalg.norm(residual) == pytest.approx(printed, abs=5e-5)
    np.testing.assert_allclose(system.parameters(found.white)[0], x, rtol=1e-6, atol=1e-6)


def test_solver_solves_the_undamped_published_problem() -> None:
    """P(40, 40, 4, 4), damp 0: relative error 1e-11 (Paige & Saunders 1982)."""
    matrix, data, x = published_problem(40, 40, 4, 4, 0.0)
    system = system_of(matrix, standard_deviation=1.0)
    found = solve(system, data, tolerance=1e-16, max_iterations=2000, damping=0.0)
    error = np.linalg.norm(found.white - x) / np.linalg.norm(x)
    assert error <= 1e-11


def nine_blocks() -> Floats:
    """3 column rays, 3 row rays, a diagonal (√2 per block), a corner ray (√2 in block 9)."""
    blocks = np.arange(9).reshape(3, 3)
    rays = np.zeros((8, 9))
    for k in range(3):
        rays[k, blocks[:, k]] = 1.0
        rays[3 + k, blocks[k]] = 1.0
    rays[6, np.diag(blocks)] = np.sqrt(2.0)
    rays[7, 8] = np.sqrt(2.0)
    return rays


def sixteen_blocks() -> Floats:
    """4 × 4 blocks, one ray along each row and each column."""
    blocks = np.arange(16).reshape(4, 4)
    rays = np.zeros((8, 16))
    for k in range(4):
        rays[k, blocks[k]] = 1.0
        rays[4 + k, blocks[:, k]] = 1.0
    return rays


def resolution(rays: Floats) -> Floats:
    """Columns of the resolution matrix: spikes sent through the solver, damping 1e-6."""
    return np.column_stack(
        [damped_solution(rays, rays @ spike, damping=1e-6) for spike in np.eye(rays.shape[1])]
    )


def test_nine_blocks_resolve_as_in_the_textbook() -> None:
    """Set-up of Aster, Borchers & Thurber, from memory; values computed by SVD."""
    found = resolution(nine_blocks())
    diagonal = [0.833, 0.833, 0.667, 0.833, 0.833, 0.667, 0.667, 0.667, 1.0]
    np.testing.assert_allclose(np.diag(found), diagonal, atol=5e-4)
    spike = [0.167, 0.0, -0.167, 0.0, 0.833, 0.167, -0.167, 0.167, 0.0]
    np.testing.assert_allclose(found[:, 4], spike, atol=5e-4)


def test_nine_blocks_have_the_singular_values_of_the_textbook() -> None:
    """3.180, 2, 1.732 three times, 1.607, 0.553 and 0: rank 7 of 9 (computed by SVD).

    Each is found through the solver: its filter s²/(s² + λ²) along its own vector.
    """
    rays, damping = nine_blocks(), 1.3
    directions = np.linalg.svd(rays)[2]
    filters = [
        direction @ damped_solution(rays, rays @ direction, damping=damping)
        for direction in directions
    ]
    found = damping * np.sqrt(np.array(filters) / (1.0 - np.array(filters)))
    expected = [3.180, 2.0, 1.732, 1.732, 1.732, 1.607, 0.553, 0.0, 0.0]
    np.testing.assert_allclose(found, expected, atol=6e-4)


def test_sixteen_blocks_resolve_as_in_the_textbook() -> None:
    """Set-up of Menke, from memory; values computed by SVD."""
    found = resolution(sixteen_blocks())
    np.testing.assert_allclose(np.diag(found), 0.4375, atol=1e-9)
    corner = np.full((4, 4), -0.0625)
    corner[0, :] = corner[:, 0] = 0.1875
    corner[0, 0] = 0.4375
    np.testing.assert_allclose(found[:, 0].reshape(4, 4), corner, atol=1e-9)


def test_damping_halves_a_component_at_the_corner_of_its_filter() -> None:
    """Tikhonov's filter s²/(s² + λ²) is 0.5 at s = λ (textbook)."""
    found = damped_solution(np.diag([3.0, 5.0]), np.array([3.0, 5.0]), damping=3.0)
    np.testing.assert_allclose(found, [0.5, 25.0 / 34.0], rtol=1e-12)


def test_the_total_model_stays_where_steps_would_creep() -> None:
    """At s = λ: regularised steps reach 0.5, 0.75, 0.875; the total model stays at 0.5.

    Shaw & Orcutt (1985); the right-hand side of a retracing is d − T_k + A m_k.
    """
    matrix, data = np.array([[3.0]]), np.array([3.0])
    creeping, jumping = np.zeros(1), np.zeros(1)
    for step in (0.5, 0.75, 0.875):
        left = data - matrix @ creeping
        creeping = creeping + damped_solution(matrix, left, damping=3.0)
        np.testing.assert_allclose(creeping, step, rtol=1e-12)
        target = data - matrix @ jumping + matrix @ jumping
        jumping = damped_solution(matrix, target, damping=3.0)
        np.testing.assert_allclose(jumping, 0.5, rtol=1e-12)


def test_huber_mean_of_five_numbers() -> None:
    """Mean of {0, 0, 0, 0, 10} with σ = 1 and k = 1.345: k/4 = 0.33625 (textbook)."""
    values = np.array([0.0, 0.0, 0.0, 0.0, 10.0])
    every = np.ones(5, dtype=bool)
    fit = robust_fit(values, np.ones(5), np.zeros(5, dtype=np.int64), every, Huber(1.345))
    np.testing.assert_allclose(values - fit.centred_s, 0.33625, rtol=1e-9)

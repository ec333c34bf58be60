"""The whitened system: adjoint, exact elimination, counts, identical bits."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.sparse import csr_array, random_array

from rayloom._core import SparseProducts
from rayloom.inversion import (
    GroupMeans,
    IndependentPrior,
    ParameterGroup,
    WhitenedSystem,
    ZeroSumPrior,
    matern_prior,
    resolution_trace,
    solve,
)
from rayloom.model import BlockGrid, Frame

Floats = NDArray[np.float64]
GRID = BlockGrid(
    Frame.flat(), np.arange(0, 260, 50.0), np.arange(0, 210, 50.0), np.arange(0, 140, 40.0)
)
ROWS, GROUPS = 90, 8


@dataclass(frozen=True)
class Small:
    group: NDArray[np.int64]
    root_weights: Floats
    groups: list[ParameterGroup]
    system: WhitenedSystem

    @property
    def dense_columns(self) -> Floats:
        """A C^½, column by column from the groups' own matrices and priors."""
        blocks = []
        for group in self.groups:
            colours = [group.prior.colour(column) for column in np.eye(group.size)]
            blocks.append(group.matrix.toarray() @ np.column_stack(colours))
        return np.hstack(blocks)


def small_system(*, threads: int | None = None) -> Small:
    """Blocks, station terms and independent unknowns; unequal weights, two rows without."""
    random = np.random.default_rng(11)
    group = random.integers(0, GROUPS, ROWS)
    group[:3] = -1
    root_weights = random.uniform(2.0, 20.0, ROWS)
    root_weights[[7, 30]] = 0.0
    paths = random_array((ROWS, GRID.block_count), density=0.2, rng=random, format="csr")
    station = random.integers(0, 9, ROWS)
    terms = csr_array((np.ones(ROWS), station, np.arange(ROWS + 1)), shape=(ROWS, 9))
    family = np.repeat([0, 1], [5, 4])
    groups = [
        ParameterGroup(
            "blocks",
            csr_array(paths) * 5.0,
            matern_prior(GRID, standard_deviation=0.02, horizontal_km=60.0, vertical_km=60.0),
        ),
        ParameterGroup("station_terms", terms, ZeroSumPrior(family, np.array([0.1, 0.2]))),
        ParameterGroup(
            "shifts",
            csr_array(random.standard_normal((ROWS, 4)) / 10.0),
            IndependentPrior(np.full(4, 10.0)),
        ),
    ]
    means = GroupMeans.of_rows(group, root_weights)
    system = WhitenedSystem.of_groups(groups, means, threads=threads)
    return Small(group, root_weights, groups, system)


def test_the_whole_operator_and_its_adjoint_agree() -> None:
    """⟨Ãx, y⟩ = ⟨x, Ãᵀy⟩ for any x and y."""
    small = small_system()
    random = np.random.default_rng(1)
    for _ in range(5):
        x = random.standard_normal(small.system.shape[1])
        y = random.standard_normal(small.system.shape[0])
        left, right = small.system.times(x) @ y, x @ small.system.transposed_times(y)
        assert left == pytest.approx(right, rel=1e-11)


def test_the_projection_is_symmetric_and_idempotent() -> None:
    small = small_system()
    means = small.system.means
    matrix = np.column_stack([means.project(column) for column in np.eye(ROWS)])
    np.testing.assert_allclose(matrix, matrix.T, atol=1e-15)
    np.testing.assert_allclose(matrix @ matrix, matrix, atol=1e-14)
    assert means.count == GROUPS
    in_use = small.root_weights > 0.0
    assert np.trace(matrix[np.ix_(in_use, in_use)]) == pytest.approx(in_use.sum() - GROUPS)


def with_free_means(small: Small, data: Floats) -> tuple[Floats, Floats]:
    """Whitened unknowns and group means by dense least squares on the full problem."""
    indicator = (small.group[:, None] == np.arange(GROUPS)).astype(float)
    weighted = small.root_weights[:, None] * np.hstack([small.dense_columns, indicator])
    unknowns = small.system.shape[1]
    penalty = np.hstack([np.eye(unknowns), np.zeros((unknowns, GROUPS))])
    target = np.concatenate([small.root_weights * data, np.zeros(unknowns)])
    solution = np.linalg.lstsq(np.vstack([weighted, penalty]), target, rcond=None)[0]
    return solution[:unknowns], solution[unknowns:]


def test_elimination_equals_one_free_term_per_group() -> None:
    """Unequal weights, rows without weight and rows without a group; dense lstsq as judge."""
    small = small_system()
    data = np.random.default_rng(2).standard_normal(ROWS) + 3.0 * small.group
    found = solve(
        small.system, small.system.whiten_rows(data), tolerance=1e-15, max_iterations=5000
    )
    expected, _ = with_free_means(small, data)
    np.testing.assert_allclose(found.white, expected, atol=1e-11 * np.abs(expected).max())


def test_demeaning_the_data_alone_gives_another_answer() -> None:
    """The classical mistake: the means are taken off the data but not off the columns."""
    small = small_system()
    data = np.random.default_rng(2).standard_normal(ROWS) + 3.0 * small.group
    unknowns = small.system.shape[1]
    columns = small.root_weights[:, None] * small.dense_columns
    target = np.concatenate([small.system.whiten_rows(data), np.zeros(unknowns)])
    wrong = np.linalg.lstsq(np.vstack([columns, np.eye(unknowns)]), target, rcond=None)[0]
    expected, _ = with_free_means(small, data)
    assert np.linalg.norm(wrong - expected) > 0.05 * np.linalg.norm(expected)


def dense_influence(small: Small) -> Floats:
    """H = Ã (ÃᵀÃ + I)⁻¹ Ãᵀ."""
    whole = np.column_stack(
        [small.system.times(column) for column in np.eye(small.system.shape[1])]
    )
    return whole @ np.linalg.solve(whole.T @ whole + np.eye(whole.shape[1]), whole.T)


def test_probes_estimate_the_trace_of_the_influence_matrix() -> None:
    """Within four standard deviations of Hutchinson's estimate, √(2 Σ_{j≠i} H_ij²/probes)."""
    small = small_system()
    influence = dense_influence(small)
    estimate = resolution_trace(
        small.system, probes=40, seed=3, tolerance=1e-10, max_iterations=2000
    )
    beside = np.sum(influence**2) - np.sum(np.diag(influence) ** 2)
    assert abs(estimate - np.trace(influence)) <= 4.0 * np.sqrt(2.0 * beside / 40)


def test_misfit_and_penalty_have_their_expectations() -> None:
    """E‖r̃‖² = N − N_g − tr H given the noise; E(misfit + penalty) = N − N_g over truths.

    Linear Gaussian theory (textbook); simulated with 250 truths and noises,
    compared within four standard errors of the simulated means.
    """
    small = small_system()
    random = np.random.default_rng(8)
    in_use = small.root_weights > 0.0
    degrees = int(in_use.sum()) - GROUPS
    misfit, total = [], []
    for _ in range(250):
        truth = random.standard_normal(small.system.shape[1])
        noise = small.system.means.project(np.where(in_use, random.standard_normal(ROWS), 0.0))
        data = small.system.times(truth) + noise
        found = solve(small.system, data, tolerance=1e-8, max_iterations=1000)
        left = data - small.system.times(found.white)
        misfit.append(left @ left)
        total.append(left @ left + found.white @ found.white)
    standard_error = np.std(total) / np.sqrt(250)
    assert abs(np.mean(total) - degrees) <= 4.0 * standard_error
    expected = degrees - np.trace(dense_influence(small))
    assert abs(np.mean(misfit) - expected) <= 4.0 * np.std(misfit) / np.sqrt(250)


def test_products_have_the_same_bits_on_any_number_of_threads() -> None:
    random = np.random.default_rng(6)
    matrix = csr_array(random_array((700, 300), density=0.05, rng=random, format="csr"))
    x, y = random.standard_normal(300), random.standard_normal(700)
    results = []
    for threads in (1, 2, 3):
        products = SparseProducts(
            matrix.indptr.astype(np.int64),
            matrix.indices.astype(np.int32),
            matrix.data,
            300,
            threads=threads,
        )
        results.append((products.times(x).tobytes(), products.transposed_times(y).tobytes()))
    assert results[0] == results[1] == results[2]
    np.testing.assert_allclose(np.frombuffer(results[0][1]), matrix.T @ y, rtol=1e-12, atol=1e-13)


@pytest.mark.parametrize("damping", [1.0, 0.3])
def test_a_start_changes_the_way_but_not_the_end(damping: float) -> None:
    """The whole of z stays penalised, as dense normal equations have it; fewer steps from near."""
    small = small_system()
    data = small.system.whiten_rows(np.random.default_rng(2).standard_normal(ROWS))
    unknowns = small.system.shape[1]
    whole = np.column_stack([small.system.times(column) for column in np.eye(unknowns)])
    normal = whole.T @ whole + damping**2 * np.eye(unknowns)
    expected = np.linalg.solve(normal, whole.T @ data)
    options = {"tolerance": 1e-13, "max_iterations": 5000, "damping": damping}
    start = np.random.default_rng(9).standard_normal(unknowns)
    far = solve(small.system, data, start=start, **options)
    near = solve(small.system, data, start=expected + 1e-9 * start, **options)
    for found in (far, near):
        np.testing.assert_allclose(found.white, expected, atol=1e-9 * np.abs(expected).max())
    assert near.iterations < solve(small.system, data, **options).iterations

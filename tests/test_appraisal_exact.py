"""Samples, probes, rows, columns and resampling against dense linear algebra."""

from __future__ import annotations

from concurrent.futures import Executor, ProcessPoolExecutor, ThreadPoolExecutor
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from appraisal_cases import DenseAnswers, problem_of_matrix, small_problem
from rayloom.appraisal import (
    Checkpoints,
    event_bootstrap,
    event_jackknife,
    noise_repeats,
    point_spread,
    posterior_samples,
    probe_resolution,
)
from rayloom.appraisal.chunks import Arrays, run_chunks
from rayloom.errors import InputError
from rayloom.inversion import solve

ROOT_2 = np.sqrt(2.0)


@pytest.fixture(scope="module")
def dense() -> DenseAnswers:
    return DenseAnswers(small_problem())


def three_by_three() -> np.ndarray:
    """3 columns, 3 rows, one diagonal, one corner ray through 3 × 3 blocks."""
    matrix = np.zeros((8, 9))
    for line in range(3):
        matrix[line, line::3] = 1.0
        matrix[3 + line, 3 * line : 3 * line + 3] = 1.0
    matrix[6, [0, 4, 8]] = ROOT_2
    matrix[7, 8] = ROOT_2
    return matrix


def four_by_four() -> np.ndarray:
    """4 columns and 4 rows through 4 × 4 blocks."""
    matrix = np.zeros((8, 16))
    for line in range(4):
        matrix[line, line::4] = 1.0
        matrix[4 + line, 4 * line : 4 * line + 4] = 1.0
    return matrix


def centres(shape: tuple[int, int, int]) -> list[tuple[float, float, float]]:
    return [(x + 0.5, y + 0.5, 0.5) for x in range(shape[0]) for y in range(shape[1])]


def test_three_by_three_blocks_resolve_as_computed() -> None:
    """Numbers computed from the singular vectors of a textbook case.

    Setup of Aster, Borchers & Thurber, Parameter Estimation and Inverse Problems (from
    memory). The prior is weak enough (1/σ² = 1e-4) to change the third digit by one at most.
    """
    problem = problem_of_matrix(three_by_three(), (3, 3, 1), prior_std=100.0)
    spreads = point_spread(problem, centres((3, 3, 1)))
    diagonal = np.array([spread.diagonal for spread in spreads])
    np.testing.assert_allclose(
        diagonal, [0.833, 0.833, 0.667, 0.833, 0.833, 0.667, 0.667, 0.667, 1.0], atol=1.5e-3
    )
    spike = [[0.167, 0.0, -0.167], [0.0, 0.833, 0.167], [-0.167, 0.167, 0.0]]
    np.testing.assert_allclose(spreads[4].column[:, :, 0], spike, atol=1.5e-3)


def test_four_by_four_blocks_resolve_as_computed() -> None:
    """Setup of Menke, Geophysical Data Analysis (from memory); numbers computed."""
    problem = problem_of_matrix(four_by_four(), (4, 4, 1), prior_std=100.0)
    spreads = point_spread(problem, centres((4, 4, 1)))
    np.testing.assert_allclose([spread.diagonal for spread in spreads], 0.4375, atol=5e-4)
    corner = np.full((4, 4), -0.0625)
    corner[0, :] = corner[:, 0] = 0.1875
    corner[0, 0] = 0.4375
    np.testing.assert_allclose(spreads[0].column[:, :, 0], corner, atol=5e-4)
    np.testing.assert_allclose(spreads[0].row[:, :, 0], corner, atol=5e-4)


def test_the_probed_diagonal_errs_as_much_as_it_should() -> None:
    """For a projector √(R_ii(1 − R_ii)/s) with s probes (Bekas, Kokiopoulou & Saad 2007)."""
    probes = 400
    problem = problem_of_matrix(four_by_four(), (4, 4, 1), prior_std=100.0)
    found = probe_resolution(problem, probes, seed=5)
    expected = np.sqrt(0.4375 * (1.0 - 0.4375) / probes)
    error = found.diagonal.ravel() - 0.4375
    assert np.abs(error).max() < 4.0 * expected
    assert 0.3 * expected < np.sqrt(np.mean(error**2)) < 2.0 * expected
    np.testing.assert_allclose(found.diagonal_error.ravel(), expected, rtol=0.2)


def test_a_probed_diagonal_with_means_and_terms(dense: DenseAnswers) -> None:
    """Standard error √(Σ_{j≠i} R_ij²/s) (Bekas et al. 2007), R from dense algebra."""
    probes = 200
    found = probe_resolution(dense.problem, probes, seed=6)
    resolution = dense.resolution
    diagonal = np.diag(resolution)
    expected = np.sqrt((np.sum(resolution**2, axis=1) - diagonal**2) / probes)
    seen = expected > 1e-6
    score = (found.diagonal.ravel() - diagonal)[seen] / expected[seen]
    assert 0.85 < np.sqrt(np.mean(score**2)) < 1.15
    assert np.abs(score).max() < 5.0


def test_rows_and_columns_are_those_of_the_dense_matrix(dense: DenseAnswers) -> None:
    spreads = point_spread(dense.problem, [(160.0, 160.0, 100.0), (100.0, 180.0, 20.0)])
    for spread in spreads:
        number = np.ravel_multi_index(spread.block, dense.problem.model.grid.shape)
        np.testing.assert_allclose(spread.column.ravel(), dense.resolution[:, number], atol=2e-4)
        np.testing.assert_allclose(spread.row.ravel(), dense.resolution[number], atol=2e-4)


def test_posterior_samples_have_the_dense_mean_and_variance(dense: DenseAnswers) -> None:
    """A variance from n samples has the relative standard error √(2/n) or, here, less."""
    count = 400
    samples = posterior_samples(dense.problem, count, seed=7)
    np.testing.assert_allclose(samples.mean_fractional, dense.mean, atol=2e-5)
    variance = np.diag(dense.block_covariance)
    score = (samples.variance() / variance - 1.0) / np.sqrt(2.0 / count)
    assert np.sqrt(np.mean(score**2)) < 1.15
    assert np.abs(score).max() < 5.0
    off = (samples.fractional - dense.mean).mean(axis=0) / np.sqrt(variance / count)
    assert np.sqrt(np.mean(off**2)) < 1.3


def test_samples_are_correlated_like_the_posterior(dense: DenseAnswers) -> None:
    """Variance of the mean over a region: relative standard error √(2/n)."""
    count = 400
    samples = posterior_samples(dense.problem, count, seed=8)
    region = np.zeros(dense.problem.model.grid.shape)
    region[3:5, 3:5, 2:4] = 1.0 / 8.0
    exact = region.ravel() @ dense.block_covariance @ region.ravel()
    found = np.var(samples.fractional @ region.ravel().astype(np.float32))
    assert abs(found / exact - 1.0) < 4.0 * np.sqrt(2.0 / count)


def test_where_no_ray_runs_the_data_share_is_nothing(dense: DenseAnswers) -> None:
    """Without data the posterior is the prior; the control variate makes that exact."""
    matrix = np.zeros((3, 4))
    matrix[:, 0] = 1.0
    samples = posterior_samples(problem_of_matrix(matrix, (4, 1, 1), prior_std=0.5), 32)
    share = samples.resolution_mask().ravel()
    np.testing.assert_allclose(share[1:], 0.0, atol=1e-6)
    sd = np.sqrt(2.0 / 32)
    exact = 1.0 - 1.0 / (1.0 + 3.0 * 0.25)
    assert abs((1.0 - share[0]) / (1.0 - exact) - 1.0) < 4.0 * sd


def test_noise_repeats_scatter_as_errors_do(dense: DenseAnswers) -> None:
    count = 400
    repeats = noise_repeats(dense.problem, count, seed=9)
    variance = np.diag(dense.noise_covariance)
    found = repeats.factor * np.var(repeats.fractional, axis=0, dtype=np.float64)
    score = (found / variance - 1.0) / np.sqrt(2.0 / count)
    assert np.sqrt(np.mean(score**2)) < 1.2


def test_the_jackknife_of_a_mean() -> None:
    """Standard error of the mean of 1 … 5: 0.7071 (s/√n, textbook)."""
    data = 1e-3 * np.arange(1.0, 6.0)
    problem = problem_of_matrix(np.ones((5, 1)), (1, 1, 1), prior_std=1e3, data=data)
    found = event_jackknife(problem)
    sigma = np.sqrt(found.factor * np.var(found.fractional.astype(np.float64)))
    assert found.count == 5
    assert found.mean_fractional[0] == pytest.approx(3e-3, rel=1e-4)
    assert sigma == pytest.approx(0.7071e-3, rel=1e-3)


def test_the_bootstrap_of_a_mean() -> None:
    """Its variance is Σ(x − x̄)²/(n(n + 1)) (Rubin 1981): 0.5774² for 1 … 5."""
    data = 1e-3 * np.arange(1.0, 6.0)
    problem = problem_of_matrix(np.ones((5, 1)), (1, 1, 1), prior_std=1e3, data=data)
    count = 400
    found = event_bootstrap(problem, count, seed=10)
    sigma = np.sqrt(found.factor * np.var(found.fractional.astype(np.float64)))
    assert sigma == pytest.approx(0.5774e-3, rel=4.0 / np.sqrt(2.0 * count))


def test_jackknife_replicates_are_inversions_without_the_event(dense: DenseAnswers) -> None:
    problem = dense.problem
    found = event_jackknife(problem)
    names = np.unique(problem.rows.event)
    without = problem.with_weights(np.where(problem.rows.event == names[3], 0.0, problem.weights))
    alone = solve(
        without.system,
        without.system.whiten_rows(problem.target_s),
        tolerance=1e-10,
        max_iterations=3000,
    )
    expected = without.system.parameters(alone.white)[0]
    np.testing.assert_allclose(found.fractional[3], expected, atol=3e-5)


@pytest.mark.parametrize("pool", [ThreadPoolExecutor, ProcessPoolExecutor])
def test_results_do_not_depend_on_the_workers(dense: DenseAnswers, pool: type[Executor]) -> None:
    alone = posterior_samples(dense.problem, 40, seed=11)
    with pool(2) as executor:  # type: ignore[call-arg]
        shared = posterior_samples(dense.problem, 40, seed=11, executor=executor)
    np.testing.assert_array_equal(alone.fractional, shared.fractional)


def test_a_prior_mean_moves_every_model_alike(dense: DenseAnswers) -> None:
    """A prior centred elsewhere, the target being relative to it, shifts mean and samples."""
    shift = np.linspace(-0.01, 0.01, dense.problem.model.grid.block_count)
    moved = replace(dense.problem, prior_mean=shift)
    here, there = (posterior_samples(p, 4, seed=12) for p in (dense.problem, moved))
    np.testing.assert_allclose(there.mean_fractional - here.mean_fractional, shift, atol=1e-12)
    np.testing.assert_allclose(
        there.fractional - here.fractional, np.broadcast_to(shift, (4, shift.size)), atol=1e-7
    )


def squares(start: int, stop: int) -> Arrays:
    return {"square": np.arange(start, stop, dtype=np.float64) ** 2}


def test_finished_pieces_are_taken_up_again(tmp_path: Path) -> None:
    kept = Checkpoints(tmp_path, "a")
    run_chunks(squares, 6, size=4, name="s", checkpoints=kept)
    heard: list[tuple[int, int]] = []

    def unfinished(start: int, stop: int) -> Arrays:
        assert start > 0, "a finished piece was done again"
        return squares(start, stop)

    again = run_chunks(
        unfinished,
        10,
        size=4,
        name="s",
        checkpoints=kept,
        progress=lambda done, total: heard.append((done, total)),
    )
    assert heard[0] == (4, 10)
    np.testing.assert_array_equal(again["square"], np.arange(10.0) ** 2)


def test_pieces_of_other_work_or_damaged_ones_are_done_again(tmp_path: Path) -> None:
    run_chunks(squares, 4, size=2, name="s", checkpoints=Checkpoints(tmp_path, "a"))
    heard: list[int] = []
    other = Checkpoints(tmp_path, "b")
    run_chunks(
        squares, 4, size=2, name="s", checkpoints=other, progress=lambda d, _: heard.append(d)
    )
    assert heard[0] == 0
    (tmp_path / "appraise_s_0_2.npz").write_bytes(b"torn")
    heard.clear()
    found = run_chunks(
        squares, 4, size=2, name="s", checkpoints=other, progress=lambda d, _: heard.append(d)
    )
    assert heard[0] == 2
    np.testing.assert_array_equal(found["square"], [0.0, 1.0, 4.0, 9.0])
    other.clear()
    assert not list(tmp_path.glob("*.npz"))


def test_too_few_of_anything_is_refused(dense: DenseAnswers) -> None:
    for call in (posterior_samples, probe_resolution, event_bootstrap, noise_repeats):
        with pytest.raises(InputError, match="at least 2"):
            call(dense.problem, 1)
    with pytest.raises(InputError, match="outside the blocks"):
        point_spread(dense.problem, [(1e4, 0.0, 10.0)])

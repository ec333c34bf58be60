"""Delays adjusted to relative times, against closed forms and plain least squares."""

from __future__ import annotations

import numpy as np
import pytest

from rayloom.residuals.delays import adjust

Pairs = tuple[np.ndarray, np.ndarray]


def every_pair(count: int) -> Pairs:
    first, second = np.triu_indices(count, k=1)
    return first, second


def by_constrained_lstsq(
    first: np.ndarray, second: np.ndarray, delay: np.ndarray, sigma: np.ndarray, count: int
) -> tuple[np.ndarray, np.ndarray]:
    """Solve for times and their covariance by numpy's least squares with the row Σ t = 0 added."""
    rows = np.zeros((len(delay) + 1, count))
    rows[np.arange(len(delay)), first] = 1.0 / sigma
    rows[np.arange(len(delay)), second] = -1.0 / sigma
    rows[-1] = 1.0
    time = np.linalg.lstsq(rows, np.append(delay / sigma, 0.0), rcond=None)[0]
    return time, np.linalg.pinv(rows[:-1].T @ rows[:-1])


def test_three_stations_by_hand() -> None:
    """VanDecar & Crosson (1990), eq. 6: with every pair alike, t_i = Σ_j d_ij / n.

    Delays of +1.0, +2.0 and +3.3 s miss closing by 0.3 s, a third of it on each.
    """
    first, second = every_pair(3)
    delay = np.array([1.0, 3.3, 2.0])  # 0-1, 0-2, 1-2
    found = adjust(first, second, delay, np.full(3, 0.1), 3)
    np.testing.assert_allclose(found.time_s, [4.3 / 3.0, 1.0 / 3.0, -5.3 / 3.0], atol=1e-12)
    np.testing.assert_allclose(found.closure_s, [-0.1, 0.1, -0.1], atol=1e-12)
    assert found.unit_error == pytest.approx(np.sqrt(3.0))
    assert not found.suspected.any()


@pytest.mark.parametrize("count", [4, 9, 30])
def test_every_pair_alike(count: int) -> None:
    """VanDecar & Crosson (1990), eq. 6, and C = σ²/n (I − 11ᵀ/n) for the covariance."""
    random = np.random.default_rng(count)
    first, second = every_pair(count)
    delay = random.normal(0.0, 0.005, len(first))
    found = adjust(first, second, delay, np.full(len(first), 0.01), count)
    table = np.zeros((count, count))
    table[first, second] = delay
    table -= table.T
    np.testing.assert_allclose(found.time_s, table.sum(axis=1) / count, atol=1e-14)
    formal = 0.01 / np.sqrt(count) * np.sqrt(1.0 - 1.0 / count)
    np.testing.assert_allclose(found.error_s, formal * max(found.unit_error, 1.0), rtol=1e-9)


@pytest.mark.parametrize("seed", range(5))
def test_weighted_incomplete_graph(seed: int) -> None:
    """numpy.linalg.lstsq with the constraint as a further row, and the pseudo-inverse."""
    random = np.random.default_rng(seed)
    count = 15
    first, second = every_pair(count)
    chosen = random.uniform(size=len(first)) < 0.4
    chosen |= second == first + 1
    first, second = first[chosen], second[chosen]
    sigma = random.uniform(0.01, 0.2, len(first))
    truth = random.normal(0.0, 1.0, count)
    delay = truth[first] - truth[second] + sigma * random.normal(size=len(first))
    found = adjust(first, second, delay, sigma, count)
    time, covariance = by_constrained_lstsq(first, second, delay, sigma, count)
    np.testing.assert_allclose(found.time_s, time, atol=1e-11)
    errors = np.sqrt(np.diag(covariance)) * max(found.unit_error, 1.0)
    np.testing.assert_allclose(found.error_s, errors, rtol=1e-8)
    assert found.time_s.sum() == pytest.approx(0.0, abs=1e-11)


def test_one_bad_delay_is_named_and_left_out() -> None:
    """Left out, the rest gives what numpy's least squares gives without it."""
    random = np.random.default_rng(3)
    count = 10
    first, second = every_pair(count)
    truth = random.normal(0.0, 1.0, count)
    delay = truth[first] - truth[second] + random.normal(0.0, 0.02, len(first))
    delay[17] += 1.0
    sigma = np.full(len(first), 0.02)
    found = adjust(first, second, delay, sigma, count)
    assert np.flatnonzero(found.suspected).tolist() == [17]
    assert found.closure_s[17] == pytest.approx(1.0, abs=0.1)
    rest = np.arange(len(first)) != 17
    time, _ = by_constrained_lstsq(first[rest], second[rest], delay[rest], sigma[rest], count)
    np.testing.assert_allclose(found.time_s, time, atol=1e-12)


def test_good_delays_are_rarely_suspected() -> None:
    """Normal errors of the stated size exceed 4 sigmas once in 16,000 (tables of the normal)."""
    random = np.random.default_rng(8)
    count = 20
    first, second = every_pair(count)
    suspected = 0
    for _ in range(30):
        delay = random.normal(0.0, 0.05, len(first))
        suspected += int(adjust(first, second, delay, np.full(190, 0.05), count).suspected.sum())
    assert suspected <= 2


def test_errors_hold_in_simulation() -> None:
    """Standard errors equal the scatter of many adjustments (Monte Carlo, 2,000 draws)."""
    random = np.random.default_rng(4)
    first, second = np.array([0, 1, 2, 3, 0, 4]), np.array([1, 2, 3, 0, 2, 3])
    sigma = np.array([0.1, 0.2, 0.1, 0.05, 0.1, 0.3])
    draws = []
    for _ in range(2000):
        draws.append(adjust(first, second, sigma * random.normal(size=6), sigma, 5).time_s)
    _, covariance = by_constrained_lstsq(first, second, np.zeros(6), sigma, 5)
    still = adjust(first, second, np.zeros(6), sigma, 5)
    np.testing.assert_allclose(still.error_s, np.sqrt(np.diag(covariance)), rtol=1e-9)
    np.testing.assert_allclose(np.std(draws, axis=0), still.error_s, rtol=0.08)


def test_parts_that_no_delay_ties() -> None:
    """Each part has zero mean by itself; the larger is part 0."""
    first, second = np.array([0, 3, 4]), np.array([1, 4, 5])
    found = adjust(first, second, np.array([2.0, 1.0, 1.0]), np.full(3, 0.1), 6)
    assert found.part.tolist()[3:] == [0, 0, 0]
    assert found.part[0] == found.part[1] != 0
    assert found.part[2] not in (0, found.part[0])
    np.testing.assert_allclose(found.time_s, [1.0, -1.0, 0.0, 1.0, 0.0, -1.0], atol=1e-12)
    assert np.isnan(found.unit_error)

"""Recordings, noise and outliers of the demo have the announced statistics.

Bounds on sample deviations are 5 standard errors, σ/√(2n) for a normal sample
(any statistics textbook).
"""

from __future__ import annotations

import numpy as np
import pytest

from rayloom.demo.picking import (
    CLASS_SHARES,
    CLASS_UNCERTAINTY_S,
    CYCLE_SKIP,
    GROSS_ERROR,
    NO_OUTLIER,
    draw_errors,
    draw_recordings,
    draw_station_terms_s,
)


@pytest.fixture(scope="module")
def magnitude():
    return np.random.default_rng(2).uniform(5.4, 7.4, 120)


@pytest.fixture(scope="module")
def recordings(magnitude):
    return draw_recordings(magnitude, 60, np.random.default_rng(3))


@pytest.fixture(scope="module")
def errors(recordings):
    return draw_errors(recordings, np.random.default_rng(4))


def test_about_85_percent_of_pairs_are_recorded_once(recordings):
    pairs = np.column_stack([recordings.event_index, recordings.station_index])
    assert len(pairs) == pytest.approx(0.85 * 7200, abs=2)
    assert len(np.unique(pairs, axis=0)) == len(pairs)


def test_large_events_are_recorded_more_widely(recordings, magnitude):
    recorded = np.bincount(recordings.event_index, minlength=120)
    assert recorded[magnitude > 7.0].mean() > recorded[magnitude < 5.8].mean() + 5.0
    assert recorded.min() < 50


def test_classes_have_their_shares_and_follow_clarity(recordings, errors):
    for share, uncertainty_s in zip(CLASS_SHARES, CLASS_UNCERTAINTY_S, strict=True):
        rows = errors.uncertainty_s == uncertainty_s
        assert rows.mean() == pytest.approx(share, abs=1e-3)
    best = recordings.clarity[errors.uncertainty_s == min(CLASS_UNCERTAINTY_S)].mean()
    worst = recordings.clarity[errors.uncertainty_s == max(CLASS_UNCERTAINTY_S)].mean()
    assert best > worst


def test_noise_has_the_stated_deviation(errors):
    assert 0.08 < errors.noise_s.std() < 0.1
    for uncertainty_s in CLASS_UNCERTAINTY_S:
        noise_s = errors.noise_s[errors.uncertainty_s == uncertainty_s]
        bound = 5.0 / np.sqrt(2.0 * noise_s.size)
        assert noise_s.std() == pytest.approx(uncertainty_s, rel=bound)


def test_three_percent_are_outliers_of_0_8_to_4_s(errors):
    out = errors.outlier_kind != NO_OUTLIER
    assert out.mean() == pytest.approx(0.03, abs=1e-3)
    assert np.all(errors.outlier_s[~out] == 0.0)
    size_s = np.abs(errors.outlier_s[out])
    assert size_s.min() >= 0.8
    assert size_s.max() <= 4.0
    assert set(errors.outlier_kind) == {NO_OUTLIER, GROSS_ERROR, CYCLE_SKIP}


def test_cycle_skips_are_whole_periods_and_mostly_late(recordings, errors):
    rows = errors.outlier_kind == CYCLE_SKIP
    assert np.mean(errors.outlier_s[rows] > 0.0) > 0.55
    skips_of = {}
    for event, shift_s in zip(
        recordings.event_index[rows], np.abs(errors.outlier_s[rows]), strict=True
    ):
        skips_of.setdefault(int(event), []).append(shift_s)
    repeated = [np.array(skips) for skips in skips_of.values() if len(skips) > 1]
    assert repeated
    for skips in repeated:
        ratio = skips / skips.min()
        np.testing.assert_allclose(ratio, np.round(ratio), atol=1e-9)


def test_station_terms_have_no_mean():
    terms_s = draw_station_terms_s(2000, np.random.default_rng(8))
    assert abs(terms_s.mean()) < 1e-12
    assert terms_s.std() == pytest.approx(0.1, rel=5.0 / np.sqrt(4000.0))

"""Screens: planted faults are named, and clean surveys give no warning.

The surveys are those of the benchmark ``screening`` (``bench/planted``), whose faults are put
in from outside the screens; sizes are those the screens are asked to find.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from bench.planted.faults import FAULTS, Fault
from bench.planted.survey import clean_survey

from rayloom.residuals import ResidualSettings
from rayloom.residuals.screens import CheckSettings, Finding, by_severity, screen
from rayloom.residuals.screens.nearby import Nearby
from rayloom.residuals.screens.pattern import find_pattern, sigma_of
from rayloom.residuals.screens.robust_fit import robust_fit

NOT_TOLD_APART = "polarity, one side"
"""Half a period always to the same side is no larger than stations differ by nature."""

HARDLY_TOLD = {"station off its neighbours", "station drifts"}
"""Faults that may hide in the natural differences of stations; planted here twice as large."""

TOLD = [fault for fault in FAULTS if fault.name != NOT_TOLD_APART]


def findings_of(fault: Fault, seed: int) -> tuple[list[Finding], str]:
    scale = 2.0 if fault.name in HARDLY_TOLD else 1.0
    random = np.random.default_rng([seed, 47])
    draft, who = fault.plant(clean_survey(seed), random, scale)
    return screen(draft.evidence()), who


@pytest.mark.parametrize("fault", TOLD, ids=lambda fault: fault.name)
def test_planted_fault_is_named(fault: Fault) -> None:
    findings, who = findings_of(fault, 3)
    assert any(fault.named_by(one, who) for one in findings)


@pytest.mark.parametrize("seed", [1, 3, 4])
def test_clean_survey_gives_no_warning(seed: int) -> None:
    findings = screen(clean_survey(seed).evidence())
    assert [one for one in findings if one.severity != "note"] == []


def test_findings_carry_a_number_and_advice() -> None:
    draft = clean_survey(3)
    for number, fault in enumerate(FAULTS[:4]):
        draft, _ = fault.plant(draft, np.random.default_rng(number), 3.0)
    findings = screen(draft.evidence())
    assert len({one.kind for one in findings}) >= 3
    for one in findings:
        assert np.isfinite(one.value)
        assert any(character.isdigit() for character in one.evidence)
        assert one.advice
    assert findings == by_severity(findings)


def test_thresholds_are_obeyed() -> None:
    """A step of 0.6 s is no finding where steps count from 2 s on."""
    fault = next(fault for fault in FAULTS if fault.name == "station steps")
    draft, who = fault.plant(clean_survey(3), np.random.default_rng(1), 2.0)
    evidence = draft.evidence()
    assert any(one.kind == "station_step" and one.who == who for one in screen(evidence))
    lenient = screen(evidence, CheckSettings(step_s=2.0))
    assert not any(one.kind == "station_step" for one in lenient)


def test_period_is_that_of_the_settings() -> None:
    draft = clean_survey(3)
    late_s = np.zeros(len(draft.travel_s))
    late_s[100] = 2.0
    evidence = replace(draft, travel_s=draft.travel_s + late_s).evidence()
    skips = [one for one in screen(evidence, CheckSettings(period_s={"P": 2.0}))]
    assert any(
        one.kind == "cycle_skip" and "a period of 2 s late" in one.evidence for one in skips
    )
    others = screen(evidence, CheckSettings(period_s={"P": 1.3}))
    assert any(one.kind == "outlier" for one in others)


def test_nothing_is_left_out_because_of_a_finding() -> None:
    fault = next(fault for fault in FAULTS if fault.name == "cycle skip, one pick")
    draft, _ = fault.plant(clean_survey(3), np.random.default_rng(1), 1.0)
    evidence = draft.evidence(ResidualSettings())
    screen(evidence)
    assert evidence.kept.all()


def test_few_picks_are_looked_at_without_complaint() -> None:
    draft = clean_survey(3)
    few = draft.select(draft.event_index < 2)
    assert all(isinstance(one, Finding) for one in screen(few.evidence()))


def test_pattern_splits_what_was_added() -> None:
    """Event and station terms of an additive table come back exactly (Tukey 1977)."""
    draft = clean_survey(3)
    random = np.random.default_rng(5)
    event_s = random.normal(0.0, 1.0, len(draft.events))
    station_s = random.normal(0.0, 0.3, len(draft.stations))
    late_s = event_s[draft.event_index] + station_s[draft.station_index]
    pattern = find_pattern(replace(draft, travel_s=draft.predicted_s + late_s).evidence())
    np.testing.assert_allclose(pattern.left_s, 0.0, atol=1e-6)
    found_s = pattern.site_term_s - pattern.site_term_s.mean()
    np.testing.assert_allclose(found_s, station_s - station_s.mean(), atol=1e-6)


def test_neighbouring_rays_expect_smooth_structure() -> None:
    """A delay that varies smoothly over ray positions is expected to a few per cent."""
    draft = clean_survey(3)
    pattern = find_pattern(replace(draft, travel_s=draft.predicted_s).evidence())
    points_km = Nearby(pattern).points_km
    smooth_s = np.sin(points_km[:, 0] / 150.0) * np.cos(points_km[:, 1] / 150.0)
    nearby = Nearby(replace(pattern, left_s=smooth_s))
    assert sigma_of(nearby.surprise_s) < 0.05 * sigma_of(smooth_s)


def test_robust_fit_passes_outliers_by() -> None:
    """Huber (1981): a tenth of gross errors hardly moves the line; without them it is exact."""
    random = np.random.default_rng(2)
    columns = np.column_stack([np.ones(200), random.normal(size=200)])
    exact = robust_fit(columns, columns @ [1.0, -2.0])
    np.testing.assert_allclose(exact.value, [1.0, -2.0], atol=1e-10)
    data = columns @ [1.0, -2.0] + random.normal(0.0, 0.1, 200)
    data[:20] += 5.0
    fit = robust_fit(columns, data)
    np.testing.assert_allclose(fit.value, [1.0, -2.0], atol=0.05)
    plain = np.linalg.lstsq(columns, data, rcond=None)[0]
    assert abs(plain[0] - 1.0) > 5.0 * abs(fit.value[0] - 1.0)


def test_robust_scale_of_normal_numbers() -> None:
    """1.4826 times the median absolute deviation estimates sigma (any textbook)."""
    values = np.random.default_rng(1).normal(3.0, 2.0, 40_001)
    assert sigma_of(values) == pytest.approx(2.0, rel=0.02)

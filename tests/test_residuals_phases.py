"""Residuals of several phases: windows, waves, aliases and phases that do not arrive."""

from __future__ import annotations

import numpy as np
import pytest

from rayloom.earth import PHASES, ReferenceEarth
from rayloom.residuals import Residuals, ResidualSettings, compute_residuals
from rayloom.residuals.settings import USUAL_WINDOWS_DEG
from rayloom.survey import Events, Picks, Stations, Survey

STATION_COUNT = 6
LATE_S = np.array([0.0, 0.3, -0.2, 0.1, 0.4, -0.5])


@pytest.fixture(scope="module")
def earth() -> ReferenceEarth:
    return ReferenceEarth("ak135")


def survey_of(distance_deg: float, phases: list[str], travel_s: float, slope: float) -> Survey:
    """Return picks of one event south of a row of stations on the equator at sea level."""
    stations = Stations(
        network=np.full(STATION_COUNT, "XA"),
        station=np.array([f"S{number}" for number in range(STATION_COUNT)]),
        latitude_deg=np.zeros(STATION_COUNT),
        longitude_deg=distance_deg + 0.5 * np.arange(STATION_COUNT),
        elevation_m=np.zeros(STATION_COUNT),
    )
    events = Events(
        event=["only"],  # type: ignore[arg-type]
        time=np.array(["2021-05-06T07:08:09"], dtype="datetime64[ns]"),
        latitude_deg=np.zeros(1),
        longitude_deg=np.zeros(1),
        depth_km=np.array([100.0]),
    )
    time_s = travel_s + slope * 0.5 * np.arange(STATION_COUNT) + LATE_S
    picks = Picks(
        event_index=np.zeros(STATION_COUNT, dtype=np.int64),
        station_index=np.arange(STATION_COUNT),
        phase=np.array(phases),
        time=events.time[0] + np.round(time_s * 1e9).astype("timedelta64[ns]"),
        uncertainty_s=np.full(STATION_COUNT, 0.1),
    )
    return Survey(stations, events, picks)


def residuals_of(
    earth: ReferenceEarth, phase: str, distance_deg: float, names: list[str] | None = None
) -> Residuals:
    travel_s = float(earth.travel_time(phase, distance_deg, 100.0))
    slope = np.radians(float(earth.ray_parameter(phase, distance_deg, 100.0)))
    names = names or [phase] * STATION_COUNT
    return compute_residuals(survey_of(distance_deg, names, travel_s, slope), earth)


def test_every_phase_has_a_window_in_which_it_arrives(earth: ReferenceEarth) -> None:
    """Nearly throughout for shallow sources; pP of the deepest begins at 36 degrees."""
    assert tuple(USUAL_WINDOWS_DEG) == PHASES
    for phase, (low, high) in USUAL_WINDOWS_DEG.items():
        for depth, share in ((1.0, 1.0), (300.0, 0.95), (700.0, 0.85)):
            times = earth.travel_time(phase, np.linspace(low, high, 50), depth)
            assert np.isfinite(times).mean() >= share, (phase, depth)


@pytest.mark.parametrize(
    ("phase", "distance_deg", "wave"),
    [
        ("Pdiff", 110.0, "P"),
        ("PcP", 50.0, "P"),
        ("PKPdf", 150.0, "P"),
        ("pP", 60.0, "P"),
        ("sP", 60.0, "P"),
        ("ScS", 50.0, "S"),
        ("SKS", 100.0, "S"),
    ],
)
def test_phases_become_residuals_of_their_wave(
    earth: ReferenceEarth, phase: str, distance_deg: float, wave: str
) -> None:
    residuals = residuals_of(earth, phase, distance_deg)
    assert len(residuals.residual_s) == STATION_COUNT
    assert set(residuals.wave.tolist()) == {wave}
    # Times planted along a straight line: the curve's bend over 2.5 degrees stays in.
    relative = residuals.relative_residual_s - (LATE_S - np.median(LATE_S))
    assert np.abs(relative).max() < 0.6


def test_an_alias_joins_the_group_of_its_phase(earth: ReferenceEarth) -> None:
    names = ["PKPdf", "PKIKP"] * 3
    mixed = residuals_of(earth, "PKPdf", 150.0, names)
    plain = residuals_of(earth, "PKPdf", 150.0)
    assert set(mixed.phase.tolist()) == {"PKPdf"}
    np.testing.assert_array_equal(mixed.relative_residual_s, plain.relative_residual_s)


def test_a_phase_that_does_not_arrive_is_left_out_with_its_reason(earth: ReferenceEarth) -> None:
    settings = ResidualSettings(distance_min_deg={"Pdiff": 90.0}, min_picks_per_event=2)
    survey = survey_of(98.0, ["Pdiff"] * STATION_COUNT, 814.0, 4.44)
    excluded = compute_residuals(survey, earth, settings).excluded
    missing = excluded.reason == "no_arrival"
    assert missing.sum() >= 2
    assert "has no Pdiff at 98.00 deg" in excluded.detail[missing][0]


def test_windows_may_be_given_by_an_alias() -> None:
    settings = ResidualSettings(distance_min_deg={"PKIKP": 150.0})
    assert settings.windows_deg["PKPdf"] == (150.0, 180.0)
    assert ResidualSettings.model_validate(settings.model_dump()) == settings


def test_windows_that_reach_too_far_are_told(earth: ReferenceEarth) -> None:
    settings = ResidualSettings(
        distance_min_deg={"SKS": 70.0, "pP": 20.0}, distance_max_deg={"PcP": 85.0}
    )
    survey = survey_of(50.0, ["P"] * STATION_COUNT, 524.0, 7.6)
    notices = compute_residuals(survey, earth, settings).notices
    wide = {notice.who: notice.detail for notice in notices if notice.what == "wide_window"}
    assert set(wide) == {"SKS", "pP", "PcP"}
    assert "SKS arrives after S" in wide["SKS"]
    assert "triplications" in wide["pP"]
    assert "closes up on P" in wide["PcP"]

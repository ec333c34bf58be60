"""Residuals: signs, medians, and every pick accounted for."""

from __future__ import annotations

import pickle

import numpy as np
import pytest

from rayloom.earth import ReferenceEarth
from rayloom.errors import InputError
from rayloom.residuals import Residuals, ResidualSettings, compute_residuals
from rayloom.residuals.groups import group_medians_s, group_numbers
from rayloom.residuals.prediction import pair_geometry, predict
from rayloom.survey import Events, Picks, Stations, Survey

STATION_COUNT = 14
EVENTS = Events(
    event=["south", "deep", "east", "near"],  # type: ignore[arg-type]
    time=np.array(["2019-03-07T04:05:04.506"] * 4, dtype="datetime64[ns]"),
    latitude_deg=np.array([-6.1, 51.8, 20.0, 47.0]),
    longitude_deg=np.array([20.0, 95.0, 70.0, 16.0]),
    depth_km=np.array([12.0, 310.0, 35.0, 10.0]),
)


def stations() -> Stations:
    random = np.random.default_rng(11)
    return Stations(
        network=np.full(STATION_COUNT, "XA"),
        station=np.array([f"S{number:02d}" for number in range(STATION_COUNT)]),
        latitude_deg=random.uniform(38.0, 42.0, STATION_COUNT),
        longitude_deg=random.uniform(8.0, 14.0, STATION_COUNT),
        elevation_m=random.uniform(-3000.0, 3000.0, STATION_COUNT),
        burial_m=np.where(np.arange(STATION_COUNT) == 3, 250.0, 0.0),
    )


@pytest.fixture(scope="module")
def earth() -> ReferenceEarth:
    return ReferenceEarth("ak135")


@pytest.fixture(scope="module")
def planted_s() -> np.ndarray:
    """Delays planted at each event (rows) and station (columns), s."""
    return np.random.default_rng(5).normal(0.4, 0.5, (3, STATION_COUNT))


@pytest.fixture(scope="module")
def survey(earth: ReferenceEarth, planted_s: np.ndarray) -> Survey:
    """Return picks of three distant events with planted delays, and of one at about 8 degrees."""
    table = stations()
    event_index = np.repeat(np.arange(4), STATION_COUNT)
    station_index = np.tile(np.arange(STATION_COUNT), 4)
    phase = np.full(len(event_index), "P")
    geometry = pair_geometry(EVENTS, table, event_index, station_index)
    prediction = predict(
        earth,
        EVENTS,
        table,
        event_index,
        station_index,
        phase,
        geometry,
        ellipticity=True,
        elevation=True,
    )
    travel_s = np.nan_to_num(prediction.total_s, nan=120.0)
    travel_s[: 3 * STATION_COUNT] += planted_s.ravel()
    picks = picks_at(event_index, station_index, phase, travel_s)
    return Survey(table, EVENTS, picks)


def picks_at(
    event_index: np.ndarray, station_index: np.ndarray, phase: np.ndarray, travel_s: np.ndarray
) -> Picks:
    after = np.round(travel_s * 1e9).astype("timedelta64[ns]")
    return Picks(
        event_index=event_index,
        station_index=station_index,
        phase=phase,
        time=EVENTS.time[event_index] + after,
        uncertainty_s=np.full(len(event_index), 0.1),
    )


def with_row(
    survey: Survey, row: int, *, phase: str | None = None, later_s: float = 0.0
) -> Survey:
    """Return the survey with one pick changed."""
    picks = survey.picks
    phases = picks.phase.astype("<U8")
    phases[row] = phase or phases[row]
    time = picks.time.copy()
    time[row] += np.timedelta64(round(later_s * 1e9), "ns")
    changed = Picks(picks.event_index, picks.station_index, phases, time, picks.uncertainty_s)
    return Survey(survey.stations, survey.events, changed)


def names_of(residuals: Residuals) -> list[tuple[str, ...]]:
    frame = residuals.to_frame()
    return list(frame[["event", "network", "station", "phase"]].itertuples(index=False, name=None))


def test_planted_delays_come_back_late_positive(
    survey: Survey, earth: ReferenceEarth, planted_s: np.ndarray
) -> None:
    residuals = compute_residuals(survey, earth)
    np.testing.assert_allclose(residuals.residual_s, planted_s.ravel(), atol=2e-9)
    later = compute_residuals(with_row(survey, 4, later_s=1.25), earth)
    np.testing.assert_allclose(later.residual_s[4] - residuals.residual_s[4], 1.25, atol=2e-9)


def test_relative_residuals_have_zero_median_in_each_group(
    survey: Survey, earth: ReferenceEarth, planted_s: np.ndarray
) -> None:
    residuals = compute_residuals(survey, earth)
    expected = planted_s - np.median(planted_s, axis=1, keepdims=True)
    np.testing.assert_allclose(residuals.relative_residual_s, expected.ravel(), atol=4e-9)


def test_event_at_ten_degrees_is_left_out_with_reason(
    survey: Survey, earth: ReferenceEarth
) -> None:
    residuals = compute_residuals(survey, earth)
    assert residuals.excluded.event.tolist() == ["near"] * STATION_COUNT
    assert set(residuals.excluded.reason.tolist()) == {"outside_distance_window"}
    assert "P is used from 28 to 95 deg" in residuals.excluded.detail[0]
    lost = [notice for notice in residuals.notices if notice.what == "event_left_out"]
    assert [notice.who for notice in lost] == ["near"]
    assert f"all {STATION_COUNT} picks" in lost[0].detail


def test_every_pick_is_used_or_excluded_once(survey: Survey, earth: ReferenceEarth) -> None:
    odd = with_row(with_row(with_row(survey, 3, phase="Lg"), 20, later_s=9.0), 30, later_s=-7.0)
    residuals = compute_residuals(odd, earth)
    left_out = residuals.excluded.to_frame()
    told = names_of(residuals) + list(
        left_out[["event", "network", "station", "phase"]].itertuples(index=False, name=None)
    )
    picks = odd.picks.to_frame(odd.stations, odd.events)
    asked = picks[["event", "network", "station", "phase"]].itertuples(index=False, name=None)
    assert sorted(told) == sorted(asked)
    assert residuals.excluded.counts() == {
        "outside_distance_window": STATION_COUNT,
        "gross_residual": 2,
        "unknown_phase": 1,
    }
    gross = left_out[left_out.reason == "gross_residual"]
    assert gross.detail.str.contains("max_residual_s is 5 s").all()


def test_small_groups_are_left_out(survey: Survey, earth: ReferenceEarth) -> None:
    rows = np.r_[0:4, STATION_COUNT : 2 * STATION_COUNT]
    few = Survey(survey.stations, survey.events, survey.picks.select(rows))
    residuals = compute_residuals(few, earth)
    assert residuals.excluded.counts() == {"too_few_picks": 4}
    assert "4 picks left" in residuals.excluded.detail[0]
    kept = compute_residuals(few, earth, ResidualSettings(min_picks_per_event=4))
    assert len(kept.excluded) == 0


def test_group_that_falls_short_after_gross_errors_is_left_out(
    survey: Survey, earth: ReferenceEarth
) -> None:
    rows = np.r_[0:5, STATION_COUNT : 2 * STATION_COUNT]
    few = Survey(survey.stations, survey.events, survey.picks.select(rows))
    residuals = compute_residuals(with_row(few, 2, later_s=30.0), earth)
    assert residuals.excluded.counts() == {"too_few_picks": 4, "gross_residual": 1}


def test_of_conflicting_picks_the_closer_is_used(survey: Survey, earth: ReferenceEarth) -> None:
    rows = np.r_[0 : 3 * STATION_COUNT, 7]
    twice = Survey(survey.stations, survey.events, survey.picks.select(rows))
    plain = compute_residuals(
        Survey(survey.stations, survey.events, survey.picks.select(rows[:-1])), earth
    )
    for row in (7, 3 * STATION_COUNT):
        residuals = compute_residuals(with_row(twice, row, later_s=4.0), earth)
        assert residuals.excluded.reason.tolist() == ["conflicting_rows"]
        assert sorted(names_of(residuals)) == sorted(names_of(plain))
        np.testing.assert_allclose(
            np.sort(residuals.residual_s), np.sort(plain.residual_s), atol=1e-12
        )


def test_order_of_picks_does_not_matter(survey: Survey, earth: ReferenceEarth) -> None:
    order = np.random.default_rng(3).permutation(len(survey.picks))
    shuffled = Survey(survey.stations, survey.events, survey.picks.select(order))
    one, other = compute_residuals(survey, earth), compute_residuals(shuffled, earth)
    by_name = dict(zip(names_of(other), other.relative_residual_s, strict=True))
    np.testing.assert_array_equal(
        [by_name[name] for name in names_of(one)], one.relative_residual_s
    )


def test_nothing_left_is_an_error_that_says_why(survey: Survey, earth: ReferenceEarth) -> None:
    near = Survey(
        survey.stations, survey.events, survey.picks.select(survey.picks.event_index == 3)
    )
    with pytest.raises(InputError, match=r"no pick is left.*outside_distance_window.*near"):
        compute_residuals(near, earth)
    none = Survey(survey.stations, survey.events, survey.picks.select(np.arange(0)))
    with pytest.raises(InputError, match="there are no picks"):
        compute_residuals(none, earth)


def test_corrections_can_be_switched_off_one_by_one(survey: Survey, earth: ReferenceEarth) -> None:
    full = compute_residuals(survey, earth)
    flat = compute_residuals(survey, earth, ResidualSettings(elevation=False))
    ball = compute_residuals(survey, earth, ResidualSettings(ellipticity=False))
    np.testing.assert_allclose(full.predicted_s - flat.predicted_s, full.elevation_s, atol=1e-9)
    np.testing.assert_allclose(full.predicted_s - ball.predicted_s, full.ellipticity_s, atol=1e-9)
    assert not flat.elevation_s.any()
    assert not ball.ellipticity_s.any()


def test_elevation_delays_high_stations_and_burial_lessens_it(
    survey: Survey, earth: ReferenceEarth
) -> None:
    """0.15-0.17 s per km at 30-90 degrees: the elevation formula at v = 5.8 km/s."""
    residuals = compute_residuals(survey, earth)
    height_km = -residuals.stations.depth_km[residuals.station_index]
    per_km = residuals.elevation_s / height_km
    assert per_km.min() > 0.150
    assert per_km.max() < 0.170


def test_select_takes_medians_anew(survey: Survey, earth: ReferenceEarth) -> None:
    residuals = compute_residuals(survey, earth)
    part = residuals.select(residuals.station_index < 5)
    assert len(part) == 15
    for event in range(3):
        values = part.residual_s[part.event_index == event]
        np.testing.assert_allclose(
            part.relative_residual_s[part.event_index == event], values - np.median(values)
        )
    np.testing.assert_array_equal(part.group_index, np.repeat([0, 1, 2], 5))


def test_residuals_can_be_pickled(survey: Survey, earth: ReferenceEarth) -> None:
    residuals = compute_residuals(survey, earth)
    copy = pickle.loads(pickle.dumps(residuals))
    np.testing.assert_array_equal(copy.residual_s, residuals.residual_s)


def test_grouped_medians_equal_those_taken_one_by_one() -> None:
    random = np.random.default_rng(8)
    event, phase = random.integers(0, 9, 200), random.choice(["P", "S"], 200)
    values = random.normal(size=200)
    group = group_numbers(event, phase)
    medians = group_medians_s(values, group)
    for number in range(group.max() + 1):
        mine = group == number
        assert len(set(zip(event[mine].tolist(), phase[mine].tolist(), strict=True))) == 1
        assert medians[number] == np.median(values[mine])


def test_windows_merge_with_the_usual_ones_and_warn_when_wide(
    survey: Survey, earth: ReferenceEarth
) -> None:
    settings = ResidualSettings(distance_min_deg={"P": 20.0}, distance_max_deg={"S": 85.0})
    assert settings.windows_deg["P"] == (20.0, 95.0)
    assert settings.windows_deg["S"] == (28.0, 85.0)
    assert settings.windows_deg["PKPdf"] == (120.0, 180.0)
    notices = compute_residuals(survey, earth, settings).notices
    wide = [notice.detail for notice in notices if notice.what == "wide_window"]
    assert len(wide) == 2
    assert "triplications" in wide[0]
    assert "SKS arrives before S" in wide[1]


@pytest.mark.parametrize(
    ("given", "words"),
    [
        ({"distance_min_deg": {"P": 96.0}}, "window of P is empty"),
        ({"distance_max_deg": {"Q": 90.0}}, "phase 'Q' is not known"),
        ({"min_picks_per_event": 1}, "greater than or equal to 2"),
        ({"max_residual_s": 0.0}, "greater than 0"),
        ({"max_residual": 3.0}, "Extra inputs"),
    ],
)
def test_settings_refuse_what_makes_no_sense(given: dict[str, object], words: str) -> None:
    with pytest.raises(ValueError, match=words):
        ResidualSettings.model_validate(given)

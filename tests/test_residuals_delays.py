"""Delays between stations: reading, residuals, what is left out."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from rayloom.earth import ReferenceEarth
from rayloom.errors import FileProblemsError
from rayloom.residuals import Residuals, ResidualSettings, compute_residuals
from rayloom.residuals.delays import (
    compute_delay_residuals,
    read_delays,
    relative_times,
    residuals_of_delays,
)
from rayloom.survey import Events, Picks, Stations, Survey, SurveySettings

COUNT = 9
HEADER = "event,network_a,station_a,network_b,station_b,delay_s"

Rows = list[tuple[str, int, int, float]]


@pytest.fixture(scope="module")
def earth() -> ReferenceEarth:
    return ReferenceEarth("ak135")


@pytest.fixture(scope="module")
def survey(earth: ReferenceEarth) -> Survey:
    """Nine stations, two events, every arrival late or early by up to half a second."""
    random = np.random.default_rng(6)
    stations = Stations(
        network=np.full(COUNT, "XA"),
        station=np.array([f"S{number}" for number in range(COUNT)]),
        latitude_deg=random.uniform(38.0, 42.0, COUNT),
        longitude_deg=random.uniform(8.0, 14.0, COUNT),
        elevation_m=random.uniform(0.0, 2000.0, COUNT),
    )
    events = Events(
        event=np.array(["south", "east"]),
        time=np.array(["2019-03-07T04:05:04", "2019-04-01T10:00:00"], dtype="datetime64[ns]"),
        latitude_deg=np.array([-6.1, 20.0]),
        longitude_deg=np.array([20.0, 70.0]),
        depth_km=np.array([12.0, 35.0]),
    )
    event, station = (index.ravel() for index in np.indices((2, COUNT)))
    phase = np.full(len(event), "P")
    start = Picks(event, station, phase, events.time[event], np.full(len(event), 0.1))
    late_s = 400.0 + random.uniform(-0.5, 0.5, len(event))
    arrival = start.time + np.round(late_s * 1e9).astype("timedelta64[ns]")
    rough = Survey(stations, events, Picks(event, station, phase, arrival, start.uncertainty_s))
    predicted_s = compute_residuals(rough, earth, ResidualSettings(max_residual_s=1e4)).predicted_s
    arrival = start.time + np.round((predicted_s + late_s - 400.0) * 1e9).astype("timedelta64[ns]")
    return Survey(stations, events, Picks(event, station, phase, arrival, start.uncertainty_s))


def every_delay(survey: Survey) -> Rows:
    """Differences of the arrival times of each event, pair by pair."""
    picks = survey.picks
    rows: Rows = []
    for number, event in enumerate(survey.events.event.tolist()):
        times = picks.time[picks.event_index == number]
        for a, b in zip(*np.triu_indices(COUNT, k=1), strict=True):
            rows.append((event, int(a), int(b), float((times[a] - times[b]).astype(float) * 1e-9)))
    return rows


def write(
    path: Path, rows: Rows, uncertainty: str = "0.05", column: str = "uncertainty_s"
) -> Path:
    lines = [f"{HEADER},{column}"]
    lines += [f"{event},XA,S{a},XA,S{b},{delay:.9f},{uncertainty}" for event, a, b, delay in rows]
    path.write_text("\n".join(lines) + "\n")
    return path


def relative(data: Residuals) -> dict[tuple[int, int], float]:
    keys = zip(data.event_index.tolist(), data.station_index.tolist(), strict=True)
    return dict(zip(keys, data.relative_residual_s.tolist(), strict=True))


def test_residuals_equal_those_of_the_picks(
    survey: Survey, earth: ReferenceEarth, tmp_path: Path
) -> None:
    """Delays are differences of picks, so both give the same relative residuals."""
    path = write(tmp_path / "delays.csv", every_delay(survey))
    data = compute_delay_residuals(path, survey.stations, survey.events, earth)
    wanted = relative(compute_residuals(survey, earth))
    found = relative(data)
    assert found.keys() == wanted.keys()
    for key, value in wanted.items():
        assert found[key] == pytest.approx(value, abs=1e-6)
    assert np.abs(data.residual_s).max() < 2.0
    formal = 0.05 / np.sqrt(COUNT) * np.sqrt(1.0 - 1.0 / COUNT)
    np.testing.assert_allclose(data.uncertainty_s, formal, rtol=1e-6)


def test_swapping_a_and_b_turns_the_sign(survey: Survey, tmp_path: Path) -> None:
    rows = every_delay(survey)
    turned = [(event, b, a, -delay) for event, a, b, delay in rows]
    times = [
        relative_times(
            read_delays(write(tmp_path / "d.csv", some), survey.stations, survey.events)
        ).time_s
        for some in (rows, turned)
    ]
    np.testing.assert_allclose(times[0], times[1], atol=1e-9)


def test_wrong_delay_is_named(survey: Survey, earth: ReferenceEarth, tmp_path: Path) -> None:
    rows = every_delay(survey)
    event, a, b, delay = rows[5]
    rows[5] = (event, a, b, delay + 1.5)
    path = write(tmp_path / "delays.csv", rows)
    data = compute_delay_residuals(path, survey.stations, survey.events, earth)
    suspects = [one for one in data.notices if one.what == "suspected_delay"]
    assert len(suspects) == 1
    assert f"XA.S{a} minus XA.S{b}" in suspects[0].detail
    assert "+1.500 s off" in suspects[0].detail
    wanted = relative(compute_residuals(survey, earth))
    for key, value in relative(data).items():
        assert value == pytest.approx(wanted[key], abs=1e-6)


def test_stations_not_tied_are_explained(
    survey: Survey, earth: ReferenceEarth, tmp_path: Path
) -> None:
    """Stations 7 and 8 of the first event are tied to each other only."""
    rows = [
        row for row in every_delay(survey) if row[0] != "south" or (row[1] >= 7) == (row[2] >= 7)
    ]
    path = write(tmp_path / "delays.csv", rows)
    data = compute_delay_residuals(path, survey.stations, survey.events, earth)
    assert data.excluded.reason.tolist() == ["not_tied", "not_tied"]
    assert data.excluded.station.tolist() == ["S7", "S8"]
    assert "2 stations" in data.excluded.detail[0]
    assert "7 stations" in data.excluded.detail[0]
    assert len(data) == 2 * COUNT - 2


def test_quality_classes_become_seconds(survey: Survey, tmp_path: Path) -> None:
    path = write(tmp_path / "d.csv", every_delay(survey), "A", "quality")
    settings = SurveySettings(quality_uncertainty_s={"A": 0.02})
    delays = read_delays(path, survey.stations, survey.events, settings=settings)
    assert set(delays.uncertainty_s.tolist()) == {0.02}


def test_faults_of_the_file_are_told_by_line(survey: Survey, tmp_path: Path) -> None:
    path = tmp_path / "delays.csv"
    path.write_text(
        f"{HEADER},uncertainty_s\n"
        "south,XA,S1,XA,S1,0.2,0.1\n"
        "south,XA,S1,XA,NONE,0.2,0.1\n"
        "north,XA,S1,XA,S2,later,0.1\n"
    )
    with pytest.raises(FileProblemsError) as caught:
        read_delays(path, survey.stations, survey.events)
    text = str(caught.value)
    assert "line 2, a delay of XA.S1 against itself" in text
    assert "XA.NONE" in text
    assert "line 4, column delay_s: 'later'" in text
    assert "'north'" in text


def test_missing_column_is_named(survey: Survey, tmp_path: Path) -> None:
    path = tmp_path / "delays.csv"
    path.write_text(
        "event,network_a,station_a,network_b,delay_s,uncertainty_s\nsouth,XA,S1,XA,0.1,0.1\n"
    )
    with pytest.raises(FileProblemsError, match="column station_b is missing"):
        read_delays(path, survey.stations, survey.events)


def test_tables_of_times_and_delays(survey: Survey, earth: ReferenceEarth, tmp_path: Path) -> None:
    delays = read_delays(
        write(tmp_path / "d.csv", every_delay(survey)), survey.stations, survey.events
    )
    times = relative_times(delays)
    frame = times.to_frame(survey.stations, survey.events)
    assert len(frame) == 2 * COUNT
    assert frame["delays"].eq(COUNT - 1).all()
    assert frame["closure_s"].abs().max() < 1e-8
    assert len(times.delays_frame(survey.stations, survey.events)) == len(delays)
    assert len(residuals_of_delays(times, survey.stations, survey.events, earth)) == 2 * COUNT

"""Readers of stations, events and picks: what comes out of good files."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from rayloom.survey import (
    Events,
    Picks,
    Stations,
    SurveySettings,
    read_events,
    read_picks,
    read_stations,
    read_survey,
)

STATIONS = (
    "network,station,latitude,longitude,elevation_m,burial_m,start,end,site\n"
    "XA,ALP,10.5,350.25,1200,5,2019-01-01,2020-01-01,old vault\n"
    'XA,ALP,10.6,-9.5,1210,,2020-01-01T00:00:00Z,,"hill, new vault"\n'
    "XB,SEA,11,20,-4000,0,,2599-12-31T23:59:59,\n"
)
EVENTS = (
    "event,time,latitude,longitude,depth_km,magnitude\n"
    "e1,2019-03-07T04:05:04.506Z,-6.1,-79.0,0.5,\n"
    "e2,2021-08-12 03:47:00.509123456,-18,181.95,522,7.1\n"
    "e3,2021-08-12T05:47:00.5+02:00,-18,179,0,5\n"
)
PICKS = (
    "event,network,station,phase,time,uncertainty_s\n"
    "e1,XA,ALP,P,2019-03-07T04:17:57.63Z,0.05\n"
    "e2,XA,ALP,P,2021-08-12T03:57:57.63Z,\n"
    "e2,XB,SEA,S,2021-08-12T04:07:57.63Z,0.3\n"
)


def written(folder: Path, name: str, content: str | bytes) -> Path:
    path = folder / name
    path.write_bytes(content.encode() if isinstance(content, str) else content)
    return path


@pytest.fixture
def stations(tmp_path: Path) -> Stations:
    return read_stations(written(tmp_path, "stations.csv", STATIONS))


@pytest.fixture
def events(tmp_path: Path) -> Events:
    return read_events(written(tmp_path, "events.csv", EVENTS))


def test_station_columns_come_out_typed(stations: Stations) -> None:
    assert stations.network.tolist() == ["XA", "XA", "XB"]
    assert stations.labels.tolist() == ["XA.ALP", "XA.ALP", "XB.SEA"]
    np.testing.assert_array_equal(stations.latitude_deg, [10.5, 10.6, 11.0])
    np.testing.assert_array_equal(stations.longitude_deg, [-9.75, -9.5, 20.0])
    np.testing.assert_allclose(stations.depth_km, [-1.195, -1.21, 4.0])
    assert str(stations.start[0]) == "2019-01-01T00:00:00.000000000"
    np.testing.assert_array_equal(np.isnat(stations.start), [False, False, True])
    np.testing.assert_array_equal(np.isnat(stations.end), [False, True, True])


def test_event_times_keep_nanoseconds_and_zones_turn_to_utc(events: Events) -> None:
    assert [str(time) for time in events.time] == [
        "2019-03-07T04:05:04.506000000",
        "2021-08-12T03:47:00.509123456",
        "2021-08-12T03:47:00.500000000",
    ]
    np.testing.assert_allclose(events.longitude_deg, [-79.0, -178.05, 179.0])
    np.testing.assert_array_equal(events.magnitude, [np.nan, 7.1, 5.0])


def test_picks_point_at_event_and_epoch(
    tmp_path: Path, stations: Stations, events: Events
) -> None:
    picks = read_picks(written(tmp_path, "picks.csv", PICKS), stations, events)
    np.testing.assert_array_equal(picks.event_index, [0, 1, 1])
    np.testing.assert_array_equal(picks.station_index, [0, 1, 2])
    np.testing.assert_array_equal(picks.uncertainty_s, [0.05, 0.1, 0.3])
    assert picks.phase.tolist() == ["P", "P", "S"]


def test_survey_counts_defaults_and_idle_events(tmp_path: Path) -> None:
    survey = read_survey(
        stations=written(tmp_path, "stations.csv", STATIONS),
        events=written(tmp_path, "events.csv", EVENTS),
        picks=written(tmp_path, "picks.csv", PICKS),
        settings=SurveySettings(default_uncertainty_s=0.2),
    )
    assert survey.picks.uncertainty_s[1] == 0.2
    remarks = {notice.what: notice for notice in survey.notices}
    assert "1 of 3 rows" in remarks["default_uncertainty"].detail
    assert "0.2 s" in remarks["default_uncertainty"].detail
    assert "1 of 3 events have no pick (e3)" in remarks["event_without_picks"].detail


@pytest.mark.parametrize(
    "disguise",
    [
        lambda text: b"\xef\xbb\xbf" + text.encode(),
        lambda text: text.replace("\n", "\r\n").encode(),
        lambda text: text.replace("\n", "\r").encode(),
        lambda text: text.rstrip("\n").encode(),
        lambda text: text.replace("\n", "\n\n,,,,,,,,\n").encode(),
        lambda text: text.replace(",", " , ").replace("hill , new", "hill, new").encode(),
        lambda text: text.replace("network,station,latitude", "Network,STATION,Latitude").encode(),
    ],
    ids=["bom", "crlf", "cr", "no-last-newline", "blank-rows", "padded", "capitals"],
)
def test_spreadsheet_habits_change_nothing(
    tmp_path: Path, stations: Stations, disguise: object
) -> None:
    text = STATIONS.replace('"hill, new vault"', "hill")
    other = read_stations(written(tmp_path, "other.csv", disguise(text)))  # type: ignore[operator]
    for name in Stations.column_names():
        np.testing.assert_array_equal(getattr(other, name), getattr(stations, name))


def test_quality_classes_become_seconds(
    tmp_path: Path, stations: Stations, events: Events
) -> None:
    text = (
        "event,network,station,phase,time,quality\n"
        "e1,XA,ALP,P,2019-03-07T04:17:57.63Z,A\n"
        "e2,XA,ALP,P,2021-08-12T03:57:57.63Z,B\n"
        "e2,XB,SEA,S,2021-08-12T04:07:57.63Z,\n"
    )
    settings = SurveySettings(quality_uncertainty_s={"A": 0.03, "B": 0.25})
    path = written(tmp_path, "picks.csv", text)
    picks = read_picks(path, stations, events, settings=settings)
    np.testing.assert_array_equal(picks.uncertainty_s, [0.03, 0.25, 0.1])


def test_stated_uncertainty_goes_before_quality(
    tmp_path: Path, stations: Stations, events: Events
) -> None:
    text = (
        "event,network,station,phase,time,quality,uncertainty_s\n"
        "e1,XA,ALP,P,2019-03-07T04:17:57.63Z,unheard-of,0.07\n"
        "e2,XA,ALP,P,2021-08-12T03:57:57.63Z,A,\n"
    )
    settings = SurveySettings(quality_uncertainty_s={"A": 0.03})
    path = written(tmp_path, "picks.csv", text)
    picks = read_picks(path, stations, events, settings=settings)
    np.testing.assert_array_equal(picks.uncertainty_s, [0.07, 0.03])


def test_frames_go_there_and_back(tmp_path: Path, stations: Stations, events: Events) -> None:
    picks = read_picks(written(tmp_path, "picks.csv", PICKS), stations, events)
    for table, back in (
        (stations, Stations.from_frame(stations.to_frame())),
        (events, Events.from_frame(events.to_frame())),
        (picks, Picks.from_frame(picks.to_frame(stations, events), stations, events)),
    ):
        for name in table.column_names():
            np.testing.assert_array_equal(getattr(back, name), getattr(table, name))


def test_frames_keep_times_at_midnight(events: Events) -> None:
    """By itself pandas writes a column of midnights as days."""
    midnight = np.array(["2019-03-07", "2019-03-08", "2019-03-09"], dtype="datetime64[ns]")
    frame = events.to_frame().assign(time=midnight)
    np.testing.assert_array_equal(Events.from_frame(frame).time, midnight)


def test_tables_are_read_only_and_select_rows(stations: Stations) -> None:
    with pytest.raises(ValueError, match="read-only"):
        stations.latitude_deg[0] = 0.0
    assert stations.select(stations.network == "XB").station.tolist() == ["SEA"]
    assert len(stations.select(np.array([2, 0]))) == 2

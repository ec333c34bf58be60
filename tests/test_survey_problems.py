"""Readers of stations, events and picks: what bad files are told."""

from __future__ import annotations

from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from rayloom.errors import FileAccessError, FileProblemsError, InputError, RayloomError
from rayloom.survey import (
    Events,
    Notice,
    Picks,
    Stations,
    SurveySettings,
    read_events,
    read_picks,
    read_stations,
)

STATION_HEAD = "network,station,latitude,longitude,elevation_m\n"
EVENT_HEAD = "event,time,latitude,longitude,depth_km\n"
PICK_HEAD = "event,network,station,phase,time,uncertainty_s\n"
STATIONS = STATION_HEAD + "XA,ALP,10.5,20.5,1200\nXA,BET,10.6,20.6,1200\nXB,SEA,11,20,-4000\n"
EVENTS = EVENT_HEAD + "e1,2019-03-07T04:05:00Z,-6,-79,10\ne2,2019-03-08T04:05:00Z,-6,-79,10\n"


def written(folder: Path, content: str | bytes, name: str = "table.csv") -> Path:
    path = folder / name
    path.write_bytes(content.encode() if isinstance(content, str) else content)
    return path


def station_problems(folder: Path, content: str | bytes) -> tuple[str, ...]:
    with pytest.raises(FileProblemsError) as caught:
        read_stations(written(folder, content))
    assert str(caught.value).startswith(str(folder / "table.csv"))
    return caught.value.problems


def event_problems(folder: Path, content: str) -> tuple[str, ...]:
    with pytest.raises(FileProblemsError) as caught:
        read_events(written(folder, content))
    return caught.value.problems


def picks_of(folder: Path, content: str, notices: list[Notice] | None = None) -> Picks:
    stations = read_stations(written(folder, STATIONS, "stations.csv"))
    events = read_events(written(folder, EVENTS, "events.csv"))
    return read_picks(written(folder, content), stations, events, notices=notices)


def pick_problems(folder: Path, content: str) -> tuple[str, ...]:
    with pytest.raises(FileProblemsError) as caught:
        picks_of(folder, content)
    return caught.value.problems


@pytest.mark.parametrize(
    ("row", "column", "value", "expected"),
    [
        ("XA,ALP,ten,20,0", "latitude", "'ten'", "-90 to 90 degrees north"),
        ("XA,ALP,95,20,0", "latitude", "'95'", "-90 to 90 degrees north (latitude and longitude"),
        ("XA,ALP,10,400,0", "longitude", "'400'", "-180 to 360 degrees east"),
        ("XA,ALP,nan,20,0", "latitude", "'nan'", "a number"),
        ("XA,ALP,10,-inf,0", "longitude", "'-inf'", "a number"),
        ("XA,ALP,10,20,1e999", "elevation_m", "'1e999'", "a number"),
        ("XA,ALP,10,20,99999", "elevation_m", "'99999'", "-11000 to 9000 m"),
        ("XA,ALP,,20,0", "latitude", "blank", "a number"),
        ("XA,,10,20,0", "station", "blank", "a code"),
        ("XA,ALP,1_0,20,0", "latitude", "'1_0'", "a number"),
        ('XA,ALP,"10,5",20,0', "latitude", "'10,5'", "decimal sign as a point"),
    ],
)
def test_bad_station_cell_is_named(
    tmp_path: Path, row: str, column: str, value: str, expected: str
) -> None:
    problems = station_problems(tmp_path, f"{STATION_HEAD}XA,OK,1,2,3\n{row}\n")
    assert len(problems) == 1
    assert problems[0].startswith(f"line 3, column {column}: {value}; expected")
    assert expected in problems[0] or "blank" in problems[0]


@pytest.mark.parametrize(
    ("row", "column"),
    [
        ("e1,yesterday,1,2,3", "time"),
        ("e1,2019-13-07T04:05:06Z,1,2,3", "time"),
        ("e1,2019-03-07,1,2,3", "time"),
        ("e1,3019-03-07T04:05:06Z,1,2,3", "time"),
        ("e1,1552,1,2,3", "time"),
        ("e1,2019-03-07T04:05:06+99:99,1,2,3", "time"),
        ("e1,2019-03-07T04:05:06Z,1,2,33000", "depth_km"),
        ("e1,2019-03-07T04:05:06Z,1,2,-3", "depth_km"),
    ],
)
def test_bad_event_cell_is_named(tmp_path: Path, row: str, column: str) -> None:
    problems = event_problems(tmp_path, f"{EVENT_HEAD}{row}\n")
    assert len(problems) == 1
    assert problems[0].startswith(
        f"line 2, column {column}: {row.split(',')[1 if column == 'time' else 4]!r}"
    )
    assert "expected" in problems[0]


@pytest.mark.parametrize("code", ["A" * 65, '"A\nB"', "A\x07"])
def test_codes_are_short_and_printable(tmp_path: Path, code: str) -> None:
    problems = station_problems(tmp_path, f"{STATION_HEAD}XA,{code},10,20,0\n")
    assert problems[0].startswith("line 2, column station: 'A")
    assert "64 printable characters" in problems[0]


def test_all_problems_of_a_file_come_at_once_in_line_order(tmp_path: Path) -> None:
    text = STATION_HEAD + "XA,A,ten,20,0\nXA,B,1,2\nXA,C,1,999,x\nXA,D,1,2,3,4\n"
    problems = station_problems(tmp_path, text)
    assert [problem.split(",")[0].split(":")[0] for problem in problems] == [
        "line 2",
        "line 3",
        "line 4",
        "line 4",
        "line 5",
    ]
    assert "4 cells where the header names 5 columns" in problems[1]


def test_missing_columns_are_listed_with_a_guess(tmp_path: Path) -> None:
    problems = station_problems(tmp_path, "network,stn,lat,longitude,elevation\nXA,A,1,2,x\n")
    assert len(problems) == 3
    assert "column station is missing; did you mean 'station' by 'stn'?" in problems[0]
    assert "did you mean 'latitude' by 'lat'?" in problems[1]
    assert "did you mean 'elevation_m' by 'elevation'?" in problems[2]


def test_misspelt_optional_column_is_remarked(tmp_path: Path) -> None:
    notices: list[Notice] = []
    text = STATION_HEAD.strip() + ",burial\nXA,A,1,2,3,400\n"
    read_stations(written(tmp_path, text), notices=notices)
    assert "is not used; did you mean 'burial_m'?" in notices[0].detail


@pytest.mark.parametrize(
    ("content", "words"),
    [
        (b"", "the file is empty"),
        (b" \n\n", "the file is empty"),
        (b"\xef\xbb\xbf", "the file is empty"),
        (b"network,station,latitude,longitude,elevation_m\n", "no rows"),
        (b"PK\x03\x04 whatever", "spreadsheet"),
        (b"network,station\n\x00\x01\x02", "line 2, a zero byte: the file is binary"),
        ("network,station\n".encode("utf-16"), "UTF-16"),
        (b"network,station\nXA,B\xe4R\n", "line 2, byte 0xE4 at position 5 is not UTF-8"),
        (b"network;station;latitude\nXA;B;1\n", "separated by semicolons; expected commas"),
        (b"network\tstation\nXA\tB\n", "separated by tabs"),
        (b"Net|Station|Latitude\nXA|B|1\n", "separated by vertical bars"),
        (b"#Network|Station|Latitude\nXA|B|1\n", "column longitude is missing"),
        (b'<?xml version="1.0"?>\n<a/>\n', "the file is XML"),
        (STATION_HEAD.encode() + b'XA,"ALP,1,2,3\nXA,B,1,2,3\n', "a quotation mark left open"),
        (b"network,network,station\nXA,XB,C\n", "column network stands 2 times"),
    ],
)
def test_files_of_another_kind_are_recognised(tmp_path: Path, content: bytes, words: str) -> None:
    assert any(words in problem for problem in station_problems(tmp_path, content))


def test_lines_count_through_quoted_line_breaks(tmp_path: Path) -> None:
    text = STATION_HEAD.strip() + ',site\nXA,A,1,2,3,"two\nlines"\n\nXA,B,x,2,3,\n'
    assert station_problems(tmp_path, text)[0].startswith("line 5, column latitude: 'x'")


def test_absent_file_and_folder_are_told(tmp_path: Path) -> None:
    with pytest.raises(FileAccessError, match="cannot be read"):
        read_stations(tmp_path / "absent.csv")
    with pytest.raises(FileAccessError, match="the folder is empty"):
        read_stations(tmp_path)
    with pytest.raises(FileAccessError, match="not a file name"):
        read_stations("nul\0name")


def test_repeated_station_is_joined_and_moved_one_is_a_problem(tmp_path: Path) -> None:
    notices: list[Notice] = []
    again = STATION_HEAD + "XA,A,1,2,3\nXA,B,1,2,3\nXA,A,1.0,2,3\n"
    assert len(read_stations(written(tmp_path, again), notices=notices)) == 2
    assert "XA.A 2 and 4" in notices[0].detail
    problems = station_problems(tmp_path, STATION_HEAD + "XA,A,1,2,3\nXA,A,1.1,2,3\n")
    assert problems[0].startswith("line 3, station XA.A: stands at another position in line 2")


def test_epochs_join_split_and_collide(tmp_path: Path) -> None:
    head = STATION_HEAD.strip() + ",start,end\n"
    text = head + (
        "XA,A,1,2,3,2010-01-01,2011-01-01\n"
        "XA,A,1,2,3,2010-06-01,2012-01-01\n"
        "XA,A,5,2,3,2012-01-01,\n"
    )
    stations = read_stations(written(tmp_path, text))
    assert [str(end)[:10] for end in stations.end] == ["2012-01-01", "NaT"]
    clash = head + "XA,A,1,2,3,2010-01-01,2011-01-01\nXA,A,5,2,3,2010-06-01,\n"
    assert "line 3, station XA.A" in station_problems(tmp_path, clash)[0]
    backwards = head + "XA,A,1,2,3,2011-01-01,2010-01-01\n"
    assert "expected a time after the start" in station_problems(tmp_path, backwards)[0]


def test_pick_outside_every_epoch_is_told_the_epochs(tmp_path: Path) -> None:
    head = STATION_HEAD.strip() + ",start,end\n"
    text = head + "XA,A,1,2,3,2010-01-01,2011-01-01\nXA,A,5,2,3,2020-01-01,\n"
    stations = read_stations(written(tmp_path, text, "stations.csv"))
    events = read_events(written(tmp_path, EVENTS, "events.csv"))
    row = "e1,XA,A,P,2019-03-07T04:15:00Z,0.1\n"
    with pytest.raises(FileProblemsError) as caught:
        read_picks(written(tmp_path, PICK_HEAD + row), stations, events)
    problem = caught.value.problems[0]
    assert problem.startswith("line 2, column time: outside the epochs of station XA.A")
    assert "2010-01-01T00:00:00 to 2011-01-01T00:00:00, 2020-01-01T00:00:00 to open" in problem


def test_events_repeat_only_when_equal(tmp_path: Path) -> None:
    notices: list[Notice] = []
    row = "e1,2019-03-07T04:05:00Z,-6,-79,10\n"
    events = read_events(written(tmp_path, EVENT_HEAD + row + row), notices=notices)
    assert len(events) == 1
    assert "lines 2 and 3" in notices[0].detail
    problems = event_problems(tmp_path, EVENT_HEAD + row + row.replace(",10", ",11"))
    assert problems[0].startswith("line 3, column event: 'e1'; stands in line 2")


def test_unknown_references_are_gathered_by_name(tmp_path: Path) -> None:
    rows = (
        "e1,XB,ALP,P,2019-03-07T04:15:00Z,0.1\n"
        "e11,XA,ALP,P,2019-03-07T04:15:00Z,0.1\n"
        "e2,XB,ALP,P,2019-03-08T04:15:00Z,0.1\n"
        "e2,XA,NONE,P,2019-03-08T04:15:00Z,0.1\n"
    )
    problems = pick_problems(tmp_path, PICK_HEAD + rows)
    assert len(problems) == 3
    assert (
        "'XB.ALP'; expected a station of the stations table; it has ALP in network XA"
        in problems[0]
    )
    assert "(also line 4)" in problems[0]
    assert problems[1].startswith("line 3, column event: 'e11'; expected an event")
    assert "did you mean 'e1'?" in problems[1]
    assert problems[2].startswith("line 5, column station: 'XA.NONE'")


@pytest.mark.parametrize(
    ("time", "words"),
    [
        ("2019-03-07T04:04:59Z", "1.0 s before the origin of event e1"),
        ("2019-03-07T04:05:00Z", "0.0 s before the origin"),
        ("2019-03-08T04:15:00Z", "87000.0 s after the origin"),
    ],
)
def test_pick_times_must_follow_the_origin(tmp_path: Path, time: str, words: str) -> None:
    problems = pick_problems(tmp_path, PICK_HEAD + f"e1,XA,ALP,P,{time},0.1\n")
    assert len(problems) == 1
    assert problems[0].startswith("line 2, column time: ")
    assert words in problems[0]


@pytest.mark.parametrize("value", ["0", "-0.1", "nan", "inf", "1e3", "good"])
def test_uncertainty_must_be_positive_seconds(tmp_path: Path, value: str) -> None:
    row = f"e1,XA,ALP,P,2019-03-07T04:15:00Z,{value}\n"
    problems = pick_problems(tmp_path, PICK_HEAD + row)
    assert len(problems) == 1
    assert problems[0].startswith(f"line 2, column uncertainty_s: {value!r}")


def test_uncertainty_or_quality_must_be_there(tmp_path: Path) -> None:
    row = "e1,XA,ALP,P,2019-03-07T04:15:00Z"
    head = PICK_HEAD.replace(",uncertainty_s", ",uncertainty")
    problems = pick_problems(tmp_path, f"{head}{row},0.1\n")
    assert "column uncertainty_s is missing; did you mean" in problems[0]
    head = PICK_HEAD.replace(",uncertainty_s", ",quality")
    problems = pick_problems(tmp_path, f"{head}{row},A\n{row},A\n".replace("ALP", "ALP", 1))
    assert problems[0].startswith("line 2, column quality: 'A'; expected a class")
    assert "(and 1 more lines)" in problems[0]


def test_repeated_picks_drop_when_equal_and_stay_when_not(tmp_path: Path) -> None:
    notices: list[Notice] = []
    row = "e1,XA,ALP,P,2019-03-07T04:15:00Z,0.1\n"
    rows = row + row + row.replace("15:00Z", "15:05Z")
    picks = picks_of(tmp_path, PICK_HEAD + rows, notices)
    assert len(picks) == 2
    assert {notice.what for notice in notices} == {"repeated_rows", "conflicting_rows"}
    details = {notice.what: notice.detail for notice in notices}
    assert "lines 2 and 3" in details["repeated_rows"]
    assert "lines 2 and 4" in details["conflicting_rows"]
    assert "e1 XA ALP P" in {notice.who for notice in notices}


def test_tables_of_unequal_columns_are_refused() -> None:
    with pytest.raises(InputError, match="differ in length"):
        Events(
            event=["a"],
            time=["2019-01-01"] * 2,
            latitude_deg=[1.0],
            longitude_deg=[1.0],
            depth_km=[1.0],
        )  # type: ignore[arg-type]
    with pytest.raises(InputError, match="column latitude_deg"):
        Stations(
            network=["A"],
            station=["B"],
            latitude_deg=["x"],
            longitude_deg=[1.0],
            elevation_m=[1.0],
        )  # type: ignore[arg-type]


def test_settings_refuse_unknown_keys_and_bad_seconds() -> None:
    with pytest.raises(ValueError, match="default_uncertainty_s"):
        SurveySettings(default_uncertainty_s=0.0)
    with pytest.raises(ValueError, match="extra"):
        SurveySettings.model_validate({"default_uncertainty": 0.1})


_GOOD = (STATION_HEAD + "XA,A,1,2,3\nXB,B,4,5,6\n").encode()


@settings(
    max_examples=200, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture]
)
@given(
    content=st.one_of(
        st.binary(max_size=200),
        st.tuples(st.integers(0, len(_GOOD)), st.binary(max_size=8)).map(
            lambda cut: _GOOD[: cut[0]] + cut[1] + _GOOD[cut[0] :]
        ),
        st.text(max_size=60).map(lambda text: (STATION_HEAD + text).encode("utf-8", "replace")),
    )
)
def test_any_bytes_give_stations_or_a_clear_error(tmp_path: Path, content: bytes) -> None:
    try:
        stations = read_stations(written(tmp_path, content))
    except RayloomError:
        return
    assert len(stations) >= 1
    assert abs(stations.latitude_deg).max() <= 90.0


_NASTY = st.sampled_from(
    (
        *(
            "",
            "-1",
            "1e400",
            "nan",
            "٣",
            "1_0",
            "\x00",
            '"',
            ",",
            "e1",
            "XA",
            "P",
            "0.2",
            "\ufeff",
        ),
        *("9999-99-99T99:99:99Z", "2019-03-07T04:15:00+99:99", "2019-03-07T05:15:00+01:00"),
    )
)


@settings(
    max_examples=150, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture]
)
@given(column=st.integers(0, 5), cell=_NASTY, other=st.integers(0, 5), second=_NASTY)
def test_any_cells_give_picks_or_a_clear_error(
    tmp_path: Path, column: int, cell: str, other: int, second: str
) -> None:
    good = ["e1", "XA", "ALP", "P", "2019-03-07T04:15:00Z", "0.1"]
    odd = list(good)
    odd[column], odd[other] = cell, second
    text = PICK_HEAD + ",".join(good) + "\n" + ",".join(odd) + "\n"
    try:
        picks = picks_of(tmp_path, text)
    except RayloomError:
        return
    assert (picks.uncertainty_s > 0.0).all()
    assert (picks.event_index == 0).all()
    assert (picks.station_index == 0).all()

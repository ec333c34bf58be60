"""StationXML, QuakeML and FDSN text: what becomes of channels, origins, arrivals and faults."""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np
import pytest

from rayloom.errors import FileAccessError, FileProblemsError, MissingExtraError
from rayloom.survey import (
    Notice,
    Stations,
    Survey,
    read_events,
    read_picks,
    read_stations,
    read_survey,
)
from survey_files import catalogue, example_survey, inventory, write_csv, write_fdsn, write_xml

CHANNEL_HEAD = (
    "#Network|Station|Location|Channel|Latitude|Longitude|Elevation|Depth|StartTime|EndTime\n"
)
EVENT_HEAD = "#EventID|Time|Latitude|Longitude|Depth/km|MagType|Magnitude\n"


@pytest.fixture(scope="module")
def survey() -> Survey:
    return example_survey()


def written(folder: Path, content: str | bytes, name: str = "table") -> Path:
    path = folder / name
    path.write_bytes(content.encode() if isinstance(content, str) else content)
    return path


def quake_ml(inside: str, *, name: str = "smi:local/event/e1") -> str:
    return (
        '<?xml version="1.0" encoding="utf-8"?>\n'
        '<q:quakeml xmlns="http://quakeml.org/xmlns/bed/1.2" '
        'xmlns:q="http://quakeml.org/xmlns/quakeml/1.2">\n'
        '<eventParameters publicID="smi:local/c">\n'
        f'<event publicID="{name}">\n{inside}\n</event>\n'
        "</eventParameters></q:quakeml>\n"
    )


def origin(name: str, *, depth_m: float = 10_000.0, arrivals: str = "") -> str:
    return (
        f'<origin publicID="smi:local/origin/{name}"><time><value>2019-03-07T04:05:04.506Z</value>'
        "</time><latitude><value>36.5</value></latitude><longitude><value>70.7</value></longitude>"
        f"<depth><value>{depth_m}</value></depth>{arrivals}</origin>"
    )


def arrival(pick: str, phase: str) -> str:
    return (
        f'<arrival publicID="smi:local/a/{pick}/{phase}"><pickID>smi:local/pick/{pick}</pickID>'
        f"<phase>{phase}</phase></arrival>"
    )


def pick(name: str, codes: str, *, time: str = "04:15:00", more: str = "") -> str:
    network, station = codes.split(".")
    return (
        f'<pick publicID="smi:local/pick/{name}"><time><value>2019-03-07T{time}Z</value></time>'
        f'<waveformID networkCode="{network}" stationCode="{station}"/>{more}</pick>'
    )


def same(one: Stations, other: Stations) -> None:
    order = [np.lexsort((table.start, table.labels)) for table in (one, other)]
    for name in Stations.column_names():
        values = [getattr(t, name)[rows] for t, rows in zip((one, other), order, strict=True)]
        np.testing.assert_array_equal(*values)


def test_channels_of_one_position_become_one_row(tmp_path: Path, survey: Survey) -> None:
    same(read_stations(write_xml(survey, tmp_path)["stations"]), survey.stations)
    same(read_stations(write_fdsn(survey, tmp_path)["stations"]), survey.stations)


def test_seismometer_goes_first_and_moves_make_epochs(tmp_path: Path) -> None:
    text = CHANNEL_HEAD + (
        "XA|A||LDO|1|2|10|0|2010-01-01T00:00:00|\n"
        "XA|A|00|HNZ|1.3|2|10|0|2010-01-01T00:00:00|\n"
        "XA|A|10|HHZ|1.2|2|90|10|2010-01-01T00:00:00|2015-01-01T00:00:00\n"
        "XA|A|00|BHZ|1.1|2|100|0|2012-01-01T00:00:00|2013-01-01T00:00:00\n"
        "XA|A|00|BHN|1.1|2|100|0|2012-01-01T00:00:00|2013-01-01T00:00:00\n"
    )
    notices: list[Notice] = []
    stations = read_stations(written(tmp_path, text), notices=notices)
    np.testing.assert_array_equal(stations.latitude_deg, [1.2, 1.1, 1.2, 1.3])
    np.testing.assert_array_equal(stations.burial_m, [10.0, 0.0, 10.0, 0.0])
    np.testing.assert_array_equal(stations.depth_km, [-0.09, -0.1, -0.09, -0.01])
    assert [str(start)[:4] for start in stations.start] == ["2010", "2012", "2013", "2015"]
    assert [str(end)[:4] for end in stations.end] == ["2012", "2013", "2015", "NaT"]
    assert [notice.what for notice in notices] == ["channels_apart"]
    assert "XA.A by 33" in notices[0].detail


def test_sensor_elevation_and_depth_give_the_surface(tmp_path: Path) -> None:
    """Elevation of a channel is the sensor's, Depth below the ground (StationXML schema 1.2)."""
    text = CHANNEL_HEAD + "XA|A|00|HHZ|1|2|700|300||\nXA|B|00|HHZ|1|2|50|-20||\n"
    stations = read_stations(written(tmp_path, text))
    np.testing.assert_array_equal(stations.elevation_m, [1000.0, 50.0])
    np.testing.assert_array_equal(stations.burial_m, [300.0, 0.0])


def test_channel_problems_name_their_lines(tmp_path: Path) -> None:
    text = "#DATACENTER=somewhere\n" + CHANNEL_HEAD + "XA|A||HHZ|x|2|0|0||\nXA|B||HHZ|1|2|0|y||\n"
    with pytest.raises(FileProblemsError) as caught:
        read_stations(written(tmp_path, text))
    assert [problem.split(":")[0] for problem in caught.value.problems] == [
        "line 3, column latitude",
        "line 4, column depth_m",
    ]


def test_epochs_that_end_before_they_start_are_left_out(tmp_path: Path) -> None:
    notices: list[Notice] = []
    text = (
        CHANNEL_HEAD + "XA|A||HHZ|1|2|0|0|2010-01-01|2009-01-01\nXA|A||HHZ|1|3|0|0|2011-01-01|\n"
    )
    stations = read_stations(written(tmp_path, text), notices=notices)
    np.testing.assert_array_equal(stations.longitude_deg, [3.0])
    assert notices[0].detail.startswith("1 epochs of")


def test_preferred_origin_and_depth_in_metres(tmp_path: Path) -> None:
    origins = origin("one", depth_m=5_000.0) + origin("two", depth_m=210_300.0)
    chosen = "<preferredOriginID>smi:local/origin/two</preferredOriginID>"
    assert read_events(written(tmp_path, quake_ml(chosen + origins))).depth_km[0] == 210.3
    notices: list[Notice] = []
    events = read_events(written(tmp_path, quake_ml(origins)), notices=notices)
    assert events.depth_km[0] == 5.0
    assert "several origins and none preferred (e1)" in notices[0].detail


@pytest.mark.parametrize(
    ("identifier", "name"),
    [
        ("smi:local/event/e1", "e1"),
        ("quakeml:net.example/event/20120404_0000041", "20120404_0000041"),
        ("smi:net.example/fdsnws/event/1/query?eventId=3279407", "3279407"),
        ("quakeml:net.example/query?eventid=ci37285320&amp;format=quakeml", "ci37285320"),
        ("smi:EX/evid=600516695", "600516695"),
        ("smi:net.example/event#77", "77"),
        ("plain/name", "plain/name"),
    ],
)
def test_events_are_named_by_the_end_of_their_identifier(
    tmp_path: Path, identifier: str, name: str
) -> None:
    content = quake_ml(origin("one"), name=identifier)
    assert read_events(written(tmp_path, content)).event.tolist() == [name]


def test_events_above_sea_level_and_without_origin_are_told(tmp_path: Path) -> None:
    notices: list[Notice] = []
    content = quake_ml(origin("one", depth_m=-400.0)).replace(
        "</eventParameters>", '<event publicID="smi:local/event/none"/></eventParameters>'
    )
    events = read_events(written(tmp_path, content), notices=notices)
    assert events.depth_km.tolist() == [0.0]
    assert {notice.what: "(e1)" in notice.detail for notice in notices} == {
        "events_above_sea_level": True,
        "events_without_origin": False,
    }
    text = EVENT_HEAD + "e1|2019-03-07T04:05:04|1|2|-0.4||\n"
    assert read_events(written(tmp_path, text)).depth_km.tolist() == [0.0]


def test_phases_uncertainties_and_left_out_picks(tmp_path: Path, survey: Survey) -> None:
    hint = "<phaseHint>P</phaseHint>"
    inside = "".join(
        [
            "<preferredOriginID>smi:local/origin/two</preferredOriginID>",
            origin("one", arrivals=arrival("1", "pP") + arrival("2", "sP")),
            origin("two", arrivals=arrival("1", "PcP")),
            pick("1", "XA.ALP", more=hint),
            pick("2", "XA.BET", more=hint),
            pick("3", ".GAM", more=hint).replace(
                "Z</value>",
                "Z</value><lowerUncertainty>0.1</lowerUncertainty>"
                "<upperUncertainty>0.3</upperUncertainty>",
            ),
            pick("4", "XA.DEL", more=hint + "<evaluationStatus>rejected</evaluationStatus>"),
            pick("5", "XB.EPS"),
            pick("6", "ZZ.FAR", more=hint),
            pick("7", "XB.SEA", time="03:15:00", more=hint),
            pick("9", "XA.", more=hint),
            pick("8", "XB.ZET", more=hint).replace(
                "Z</value>", "Z</value><uncertainty>0</uncertainty>"
            ),
        ]
    )
    path = written(tmp_path, quake_ml(inside))
    notices: list[Notice] = []
    picks = read_picks(path, survey.stations, read_events(path), notices=notices)
    labels = survey.stations.labels[picks.station_index]
    assert dict(zip(labels.tolist(), picks.phase.tolist(), strict=True)) == {
        "XA.ALP": "PcP",
        "XA.BET": "sP",
        "XA.GAM": "P",
        "XB.ZET": "P",
    }
    np.testing.assert_allclose(picks.uncertainty_s, [0.1, 0.1, 0.2, 0.1])
    told = " ".join(notice.detail for notice in notices)
    for words in (
        "1 picks of",
        "marked as rejected",
        "neither an arrival nor a phase hint",
        "at stations that the stations table does not have (ZZ.FAR of e1, XA. of e1)",
        "not within an hour after the origin (XB.SEA of e1)",
        "name no network",
        "3 of 4 rows of",
    ):
        assert words in told


def test_problems_of_quake_ml_name_lines_of_the_file(tmp_path: Path, survey: Survey) -> None:
    long = "<time><value>2019-03-07T04:15:00Z</value><uncertainty>99</uncertainty></time>"
    lines = [origin("one"), pick("1", "XA.ALP", more="<phaseHint>P</phaseHint>"), ""]
    lines.append(lines[1].replace("pick/1", "pick/2").replace("ALP", "BET"))
    start, stop = lines[3].index("<time>"), lines[3].index("</time>") + len("</time>")
    lines[3] = lines[3][:start] + long + lines[3][stop:]
    path = written(tmp_path, quake_ml("\n".join(lines)))
    with pytest.raises(FileProblemsError) as caught:
        read_picks(path, survey.stations, read_events(path))
    assert len(caught.value.problems) == 1
    assert caught.value.problems[0].startswith("line 8, column uncertainty_s: '99.0'")
    path = written(tmp_path, quake_ml("\n".join(lines[:3])).replace("04:15:00Z", "soon"))
    with pytest.raises(FileProblemsError) as caught:
        read_picks(path, survey.stations, read_events(path))
    assert caught.value.problems == (
        "line 6, column time: blank; expected a UTC time such as 2021-03-07T04:05:06.78Z",
    )


BOMB = (
    '<!DOCTYPE quakeml [<!ENTITY a "aaaaaaaaaa">'
    + "".join(f'<!ENTITY {chr(98 + n)} "{f"&{chr(97 + n)};" * 10}">' for n in range(9))
    + "]>"
)


@pytest.mark.parametrize("declaration", [BOMB, "<!DOCTYPE quakeml>", '<!DOCTYPE q SYSTEM "x">'])
@pytest.mark.parametrize("encoding", ["utf-8", "utf-16"])
def test_document_types_and_entities_are_refused(
    tmp_path: Path, declaration: str, encoding: str
) -> None:
    content = quake_ml(origin("one")).replace("?>\n", f"?>{declaration}\n", 1)
    content = content.replace("36.5", "&j;").replace('encoding="utf-8"', f'encoding="{encoding}"')
    with pytest.raises(FileProblemsError, match="DOCTYPE"):
        read_events(written(tmp_path, content.encode(encoding)))


def test_encodings_and_faults_of_xml(tmp_path: Path) -> None:
    content = quake_ml(origin("one"))
    for encoding in ("utf-16", "iso-8859-1", "ascii", "UTF-8"):
        declared = content.replace('encoding="utf-8"', f'encoding="{encoding}"')
        assert len(read_events(written(tmp_path, declared.encode(encoding)))) == 1
    assert len(read_events(written(tmp_path, b"\xef\xbb\xbf" + content.encode()))) == 1
    assert len(read_events(written(tmp_path, content.replace("\n", "\r\n")))) == 1
    for faulty, words in (
        (content.replace('"utf-8"', '"utf-7"').encode(), "encoding 'utf-7' is not read"),
        (content.replace("e1", "é1").encode("latin-1"), "line 4, byte 0xE9 does not fit"),
        (content[:-30].encode(), "was it cut off"),
        (
            content.replace("36.5", "10e999").encode(),
            "line 4, an element that cannot",
        ),
        (content.replace("36.5", "high").encode(), "line 4, column latitude: blank"),
        (b"<html><body/></html>", "the file is XML; expected events"),
    ):
        with pytest.raises(FileProblemsError) as caught:
            read_events(written(tmp_path, faulty))
        assert words in str(caught.value)


def test_several_files_and_folders_are_one_table(tmp_path: Path, survey: Survey) -> None:
    whole = inventory(survey.stations)
    folder = tmp_path / "survey"
    folder.mkdir()
    for network in whole:
        whole.select(network=network.code).write(
            str(folder / f"{network.code}.unusual"), format="STATIONXML"
        )
    catalogue(survey)[:2].write(str(folder / "first.xml"), format="QUAKEML")
    catalogue(survey)[2:].write(str(folder / "second.txt"), format="QUAKEML")
    written(folder, "notes\n", "readme.txt")
    written(folder, "", ".hidden")
    notices: list[Notice] = []
    same(read_stations(folder, notices=notices), survey.stations)
    assert "3 files of" in notices[0].detail
    told: list[tuple[int, int]] = []
    read = read_survey(
        stations=[folder / "XA.unusual", folder / "XB.unusual"],
        events=folder,
        picks=folder,
        progress=lambda done, total: told.append((done, total)),
    )
    assert len(read.picks) == len(survey.picks)
    assert len(read.events) == 4
    done, total = (np.array(column) for column in zip(*told, strict=True))
    assert (np.diff(done) >= 0).all()
    assert set(total) == {done[-1]}
    catalogues = sum(path.stat().st_size for path in (folder / "first.xml", folder / "second.txt"))
    stations = sum(path.stat().st_size for path in folder.glob("*.unusual"))
    assert done[-1] == stations + 2 * catalogues


def test_problems_of_several_files_name_the_file(tmp_path: Path) -> None:
    head = "network,station,latitude,longitude,elevation_m\n"
    one = written(tmp_path, head + "XA,A,1,2,3\nXA,C,x,2,3\n", "one.csv")
    two = written(tmp_path, head + "XA,A,1.5,2,3\nXA,B,1\n", "two.csv")
    with pytest.raises(FileProblemsError) as caught:
        read_stations([two, one])
    assert str(caught.value).startswith("2 files: 2 problems")
    assert caught.value.problems[0].startswith(f"line 3 of {two}, 3 cells where")
    assert caught.value.problems[1].startswith(f"line 3 of {one}, column latitude: 'x'")
    written(tmp_path, head + "XA,A,1,2,3\n", "one.csv")
    written(tmp_path, head + "XA,A,1.5,2,3\n", "two.csv")
    with pytest.raises(FileProblemsError, match=rf"another position in line 2 of {two}"):
        read_stations([two, one])


def test_folders_without_the_content_and_no_files_are_told(tmp_path: Path, survey: Survey) -> None:
    with pytest.raises(FileAccessError, match="the folder is empty; expected picks as CSV"):
        read_picks(tmp_path, survey.stations, survey.events)
    written(tmp_path, "notes\n", "readme.txt")
    with pytest.raises(FileAccessError, match="none of its 1 files holds picks"):
        read_picks(tmp_path, survey.stations, survey.events)
    with pytest.raises(FileAccessError, match="no file is given; expected stations"):
        read_stations([])


@pytest.mark.parametrize("name", ["stations", "events"])
def test_missing_extra_says_what_installs_it(
    tmp_path: Path, survey: Survey, monkeypatch: pytest.MonkeyPatch, name: str
) -> None:
    paths = write_xml(survey, tmp_path)
    text = write_fdsn(survey, tmp_path)
    monkeypatch.setitem(sys.modules, "obspy", None)
    read = read_stations if name == "stations" else read_events
    with pytest.raises(MissingExtraError, match=r"pip install 'rayloom\[formats\]'"):
        read(paths[name])
    assert len(read(text[name])) >= 4


def test_formats_are_told_by_contents(tmp_path: Path, survey: Survey) -> None:
    csv, xml, text = (write(survey, tmp_path) for write in (write_csv, write_xml, write_fdsn))
    disguised = written(tmp_path, xml["stations"].read_bytes(), "stations.csv")
    same(read_stations(disguised), survey.stations)
    disguised = written(tmp_path, text["events"].read_bytes(), "events.xml")
    assert read_events(disguised).event.tolist() == survey.events.event.tolist()
    for path, words in (
        (text["events"], "the file is FDSN text of events; expected stations"),
        (xml["picks"], "the file is QuakeML of events and picks; expected stations"),
        (csv["picks"], "column latitude is missing"),
    ):
        with pytest.raises(FileProblemsError, match=words):
            read_stations(path)


def test_empty_elements_and_prefixes_do_not_shift_the_parts(tmp_path: Path) -> None:
    content = quake_ml('<comment/><amplitude a=">"/>' + origin("one") + "<comment />")
    content = content.replace(
        "<event ", '<event publicID="smi:local/event/e>0"/><!-- <event> --><event ', 1
    )
    content = content.replace("<event publicID", "<event  publicID").replace("<time>", "<time >")
    assert read_events(written(tmp_path, content)).event.tolist() == ["e1"]
    prefixed = (
        '<s:FDSNStationXML schemaVersion="1.2" xmlns:s="http://www.fdsn.org/xml/station/1">'
        "<s:Source>x</s:Source><s:Created>2020-01-01T00:00:00Z</s:Created>"
        '<s:Network code="XA"><s:Description>d</s:Description><s:Station code="A">'
        "<s:Latitude>1</s:Latitude><s:Longitude>2</s:Longitude><s:Elevation>3</s:Elevation>"
        "<s:Site><s:Name>n</s:Name></s:Site></s:Station></s:Network>"
        '<s:Network code="XB"/></s:FDSNStationXML>'
    )
    stations = read_stations(written(tmp_path, prefixed))
    assert stations.labels.tolist() == ["XA.A"]
    assert stations.elevation_m.tolist() == [3.0]

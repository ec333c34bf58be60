"""Formats against files and readings of obspy."""

from __future__ import annotations

import warnings
from pathlib import Path

import numpy as np
import pytest

from rayloom.earth import ReferenceEarth
from rayloom.errors import FileProblemsError
from rayloom.residuals import Residuals, compute_residuals
from rayloom.settings import read_run_settings
from rayloom.survey import read_events, read_picks, read_stations, read_survey
from rayloom.workflow import Tables, initialise
from survey_files import example_survey, write_csv, write_fdsn, write_xml

with warnings.catch_warnings():
    warnings.simplefilter("ignore")
    import obspy
    from obspy import read_events as obspy_events
    from obspy import read_inventory

SHIPPED = Path(obspy.__file__).parent / "io"
STATION_XML = SHIPPED / "stationxml" / "tests" / "data"
QUAKE_ML = SHIPPED / "quakeml" / "tests" / "data"
STATION_TEXT = SHIPPED / "stationtxt" / "tests" / "data"


def residuals_of(paths: dict[str, Path]) -> Residuals:
    return compute_residuals(read_survey(**paths), ReferenceEarth("ak135"))


def test_one_survey_in_each_format_gives_the_same_residuals(tmp_path: Path) -> None:
    """Residuals agree to 1e-6 s: CSV, StationXML with QuakeML (by obspy), FDSN text."""
    survey = example_survey()
    csv = write_csv(survey, tmp_path)
    xml = write_xml(survey, tmp_path)
    text = write_fdsn(survey, tmp_path)
    expected = residuals_of(csv)
    assert len(expected.residual_s) >= 40
    assert set(expected.phase) == {"P", "S"}
    for paths in (xml, {**csv, **text}, {**xml, **text}, {**text, "picks": xml["picks"]}):
        found = residuals_of(paths)
        np.testing.assert_allclose(found.residual_s, expected.residual_s, rtol=0, atol=1e-6)
        np.testing.assert_allclose(found.predicted_s, expected.predicted_s, rtol=0, atol=1e-6)
        np.testing.assert_array_equal(found.uncertainty_s, expected.uncertainty_s)
        np.testing.assert_array_equal(found.phase, expected.phase)
        np.testing.assert_array_equal(
            found.stations.labels[found.station_index],
            expected.stations.labels[expected.station_index],
        )
        np.testing.assert_array_equal(
            found.events.event[found.event_index], expected.events.event[expected.event_index]
        )


def test_run_folders_are_made_from_open_formats(tmp_path: Path) -> None:
    """One QuakeML file serves as events and picks."""
    paths = write_xml(example_survey(), tmp_path)
    folder = initialise(tmp_path / "run", Tables(**paths))
    named = read_run_settings(folder.settings_file).inputs
    assert named.events == named.picks == Path("../catalogue.xml")


@pytest.mark.parametrize(
    ("name", "count"),
    [
        ("F1_423_small.xml", 1),
        ("IRIS_single_channel_with_response.xml", 1),
        ("full_station_field_station.xml", 1),
        ("only_soh.xml", 1),
        ("stationxml_BK.CMB.__.LKS.xml", 1),
        ("stationxml_IU.ANTO.30.LDO.xml", 1),
        ("stationxml_with_availability.xml", 1),
        ("empty_channel.xml", 1),
        ("channel_without_coordinates.xml", 1),
    ],
)
def test_shipped_station_xml_is_read_as_obspy_reads_it(name: str, count: int) -> None:
    """Codes, and positions that obspy gives to the station or one of its channels."""
    stations = read_stations(STATION_XML / name)
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        inventory = read_inventory(str(STATION_XML / name))
    named = {f"{network.code}.{station.code}" for network in inventory for station in network}
    assert set(stations.labels.tolist()) == named
    assert len(named) == count
    places = {
        (float(node.latitude), float(node.longitude), -float(node.elevation) / 1000.0)
        for network in inventory
        for station in network
        for node in [station, *station]
    }
    for row in range(len(stations)):
        place = (stations.latitude_deg[row], stations.longitude_deg[row], stations.depth_km[row])
        assert any(np.allclose(place, other, rtol=0, atol=1e-9) for other in places)


@pytest.mark.parametrize("level", ["station", "channel"])
def test_shipped_station_text_is_read_as_obspy_reads_it(level: str) -> None:
    path = STATION_TEXT / f"{level}_level_fdsn.txt"
    stations = read_stations(path)
    inventory = read_inventory(str(path), format="STATIONTXT")
    nodes = [
        (f"{network.code}.{station.code}", node)
        for network in inventory
        for station in network
        for node in (station if level == "channel" else [station])
    ]
    assert set(stations.labels.tolist()) == {label for label, _ in nodes}
    for row in range(len(stations)):
        place = (stations.latitude_deg[row], stations.longitude_deg[row], stations.depth_km[row])
        assert any(
            label == stations.labels[row]
            and np.allclose(
                place,
                (node.latitude, node.longitude, -node.elevation / 1000.0),
                rtol=0,
                atol=1e-9,
            )
            and str(stations.start[row]).startswith(str(node.start_date)[:19])
            for label, node in nodes
        )


@pytest.mark.parametrize(
    ("name", "count"),
    [
        ("iris_events.xml", 2),
        ("neries_events.xml", 3),
        ("preferred.xml", 1),
        ("qml-example-1.2-RC3.xml", 1),
        ("quakeml_1.2_origin.xml", 1),
        ("invalid_enum.xml", 1),
    ],
)
def test_shipped_quake_ml_is_read_as_obspy_reads_it(name: str, count: int) -> None:
    events = read_events(QUAKE_ML / name)
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        catalogue = obspy_events(str(QUAKE_ML / name), format="QUAKEML")
    assert len(events) == count == len(catalogue)
    for row, event in enumerate(catalogue):
        origin = event.preferred_origin() or event.origins[0]
        assert str(event.resource_id).endswith(str(events.event[row]))
        assert events.time[row].astype(np.int64) == origin.time.ns
        assert events.latitude_deg[row] == origin.latitude
        assert events.longitude_deg[row] == pytest.approx(origin.longitude, abs=1e-12)
        assert events.depth_km[row] == pytest.approx(origin.depth / 1000.0, abs=1e-12)


def test_shipped_events_of_unusual_types_and_names_are_kept() -> None:
    """Two events of a file from a national centre; obspy alone leaves out the type "quarry"."""
    events = read_events(QUAKE_ML / "usgs_event.xml")
    assert events.event.tolist() == ["ci37285320", "uw60916552"]
    np.testing.assert_allclose(events.depth_km, [0.01, 0.0])


@pytest.mark.parametrize(
    ("path", "words"),
    [
        (STATION_XML / "minimal_station.xml", "holds no station"),
        (STATION_XML / "version20.xml", "holds no station"),
        (STATION_XML / "full_random_stationxml.xml", "line 1987, column elevation_m"),
        (STATION_TEXT / "network_level_fdsn.txt", "level=station"),
        (
            QUAKE_ML / "iris_events.xml",
            "the file is QuakeML of events and picks; expected station",
        ),
    ],
)
def test_shipped_files_without_usable_stations_say_why(path: Path, words: str) -> None:
    with pytest.raises(FileProblemsError, match=r"problem") as caught:
        read_stations(path)
    assert words in str(caught.value)


def test_shipped_picks_that_fit_no_station_are_counted(tmp_path: Path) -> None:
    survey = example_survey()
    paths = write_csv(survey, tmp_path)
    stations, events = read_stations(paths["stations"]), read_events(paths["events"])
    with pytest.raises(FileProblemsError) as caught:
        read_picks(QUAKE_ML / "quakeml_1.2_pick.xml", stations, events)
    assert "1 picks" in str(caught.value)
    assert "have neither an arrival nor a phase hint" in str(caught.value)

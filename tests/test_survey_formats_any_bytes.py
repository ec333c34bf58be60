"""Every reader of the survey on any bytes: an error of the package, or a right result.

Property tests; warnings are errors here as in all tests, so a stray warning of a
library under a reader fails them too.
"""

from __future__ import annotations

import re
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from rayloom.errors import RayloomError
from rayloom.survey import Events, Picks, Stations, read_events, read_picks, read_stations
from survey_files import example_survey, write_csv, write_fdsn, write_xml

SURVEY = example_survey()
KINDS = (
    "stations csv",
    "stations xml",
    "stations fdsn",
    "events csv",
    "events xml",
    "events fdsn",
    "picks csv",
    "picks xml",
)
NASTY = st.sampled_from(
    (
        *("", " ", "0", "-1", "1e400", "-1e308", "9" * 400, "nan", "-inf", "0x10", "1_0", "٣"),
        *("10,5", "1.2.3", "\x00", '"', "'", ",", "|", ";", "&", "<", ">", "]]>", "&amp;", "&x;"),
        *(
            "\ufeff",
            "\u2028",
            "\r",
            "\n",
            "😀",
            "é",
            "#",
            "smi:",
            "quakeml:a/b?eventid=",
            "XA",
            "P",
        ),
        *("9999-99-99T99:99:99Z", "2019-03-07T04:15:00+99:99", "2500-01-01T00:00:00", "2019-03"),
        *("1e5-01-01", "-2019-03-07T00:00:00", "<!DOCTYPE a>", "<!--", "<a/>", "<![CDATA[1]]>"),
    )
)
CELL = {
    "csv": re.compile(rb"(?<=[,\n])[^,\n]*(?=[,\n])"),
    "fdsn": re.compile(rb"(?<=[|\n])[^|\n]*(?=[|\n])"),
    "xml": re.compile(rb"""(?<=>)[^<>]*(?=</)|(?<==")[^"]*(?=")"""),
}

quick = settings(
    max_examples=40,
    deadline=None,
    derandomize=True,
    database=None,
    suppress_health_check=[HealthCheck.function_scoped_fixture],
)


@pytest.fixture(scope="module")
def originals(tmp_path_factory: pytest.TempPathFactory) -> dict[str, bytes]:
    """Give a good file of each kind, with the first two events only to be quick."""
    folder = tmp_path_factory.mktemp("originals")
    few = SURVEY.picks.select(
        (SURVEY.picks.event_index < 2) & (np.arange(len(SURVEY.picks)) % 3 == 0)
    )
    short = type(SURVEY)(SURVEY.stations, SURVEY.events.select(np.arange(2)), few)
    forms: dict[str, Callable[..., dict[str, Path]]] = {
        "csv": write_csv,
        "xml": write_xml,
        "fdsn": write_fdsn,
    }
    written = {form: write(short, folder) for form, write in forms.items()}
    return {kind: written[kind.split()[1]][kind.split()[0]].read_bytes() for kind in KINDS}


def read(kind: str, folder: Path, content: bytes) -> Stations | Events | Picks | None:
    """Return the table that comes out, checked, or None where the reader refuses."""
    path = folder / "file"
    path.write_bytes(content)
    try:
        if kind.startswith("stations"):
            return checked_stations(read_stations(path))
        if kind.startswith("events"):
            return checked_events(read_events(path))
        return checked_picks(read_picks(path, SURVEY.stations, SURVEY.events))
    except RayloomError as error:
        message = str(error)
    assert str(path) in message
    assert len(message) < 20_000
    return None


def checked_stations(stations: Stations) -> Stations:
    assert len(stations) >= 1
    assert all(stations.network.tolist())
    assert all(stations.station.tolist())
    assert (np.abs(stations.latitude_deg) <= 90.0).all()
    assert (np.abs(stations.longitude_deg) <= 180.0).all()
    assert ((stations.elevation_m >= -11_000.0) & (stations.elevation_m <= 9_000.0)).all()
    assert ((stations.burial_m >= 0.0) & (stations.burial_m <= 11_000.0)).all()
    assert not (stations.end <= stations.start).any()
    return stations


def checked_events(events: Events) -> Events:
    assert len(set(events.event.tolist())) == len(events) >= 1
    assert not np.isnat(events.time).any()
    assert (np.abs(events.latitude_deg) <= 90.0).all()
    assert (np.abs(events.longitude_deg) <= 180.0).all()
    assert ((events.depth_km >= 0.0) & (events.depth_km <= 800.0)).all()
    return events


def checked_picks(picks: Picks) -> Picks:
    assert len(picks) >= 1
    assert ((picks.event_index >= 0) & (picks.event_index < len(SURVEY.events))).all()
    assert ((picks.station_index >= 0) & (picks.station_index < len(SURVEY.stations))).all()
    after_s = (picks.time - SURVEY.events.time[picks.event_index]) / np.timedelta64(1, "s")
    assert ((after_s > 0.0) & (after_s <= 3600.0)).all()
    assert ((picks.uncertainty_s > 0.0) & (picks.uncertainty_s <= 60.0)).all()
    assert all(picks.phase.tolist())
    return picks


def same(one: object, other: object) -> bool:
    if not isinstance(one, Stations | Events | Picks) or type(one) is not type(other):
        return False
    return all(
        np.array_equal(getattr(one, name), getattr(other, name), equal_nan=kind != "TextArray")
        for name, kind in one.column_names().items()
    )


@pytest.mark.parametrize("kind", KINDS)
def test_spreadsheet_and_editor_habits_change_nothing(
    tmp_path: Path, originals: dict[str, bytes], kind: str
) -> None:
    good = originals[kind]
    expected = read(kind, tmp_path, good)
    assert expected is not None
    for disguised in (b"\xef\xbb\xbf" + good, good.replace(b"\n", b"\r\n"), good + b"\n\n"):
        assert same(read(kind, tmp_path, disguised), expected)


@pytest.mark.parametrize("kind", KINDS)
@quick
@given(content=st.binary(max_size=200))
def test_random_bytes(tmp_path: Path, kind: str, content: bytes) -> None:
    assert read(kind, tmp_path, content) is None


@pytest.mark.parametrize("kind", KINDS)
@quick
@given(share=st.floats(0.0, 1.0))
def test_truncated_files(
    tmp_path: Path, originals: dict[str, bytes], kind: str, share: float
) -> None:
    """A cut table may still be whole rows; a cut XML file is never whole."""
    good = originals[kind]
    cut = good[: int(share * (len(good.rstrip()) - 1))]
    found = read(kind, tmp_path, cut)
    if kind.endswith("xml"):
        assert found is None
    elif found is not None:
        assert len(found) <= len(read(kind, tmp_path, good) or ())


@pytest.mark.parametrize("kind", KINDS)
@quick
@given(
    share=st.floats(0.0, 1.0), inserted=st.binary(min_size=1, max_size=8), over=st.integers(0, 8)
)
def test_damaged_files(
    tmp_path: Path,
    originals: dict[str, bytes],
    kind: str,
    share: float,
    inserted: bytes,
    over: int,
) -> None:
    good = originals[kind]
    at = int(share * len(good))
    read(kind, tmp_path, good[:at] + inserted + good[at + over :])


@pytest.mark.parametrize("kind", KINDS)
@quick
@given(share=st.floats(0.0, 0.999), other=st.floats(0.0, 0.999), cells=st.tuples(NASTY, NASTY))
def test_odd_cells(
    tmp_path: Path,
    originals: dict[str, bytes],
    kind: str,
    share: float,
    other: float,
    cells: tuple[str, str],
) -> None:
    """Any cell of a table, or any text or attribute of XML, replaced by odd text."""
    content = originals[kind]
    for where, cell in zip((share, other), cells, strict=True):
        spans = [found.span() for found in CELL[kind.split()[1]].finditer(content)]
        start, stop = spans[int(where * len(spans))]
        content = content[:start] + cell.encode() + content[stop:]
    read(kind, tmp_path, content)


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize(
    "encoding",
    ["utf-16", "utf-16-le", "utf-16-be", "utf-32", "utf-7", "cp037", "latin-1", "cp1252"],
)
def test_wrong_encodings(
    tmp_path: Path, originals: dict[str, bytes], kind: str, encoding: str
) -> None:
    """Whatever is read from another encoding is what stands in the file."""
    text = originals[kind].decode()
    expected = read(kind, tmp_path, originals[kind])
    content = text.encode(encoding)
    found = read(kind, tmp_path, content)
    assert found is None or same(found, expected)
    if content == originals[kind] or (kind.endswith("xml") and encoding == "utf-16"):
        assert found is not None
    name = "quake1" if kind.startswith("events") else "XA"
    accented = text.replace(name, name + "Ä").encode(encoding, errors="replace")
    assert not same(read(kind, tmp_path, accented), expected)


@pytest.mark.parametrize("kind", KINDS)
@quick
@given(mixed=st.lists(st.sampled_from(KINDS), min_size=2, max_size=3))
def test_formats_run_together(
    tmp_path: Path, originals: dict[str, bytes], kind: str, mixed: list[str]
) -> None:
    read(kind, tmp_path, b"".join(originals[each][:1500] for each in mixed))

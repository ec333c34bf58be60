"""Readers of residuals, one-dimensional Earths and crust on any bytes.

As for the survey's tables: an error of the package that names the file, or a right
result. Property tests; warnings are errors here as in all tests.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from rayloom.earth import LocalColumn, ModelTable, ReferenceEarth
from rayloom.errors import InputError, RayloomError
from rayloom.residuals import (
    Residuals,
    StationCrust,
    compute_residuals,
    read_crust,
    read_residuals,
)
from rayloom.survey import read_events, read_stations
from survey_files import example_survey
from test_survey_formats import BOMB
from test_survey_formats_any_bytes import CELL, NASTY, quick

SURVEY = example_survey()
EARTH = ReferenceEarth("ak135")
CRUST = """\
network,station,crust_thickness_km,vp_km_s,vs_km_s,column
XX,S00,60,6.2,3.5,
XX,S01,28,,,
XX,S02,,,,basin.csv
"""
BASIN = "depth_km,vp_km_s,vs_km_s\n0,2.4,1.1\n3,2.4,1.1\n3,6.0,3.5\n38,6.9,3.9\n38,8.05,4.5\n"
MODEL = (
    "depth_km,vp_km_s,vs_km_s,density\n0,5.8,3.4,2.7\n35,6.5,3.8,2.9\n35,8.0,4.5,3.3\n"
    "2891,13.7,7.3,5.5\n2891,8.0,0,9.9\n5150,10.3,0,12.1\n5150,11.0,3.5,12.7\n6371,11.3,3.7,13\n"
)
KINDS = ("residuals", "earth", "crust", "column")


@pytest.fixture(scope="module")
def originals(tmp_path_factory: pytest.TempPathFactory) -> dict[str, bytes]:
    path = tmp_path_factory.mktemp("originals") / "residuals.csv"
    data = compute_residuals(SURVEY, EARTH)
    first = data.event_index == data.event_index[0]
    frame = data.select(first).to_frame()
    columns = ["event", "network", "station", "phase", "residual_s", "uncertainty_s"]
    frame[columns].to_csv(path, index=False, lineterminator="\n")
    return {
        "residuals": path.read_bytes(),
        "earth": MODEL.encode(),
        "crust": CRUST.encode(),
        "column": BASIN.encode(),
    }


Table = Residuals | ModelTable | StationCrust | LocalColumn


def raw(kind: str, path: str | Path) -> Table:
    if kind == "residuals":
        return read_residuals(path, SURVEY.stations, SURVEY.events, EARTH)
    if kind == "earth":
        return ModelTable.from_csv(path)
    if kind == "column":
        return LocalColumn.from_csv(path)
    return read_crust(path, SURVEY.stations)


def checked(table: Table) -> Table:
    """Return a table that holds nothing impossible."""
    if isinstance(table, Residuals):
        return checked_residuals(table)
    if isinstance(table, ModelTable):
        return checked_earth(table)
    return checked_column(table) if isinstance(table, LocalColumn) else checked_crust(table)


def read(kind: str, folder: Path, content: bytes) -> Table | None:
    """Return what comes out, checked, or None where the reader refuses."""
    path = folder / "file.csv"
    path.write_bytes(content)
    (folder / "basin.csv").write_text(BASIN, encoding="utf-8")
    try:
        return checked(raw(kind, path))
    except RayloomError as error:
        message = str(error)
        nothing_left = isinstance(error, InputError) and "no pick is left" in message
    assert nothing_left or str(path) in message
    assert len(message) < 20_000
    return None


def checked_residuals(data: Residuals) -> Residuals:
    assert len(data.residual_s) >= 2
    assert np.isfinite(data.residual_s).all()
    assert np.isfinite(data.predicted_s).all()
    assert ((data.uncertainty_s > 0.0) & (data.uncertainty_s <= 60.0)).all()
    return data


def checked_earth(table: ModelTable) -> ModelTable:
    assert (np.diff(table.depth_km) >= 0.0).all()
    assert table.depth_km[0] == 0.0
    assert ((table.vp_km_s >= 0.2) & (table.vp_km_s <= 20.0)).all()
    assert (table.vs_km_s < table.vp_km_s).all()
    earth = ReferenceEarth.from_table(table)
    time_s = earth.travel_time("P", np.array([30.0, 60.0, 90.0]), 33.0)
    assert not np.isinf(time_s).any()
    return table


def checked_column(column: LocalColumn) -> LocalColumn:
    assert (np.diff(column.depth_km) >= 0.0).all()
    assert ((column.vs_km_s > 0.0) & (column.vs_km_s < column.vp_km_s)).all()
    return column


def checked_crust(crust: StationCrust) -> StationCrust:
    for row in range(len(crust)):
        column = crust.local_column(row, EARTH, -1.0)
        assert (column.vp_km_s > 0.0).all()
        assert column.bottom_km <= 400.0
    return crust


def same(one: object, other: object) -> bool:
    names = {
        Residuals: ("residual_s", "uncertainty_s", "station_index"),
        ModelTable: ("depth_km", "vp_km_s", "vs_km_s", "density_g_cm3"),
        LocalColumn: ("depth_km", "vp_km_s", "vs_km_s"),
        StationCrust: ("station", "crust_thickness_km", "vp_km_s", "column"),
    }
    if one is None or type(one) is not type(other):
        return False
    return all(
        np.array_equal(
            getattr(one, name), getattr(other, name), equal_nan=name.endswith(("_km", "_s"))
        )
        for name in names[type(one)]
    )


@pytest.mark.parametrize("kind", KINDS)
def test_spreadsheet_and_editor_habits_change_nothing(
    tmp_path: Path, originals: dict[str, bytes], kind: str
) -> None:
    good = originals[kind]
    expected = read(kind, tmp_path, good)
    assert expected is not None
    for disguised in (
        b"\xef\xbb\xbf" + good,
        good.replace(b"\n", b"\r\n"),
        good + b"\n\n",
        good.replace(b",", b" , "),
    ):
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
    """What is cut may still be whole rows; an Earth without its centre is none."""
    good = originals[kind]
    found = read(kind, tmp_path, good[: int(share * (len(good.rstrip()) - 4))])
    if kind == "earth":
        assert found is None


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
    """Any two cells replaced by blanks, huge numbers, other signs or other alphabets."""
    content = originals[kind]
    for where, cell in zip((share, other), cells, strict=True):
        spans = [found.span() for found in CELL["csv"].finditer(content)]
        start, stop = spans[int(where * len(spans))]
        content = content[:start] + cell.encode() + content[stop:]
    read(kind, tmp_path, content)


@pytest.mark.parametrize("kind", KINDS)
@quick
@given(
    share=st.floats(0.0, 0.999),
    number=st.one_of(
        st.floats(allow_nan=True, allow_infinity=True), st.integers(-(10**30), 10**30)
    ),
)
def test_any_number_in_any_cell(
    tmp_path: Path, originals: dict[str, bytes], kind: str, share: float, number: float
) -> None:
    content = originals[kind]
    spans = [found.span() for found in CELL["csv"].finditer(content)]
    start, stop = spans[int(share * len(spans))]
    read(kind, tmp_path, content[:start] + repr(number).encode() + content[stop:])


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize(
    "encoding", ["utf-16", "utf-16-le", "utf-32", "utf-7", "cp037", "latin-1", "cp1252"]
)
def test_wrong_encodings(
    tmp_path: Path, originals: dict[str, bytes], kind: str, encoding: str
) -> None:
    text = originals[kind].decode()
    expected = read(kind, tmp_path, originals[kind])
    content = text.encode(encoding)
    found = read(kind, tmp_path, content)
    assert found is None or same(found, expected)
    if content == originals[kind]:
        assert found is not None
    header, rows = text.split("\n", 1)
    note = f"{header},note\n" + "".join(f"{row},Ä\n" for row in rows.splitlines())
    assert read(kind, tmp_path, note.encode("latin-1")) is None
    assert same(read(kind, tmp_path, note.encode()), expected)


@pytest.mark.parametrize("kind", KINDS)
def test_absent_files_and_folders_are_named(tmp_path: Path, kind: str) -> None:
    for path in (tmp_path / "absent.csv", tmp_path, tmp_path / ("x" * 300), "a\0b"):
        with pytest.raises(RayloomError) as caught:
            raw(kind, path)
        assert str(path).replace("\0", "\\x00") in str(caught.value)


@pytest.mark.parametrize("root", ["FDSNStationXML", "quakeml"])
@pytest.mark.parametrize("encoding", ["utf-8", "utf-16"])
def test_no_entity_of_xml_is_expanded(tmp_path: Path, root: str, encoding: str) -> None:
    """Neither one that grows without end nor one that stands for another file."""
    secret = tmp_path / "secret.txt"
    secret.write_text("do not tell", encoding="utf-8")
    outside = f'<!DOCTYPE {root} [<!ENTITY j SYSTEM "{secret.as_uri()}">]>'
    parameter = f'<!DOCTYPE {root} [<!ENTITY % p SYSTEM "{secret.as_uri()}"> %p;]>'
    inner = {
        "FDSNStationXML": "<Network code='&j;'><Station code='A'><Latitude>1</Latitude></Station>"
        "</Network>",
        "quakeml": "<eventParameters><event publicID='smi:a/&j;'/></eventParameters>",
    }[root]
    read_table = read_stations if root == "FDSNStationXML" else read_events
    for declaration in (BOMB.replace("quakeml", root), outside, parameter, f"<!DOCTYPE {root}>"):
        content = (
            f"<?xml version='1.0' encoding='{encoding}'?>{declaration}<{root}>{inner}</{root}>"
        )
        path = tmp_path / "file.xml"
        path.write_bytes(content.encode(encoding))
        with pytest.raises(RayloomError, match="DOCTYPE") as caught:
            read_table(path)
        assert "do not tell" not in str(caught.value)
    plain = f"<?xml version='1.0' encoding='{encoding}'?><{root}>{inner}</{root}>"
    (tmp_path / "file.xml").write_bytes(plain.encode(encoding))
    with pytest.raises(RayloomError, match="undefined entity"):
        read_table(tmp_path / "file.xml")

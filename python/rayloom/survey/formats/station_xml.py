"""StationXML as a table of stations.

References
----------
.. [1] FDSN StationXML schema 1.2.
"""

from __future__ import annotations

from typing import Any, Final

from rayloom.survey.formats.parsing import (
    Advance,
    code_cell,
    number_cell,
    parsed_parts,
    station_parser,
    time_cell,
)
from rayloom.survey.formats.sites import STATION_ITSELF, station_table
from rayloom.survey.formats.xml_outline import Part, Shape
from rayloom.survey.problems import Problems
from rayloom.survey.text_table import TextTable

_COLUMNS: Final = (
    "network",
    "station",
    "location",
    "channel",
    "latitude",
    "longitude",
    "elevation_m",
    "depth_m",
    "start",
    "end",
)
_NOT_NEEDED: Final = (
    "Response",
    "Comment",
    "Equipment",
    "Sensor",
    "PreAmplifier",
    "DataLogger",
    "Operator",
    "ExternalReference",
    "DataAvailability",
    "Description",
    "Identifier",
    "CalibrationUnits",
    "SampleRateGroup",
    "Vault",
    "Geology",
    "CreationDate",
    "TerminationDate",
    "TotalNumberChannels",
    "SelectedNumberChannels",
)
_SHAPE: Final = Shape(
    root="FDSNStationXML",
    parent="Network",
    part="Station",
    inside=frozenset({"Channel"}),
    dropped=frozenset(_NOT_NEEDED),
)

_Row = tuple[int, dict[str, str]]


def read_station_xml(content: bytes, problems: Problems, advance: Advance) -> TextTable:
    """Take a StationXML file as a stations table.

    Channels tell the position of the sensors, the station element that of times
    without channels (see :func:`rayloom.survey.formats.sites.station_table`).

    Raises
    ------
    FileProblemsError
        If it cannot be read.
    MissingExtraError
        If obspy is not installed.
    """
    rows: list[_Row] = []
    parse = station_parser(problems.source)
    for part, (network, station) in parsed_parts(content, _SHAPE, parse, problems, advance):
        rows += _rows(part, network, station)
    if not rows and not problems:
        problems.add(0, "the file holds no station; expected StationXML of level station or finer")
    problems.raise_if_any()
    columns = {name: [cells[name] for _, cells in rows] for name in _COLUMNS}
    return station_table(TextTable(columns, [line for line, _ in rows], problems))


def _rows(part: Part, network: Any, station: Any) -> list[_Row]:
    codes = {"network": code_cell(network.code), "station": code_cell(station.code)}
    itself = {"location": "", "channel": STATION_ITSELF, "depth_m": "0"}
    rows = [(part.line, codes | itself | _place_and_time(station))]
    lines = part.lines.get("Channel", [])
    for number, channel in enumerate(station):
        line = lines[number] if len(lines) == len(station.channels) else part.line
        names = {
            "location": code_cell(channel.location_code),
            "channel": code_cell(channel.code),
            "depth_m": number_cell(channel.depth),
        }
        rows.append((line, codes | names | _place_and_time(channel)))
    return rows


def _place_and_time(node: Any) -> dict[str, str]:
    return {
        "latitude": number_cell(node.latitude),
        "longitude": number_cell(node.longitude),
        "elevation_m": number_cell(node.elevation),
        "start": time_cell(node.start_date),
        "end": time_cell(node.end_date),
    }

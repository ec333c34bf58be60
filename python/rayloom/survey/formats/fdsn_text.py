"""The text form of FDSN web services: ``#Network|Station|…`` and ``#EventID|Time|…``.

References
----------
.. [1] FDSN web service specification 1.2, text output of the services station and
   event.
"""

from __future__ import annotations

from typing import Final, Literal

from rayloom.survey.formats.names import event_name
from rayloom.survey.formats.sites import station_table
from rayloom.survey.problems import Problems
from rayloom.survey.text_table import TextTable, decoded, table_of_text

Service = Literal["stations", "events", "networks"]

BAR: Final = "|"
_LOOKED_AT: Final = 100
_STATION_COLUMNS: Final = {
    "network": "network",
    "station": "station",
    "latitude": "latitude",
    "longitude": "longitude",
    "elevation": "elevation_m",
    "depth": "depth_m",
    "location": "location",
    "channel": "channel",
    "starttime": "start",
    "endtime": "end",
}
_EVENT_COLUMNS: Final = {
    "eventid": "event",
    "time": "time",
    "latitude": "latitude",
    "longitude": "longitude",
    "depth/km": "depth_km",
    "depthkm": "depth_km",
    "depth": "depth_km",
    "magnitude": "magnitude",
}


def fdsn_content(text: str) -> Service | None:
    """Return what the text of a web service lists, None if the text is of another kind."""
    for line in text.splitlines()[:_LOOKED_AT]:
        if not line.strip() or _is_comment(line):
            continue
        names = [_plain(cell) for cell in line.split(BAR)]
        if BAR not in line:
            return None
        if names[0] == "eventid":
            return "events"
        if names[0] == "network":
            return "stations" if "station" in names else "networks"
        return None
    return None


def read_fdsn_stations(content: bytes, problems: Problems) -> TextTable:
    """Take the text of the station service, of level station or channel, as a stations table.

    Raises
    ------
    FileProblemsError
        If it is not such text, or lists networks only.
    """
    text = decoded(content, problems)
    if fdsn_content(text) == "networks":
        problems.add(
            0,
            "the file lists networks without stations; "
            "expected the text of the station service with level=station or level=channel",
        )
        problems.raise_if_any()
    table = _renamed(_bar_table(text, problems), _STATION_COLUMNS)
    return station_table(table) if "channel" in table.columns else table


def read_fdsn_events(content: bytes, problems: Problems) -> TextTable:
    """Take the text of the event service as an events table.

    Raises
    ------
    FileProblemsError
        If it is not such text.
    """
    table = _renamed(_bar_table(decoded(content, problems), problems), _EVENT_COLUMNS)
    if "event" in table.columns:
        table.columns["event"] = [event_name(cell) for cell in table.columns["event"]]
    return table


def _bar_table(text: str, problems: Problems) -> TextTable:
    """Split the text; comments and repeated headers become blank lines."""
    lines = text.replace("\r\n", "\n").replace("\r", "\n").split("\n")
    header: str | None = None
    for number, line in enumerate(lines):
        if _is_comment(line) or (header is not None and line.strip() == header):
            lines[number] = ""
        elif header is None and line.strip():
            header = line.strip()
    return table_of_text("\n".join(lines), problems, separator=BAR)


def _renamed(table: TextTable, names: dict[str, str]) -> TextTable:
    """Keep the columns of use under the names of the survey's tables."""
    columns: dict[str, list[str]] = {}
    for name, cells in table.columns.items():
        new = names.get(_plain(name))
        if new is not None:
            columns.setdefault(new, cells)
    return TextTable(columns, table.lines, table.problems, table.remarks)


def _is_comment(line: str) -> bool:
    return line.lstrip().startswith("#") and BAR not in line


def _plain(name: str) -> str:
    return name.strip().lstrip("#").replace(" ", "").lower()

"""From channels to stations: one position per station and time."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from itertools import pairwise
from typing import Final

import numpy as np

from rayloom.survey.columns import ColumnReader
from rayloom.survey.notices import Notice, few
from rayloom.survey.spans import LATITUDE, LONGITUDE, SENSOR_DEPTH, SENSOR_ELEVATION
from rayloom.survey.text_table import TextTable

STATION_ITSELF: Final = "(station)"
"""Channel code of a row that describes the station and none of its channels."""

_EVER: Final = np.datetime64("1677-09-22", "ns")
_NEVER: Final = np.datetime64("2262-04-11", "ns")
_INSTRUMENTS: Final = "HLPN"
_DEGREE_M: Final = 111_195.0
_FAR_M: Final = 1000.0
_TEXT_COLUMNS: Final = ("network", "station", "location", "channel")
_KEPT: Final = (
    "network",
    "station",
    "latitude",
    "longitude",
    "elevation_m",
    "burial_m",
    "start",
    "end",
)

_Position = tuple[float, float, float, float]
"""Latitude, longitude (degrees), elevation of the surface and burial (m)."""


@dataclass(frozen=True)
class _Entry:
    """One channel's epoch: its rank among the channels, position and lines."""

    rank: tuple[int, str]
    start: np.datetime64
    end: np.datetime64
    position: _Position
    line: int


def station_table(channels: TextTable) -> TextTable:
    """Reduce a table of channels to one of stations and epochs.

    Several channels of one station and time count once: those of a seismometer
    (instrument codes H and L, then P, then N [1]_) go before others, among them the
    first location code. Where channels move, the station gets a further epoch.

    The elevation of a channel is that of the sensor, and its depth that of the
    sensor below the surface [2]_; a negative depth (a sensor on a building) counts
    as 0.

    Parameters
    ----------
    channels : TextTable
        Columns network, station, location, channel, latitude, longitude,
        elevation_m, depth_m, and optionally start, end.

    Returns
    -------
    TextTable
        The columns of a stations table.

    Raises
    ------
    FileProblemsError
        With every cell that cannot be read.

    References
    ----------
    .. [1] SEED reference manual 2.4, appendix A, channel naming.
    .. [2] FDSN StationXML schema 1.2, elements Elevation and Depth of Channel.
    """
    entries, backwards = _entries(channels)
    rows: list[tuple[str, str, np.datetime64, np.datetime64, _Position, int]] = []
    spread_m: dict[str, float] = {}
    for (network, station), found in entries.items():
        spread_m[f"{network}.{station}"] = _largest_spread_m(found)
        rows += [(network, station, *segment) for segment in _segments(found)]
    cells: dict[str, list[str]] = {name: [] for name in _KEPT}
    for network, station, start, end, position, _line in rows:
        values = (network, station, *map(repr, position), _moment(start), _moment(end))
        for name, cell in zip(_KEPT, values, strict=True):
            cells[name].append(cell)
    remarks = [*channels.remarks, *_remarks(channels.source, spread_m, backwards)]
    return TextTable(cells, [row[-1] for row in rows], channels.problems, remarks)


def _entries(channels: TextTable) -> tuple[dict[tuple[str, str], list[_Entry]], int]:
    """Gather the epochs of each station's channels, and count those that end too early."""
    reader = ColumnReader(channels)
    required = ("network", "station", "latitude", "longitude", "elevation_m")
    reader.require(required, (*required, "location", "channel", "depth_m", "start", "end"))
    latitude_deg = reader.number("latitude", LATITUDE)
    longitude_deg = reader.number("longitude", LONGITUDE)
    sensor_m = reader.number("elevation_m", SENSOR_ELEVATION)
    depth_m = np.maximum(reader.number("depth_m", SENSOR_DEPTH, optional=True, missing=0.0), 0.0)
    start = reader.time("start", optional=True, day_alone=True)
    end = reader.time("end", optional=True, day_alone=True)
    channels.problems.raise_if_any()
    start = np.where(np.isnat(start), _EVER, start)
    end = np.where(np.isnat(end), _NEVER, end)
    columns = channels.columns
    blank = [""] * len(channels)
    codes = [columns.get(name, blank) for name in _TEXT_COLUMNS]
    entries: dict[tuple[str, str], list[_Entry]] = {}
    for row, (network, station, location, channel) in enumerate(zip(*codes, strict=True)):
        of_station = entries.setdefault((network, station), [])
        if start[row] >= end[row]:
            continue
        position = (
            float(latitude_deg[row]),
            float(longitude_deg[row]),
            float(sensor_m[row] + depth_m[row]),
            float(depth_m[row]),
        )
        rank = (_instrument_rank(channel), location.replace("-", ""))
        entry = _Entry(rank, start[row], end[row], position, channels.lines[row])
        of_station.append(entry)
    return entries, int((start >= end).sum())


def _instrument_rank(channel: str) -> int:
    if channel == STATION_ITSELF:
        return len(_INSTRUMENTS) + 1
    code = channel[1:2].upper()
    return _INSTRUMENTS.index(code) if code and code in _INSTRUMENTS else len(_INSTRUMENTS)


def _segments(
    entries: list[_Entry],
) -> Iterable[tuple[np.datetime64, np.datetime64, _Position, int]]:
    """Follow one station through time; equal positions in a row are one segment."""
    unique = {(e.rank, e.start, e.end, e.position): e for e in reversed(entries)}
    ordered = sorted(unique.values(), key=lambda entry: entry.rank)
    moments = sorted({moment for entry in ordered for moment in (entry.start, entry.end)})
    segments: list[tuple[np.datetime64, np.datetime64, _Position, int]] = []
    for start, end in pairwise(moments):
        holding = next((e for e in ordered if e.start <= start and end <= e.end), None)
        if holding is None:
            continue
        if segments and segments[-1][2] == holding.position:
            segments[-1] = (segments[-1][0], end, *segments[-1][2:])
        else:
            segments.append((start, end, holding.position, holding.line))
    return segments


def _largest_spread_m(entries: list[_Entry]) -> float:
    """Largest distance between channels of a station that record at one time, m."""
    places = sorted({(e.start, e.end, e.position) for e in entries})
    largest = 0.0
    for number, (start, end, position) in enumerate(places):
        for other_start, other_end, other in places[number + 1 :]:
            if other_start < end and start < other_end and other != position:
                largest = max(largest, _apart_m(position, other))
    return largest


def _apart_m(one: _Position, other: _Position) -> float:
    north = (one[0] - other[0]) * _DEGREE_M
    shrink = np.cos(np.radians(one[0]))
    east = (one[1] - other[1] + 180.0) % 360.0 - 180.0
    up = (one[2] - one[3]) - (other[2] - other[3])
    return float(np.sqrt(north**2 + (east * shrink * _DEGREE_M) ** 2 + up**2))


def _remarks(source: str, spread_m: dict[str, float], backwards: int) -> list[Notice]:
    remarks = []
    far = {label: apart for label, apart in spread_m.items() if apart > _FAR_M}
    if far:
        named = few([f"{label} by {apart:.0f} m" for label, apart in far.items()])
        detail = (
            f"{len(far)} stations of {source} have channels or coordinates far apart at one "
            f"time ({named}); the seismometer with the first location code is taken"
        )
        remarks.append(Notice("warning", "channels_apart", source, detail))
    if backwards:
        detail = f"{backwards} epochs of {source} do not end after their start; left out"
        remarks.append(Notice("warning", "backward_epochs", source, detail))
    return remarks


def _moment(moment: np.datetime64) -> str:
    return "" if moment in (_EVER, _NEVER) else str(moment)

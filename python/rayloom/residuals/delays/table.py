"""Measured delays between pairs of stations: :class:`Delays`."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Final

import numpy as np

from rayloom.earth import standard_phase
from rayloom.survey import Events, Notice, Stations, SurveySettings
from rayloom.survey.columns import ColumnReader, Span
from rayloom.survey.notices import few
from rayloom.survey.references import find_events, find_stations
from rayloom.survey.tables import ColumnTable, FloatArray, IndexArray, TextArray, TimeArray
from rayloom.survey.text_table import TextTable, read_text_table
from rayloom.survey.uncertainty import read_uncertainty

DELAY: Final = Span(-600.0, 600.0, "s", "arrival at station a minus arrival at station b")
DEFAULT_PHASE: Final = "P"
_TYPICAL_TRAVEL: Final = np.timedelta64(720, "s")
_REQUIRED: Final = ("event", "network_a", "station_a", "network_b", "station_b", "delay_s")
_OPTIONAL: Final = ("phase", "uncertainty_s", "quality")


@dataclass(frozen=True, eq=False)
class Delays(ColumnTable):
    """Differences of arrival times, one row per pair of stations.

    Parameters
    ----------
    event_index : (n,) int array
        Row in the events table.
    first_index, second_index : (n,) int arrays
        Rows of stations a and b in the stations table.
    phase : (n,) str array
        Usual phase name.
    delay_s : (n,) float array
        Arrival at a minus arrival at b, s.
    uncertainty_s : (n,) float array
        Standard deviation, s.
    """

    event_index: IndexArray
    first_index: IndexArray
    second_index: IndexArray
    phase: TextArray
    delay_s: FloatArray
    uncertainty_s: FloatArray


def read_delays(
    path: str | Path,
    stations: Stations,
    events: Events,
    *,
    settings: SurveySettings | None = None,
    notices: list[Notice] | None = None,
) -> Delays:
    """Read delays between stations.

    Columns: event, network_a, station_a, network_b, station_b, delay_s (arrival at a minus
    arrival at b) and uncertainty_s or quality; phase is optional, P without it. Other
    columns are ignored.

    Parameters
    ----------
    path : str or Path
        The file (CSV).
    stations, events : Stations, Events
        Tables that the delays refer to.
    settings : SurveySettings, optional
        Uncertainty by default and of each quality class.
    notices : list of Notice, optional
        Remarks are appended here.

    Returns
    -------
    Delays

    Raises
    ------
    FileAccessError
        If the file cannot be read.
    FileProblemsError
        With every problem of the file: line, column, value, what was expected.
    """
    table = read_text_table(path)
    reader = ColumnReader(table)
    known = _REQUIRED + _OPTIONAL
    reader.require(_REQUIRED, known)
    remarks = [] if reader.has("phase") else reader.misspelt(["phase"], known)
    event_index = find_events(reader.text("event"), events, table.lines, table.problems)
    phase = reader.text("phase") if reader.has("phase") else np.full(len(table), DEFAULT_PHASE)
    delays = Delays(
        event_index=event_index,
        first_index=_stations_of(reader, "a", event_index, stations, events),
        second_index=_stations_of(reader, "b", event_index, stations, events),
        phase=np.array([standard_phase(str(name)) for name in phase], dtype=np.str_),
        delay_s=reader.number("delay_s", DELAY),
        uncertainty_s=read_uncertainty(reader, settings or SurveySettings(), remarks),
    )
    _check_pairs(delays, stations, table)
    table.problems.raise_if_any()
    if notices is not None:
        notices += [*remarks, *_repeats(delays, table.lines, table.source)]
    return delays


def _stations_of(
    reader: ColumnReader, side: str, event_index: IndexArray, stations: Stations, events: Events
) -> IndexArray:
    """Find the stations of one side at the time of a typical arrival."""
    table = reader.table
    origin = np.where(
        event_index >= 0, events.time[np.maximum(event_index, 0)], np.datetime64("NaT", "ns")
    )
    arrival: TimeArray = np.add(origin, _TYPICAL_TRAVEL)
    network, station = (reader.text(f"{what}_{side}") for what in ("network", "station"))
    return find_stations(network, station, arrival, stations, table.lines, table.problems)


def _check_pairs(delays: Delays, stations: Stations, table: TextTable) -> None:
    """Note delays of a station against itself."""
    same = (delays.first_index == delays.second_index) & (delays.first_index >= 0)
    for row in np.flatnonzero(same).tolist():
        label = stations.labels[delays.first_index[row]]
        table.problems.add(
            table.lines[row], f"a delay of {label} against itself; expected two stations"
        )


def _repeats(delays: Delays, lines: list[int], source: str) -> list[Notice]:
    """Tell of pairs measured more than once; each measurement counts."""
    first: dict[tuple[int, int, int, str], int] = {}
    found = []
    for row, key in enumerate(
        zip(
            delays.event_index.tolist(),
            np.minimum(delays.first_index, delays.second_index).tolist(),
            np.maximum(delays.first_index, delays.second_index).tolist(),
            delays.phase.tolist(),
            strict=True,
        )
    ):
        other = first.setdefault(key, row)
        if other != row:
            found.append(f"{lines[other]} and {lines[row]}")
    if not found:
        return []
    detail = (
        f"{len(found)} rows of {source} measure a pair again (lines {few(found)}); "
        "each counts by its uncertainty"
    )
    return [Notice("info", "repeated_delays", source, detail)]

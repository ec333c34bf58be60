"""What was read of each arrival: a travel time, or a residual that others computed."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Final

import numpy as np

from rayloom.earth import standard_phase
from rayloom.survey import Events, Notice, Stations, Survey, SurveySettings
from rayloom.survey.columns import ColumnReader, Span
from rayloom.survey.formats import Source, read_table
from rayloom.survey.references import find_events, find_stations
from rayloom.survey.repeats import drop_repeats
from rayloom.survey.tables import (
    BoolArray,
    ColumnTable,
    FloatArray,
    IndexArray,
    TextArray,
    TimeArray,
    seconds_between,
)
from rayloom.survey.text_table import TextTable
from rayloom.survey.uncertainty import read_uncertainty

_TYPICAL_TRAVEL: Final = np.timedelta64(720, "s")
"""Time after the origin at which the epoch of a station is looked up."""

RESIDUAL: Final = Span(-3600.0, 3600.0, "s", "observed minus predicted, in seconds")

_REQUIRED: Final = ("event", "network", "station", "phase", "residual_s")


@dataclass(frozen=True, eq=False)
class Readings(ColumnTable):
    """One row per reading.

    Parameters
    ----------
    event_index, station_index : (n,) int arrays
        Rows in the events and the stations table.
    phase : (n,) str array
        Phase name.
    observed_s : (n,) float array
        Travel time, or residual, s.
    uncertainty_s : (n,) float array
        Standard deviation, s.
    """

    event_index: IndexArray
    station_index: IndexArray
    phase: TextArray
    observed_s: FloatArray
    uncertainty_s: FloatArray


def with_usual_names(readings: Readings) -> Readings:
    """Call every phase by its usual name, so that aliases form one group with it."""
    names, number = np.unique(readings.phase, return_inverse=True)
    usual = np.array([standard_phase(str(name)) for name in names], dtype=np.str_)
    return replace(readings, phase=usual[number])


def travel_times_of(survey: Survey) -> Readings:
    """Take the travel times of a survey's picks: pick time minus origin time."""
    picks = survey.picks
    origin = survey.events.time[picks.event_index]
    return Readings(
        picks.event_index,
        picks.station_index,
        picks.phase,
        seconds_between(origin, picks.time),
        picks.uncertainty_s,
    )


def read_ready_residuals(
    path: Source,
    stations: Stations,
    events: Events,
    settings: SurveySettings,
    notices: list[Notice],
) -> Readings:
    """Read residuals from CSV; a station's epoch is that of a typical arrival.

    Raises
    ------
    FileAccessError
        If the file cannot be read.
    FileProblemsError
        With every problem of the file: line, column, value, what was expected.
    """
    table = read_table(path, "residuals")
    reader = ColumnReader(table)
    reader.require(_REQUIRED, (*_REQUIRED, "uncertainty_s", "quality"))
    event, network, station = (reader.text(name) for name in ("event", "network", "station"))
    event_index = find_events(event, events, table.lines, table.problems)
    origin = np.where(event_index >= 0, events.time[event_index], np.datetime64("NaT", "ns"))
    arrival: TimeArray = np.add(origin, _TYPICAL_TRAVEL)
    readings = Readings(
        event_index,
        find_stations(network, station, arrival, stations, table.lines, table.problems),
        reader.text("phase"),
        reader.number("residual_s", RESIDUAL),
        read_uncertainty(reader, settings, notices),
    )
    table.problems.raise_if_any()
    names = [
        " ".join(words) for words in zip(event, network, station, readings.phase, strict=True)
    ]
    return readings.select(_kept_rows(readings, names, table, notices))


def _kept_rows(
    readings: Readings, names: list[str], table: TextTable, notices: list[Notice]
) -> BoolArray:
    keys = zip(
        readings.event_index.tolist(),
        readings.station_index.tolist(),
        readings.phase.tolist(),
        strict=True,
    )
    values = np.stack([readings.observed_s, readings.uncertainty_s], axis=1)
    return drop_repeats(keys, names, values, table, notices)

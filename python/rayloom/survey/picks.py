"""The arrival picks of a survey."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np

from rayloom.survey.catalogues import picks_of_survey
from rayloom.survey.columns import ColumnReader
from rayloom.survey.events import Events
from rayloom.survey.formats import Progress, Source, read_table
from rayloom.survey.notices import Notice
from rayloom.survey.references import find_events, find_stations
from rayloom.survey.repeats import drop_repeats
from rayloom.survey.settings import SurveySettings
from rayloom.survey.stations import Stations
from rayloom.survey.tables import (
    ColumnTable,
    FloatArray,
    IndexArray,
    TextArray,
    TimeArray,
    seconds_between,
)
from rayloom.survey.text_table import TextTable, text_table_of_frame
from rayloom.survey.uncertainty import read_uncertainty

if TYPE_CHECKING:
    import pandas as pd

LATEST_ARRIVAL_S: Final = 3600.0
"""A pick later than this after its origin belongs to another event or day."""

_REQUIRED: Final = ("event", "network", "station", "phase", "time")
_OPTIONAL: Final = ("uncertainty_s", "quality")


@dataclass(frozen=True, eq=False)
class Picks(ColumnTable):
    """Arrival times, one row per pick.

    Parameters
    ----------
    event_index, station_index : (n,) int arrays
        Rows in the events and the stations table.
    phase : (n,) str array
        Phase name.
    time : (n,) datetime64[ns] array
        Arrival time, UTC.
    uncertainty_s : (n,) float array
        Standard deviation, s.
    """

    event_index: IndexArray
    station_index: IndexArray
    phase: TextArray
    time: TimeArray
    uncertainty_s: FloatArray

    def to_frame(self, stations: Stations, events: Events) -> pd.DataFrame:
        """Return a data frame with the columns of the picks file.

        Parameters
        ----------
        stations, events : Stations, Events
            Tables that the picks refer to.

        Returns
        -------
        DataFrame
            One row per pick.
        """
        import pandas as pd

        return pd.DataFrame(
            {
                "event": events.event[self.event_index],
                "network": stations.network[self.station_index],
                "station": stations.station[self.station_index],
                "phase": self.phase,
                "time": self.time,
                "uncertainty_s": self.uncertainty_s,
            }
        )

    @classmethod
    def from_frame(
        cls,
        frame: pd.DataFrame,
        stations: Stations,
        events: Events,
        *,
        settings: SurveySettings | None = None,
        notices: list[Notice] | None = None,
    ) -> Picks:
        """Take picks from a data frame with the columns of the picks file.

        Parameters
        ----------
        frame : DataFrame
            One row per pick.
        stations, events : Stations, Events
            Tables that the picks refer to.
        settings : SurveySettings, optional
            Uncertainty by default and of each quality class.
        notices : list of Notice, optional
            Remarks are appended here.

        Returns
        -------
        Picks

        Raises
        ------
        FileProblemsError
            With every problem of the frame, as for a file.
        """
        table = text_table_of_frame(frame, "picks frame")
        return _picks(table, stations, events, settings or SurveySettings(), notices)


def read_picks(
    path: Source,
    stations: Stations,
    events: Events,
    *,
    settings: SurveySettings | None = None,
    notices: list[Notice] | None = None,
    progress: Progress | None = None,
) -> Picks:
    """Read picks from CSV or QuakeML.

    Columns of CSV: event, network, station, phase, time and uncertainty_s or quality
    (or both: a stated uncertainty goes before the quality class). Other columns
    are ignored. Repeated identical rows are dropped with a notice; different picks
    of one event, station and phase stay, with a notice, until their residuals
    tell which to use. Picks of QuakeML that are of other stations or events than
    those given are left out with a notice, and take their phase names from arrivals.

    Parameters
    ----------
    path : path, sequence of paths or DataFrame
        Files, or folders of files, formats told by contents; or a data frame with
        the columns of the CSV file.
    stations, events : Stations, Events
        Tables that the picks refer to.
    settings : SurveySettings, optional
        Uncertainty by default and of each quality class.
    notices : list of Notice, optional
        Remarks are appended here.
    progress : callable, optional
        Called with the bytes read and the bytes in all.

    Returns
    -------
    Picks

    Raises
    ------
    FileAccessError
        If a file cannot be read.
    FileProblemsError
        With every problem of the files: line, column, value, what was expected.
    MissingExtraError
        If a file is QuakeML and obspy is not installed.
    """

    def fit(catalogue: TextTable) -> TextTable:
        return picks_of_survey(catalogue, stations, events, latest_arrival_s=LATEST_ARRIVAL_S)

    table = read_table(path, "picks", fit=fit, progress=progress)
    return _picks(table, stations, events, settings or SurveySettings(), notices)


def _picks(
    table: TextTable,
    stations: Stations,
    events: Events,
    settings: SurveySettings,
    notices: list[Notice] | None,
) -> Picks:
    reader = ColumnReader(table)
    known = _REQUIRED + _OPTIONAL
    reader.require(_REQUIRED, known)
    misspelt = reader.misspelt(_OPTIONAL, known) if reader.has("quality") else []
    remarks = [*table.remarks, *misspelt]
    event, network, station = (reader.text(name) for name in ("event", "network", "station"))
    time = reader.time("time")
    picks = Picks(
        event_index=find_events(event, events, table.lines, table.problems),
        station_index=find_stations(network, station, time, stations, table.lines, table.problems),
        phase=reader.text("phase"),
        time=time,
        uncertainty_s=read_uncertainty(reader, settings, remarks),
    )
    _check_times(picks, events, table)
    table.problems.raise_if_any()
    values = np.stack([picks.time.astype(np.float64), picks.uncertainty_s], axis=1)
    names = [" ".join(words) for words in zip(event, network, station, picks.phase, strict=True)]
    picks = picks.select(drop_repeats(_keys(picks), names, values, table, remarks))
    if notices is not None:
        notices.extend(remarks)
    return picks


def _check_times(picks: Picks, events: Events, table: TextTable) -> None:
    """Note arrivals that do not follow their origin within an hour."""
    origin = np.where(
        picks.event_index >= 0,
        events.time[np.maximum(picks.event_index, 0)],
        np.datetime64("NaT", "ns"),
    )
    after_s = seconds_between(origin, picks.time)
    for row in np.flatnonzero((after_s <= 0.0) | (after_s > LATEST_ARRIVAL_S)).tolist():
        side = "before" if after_s[row] <= 0.0 else "after"
        event = events.event[picks.event_index[row]]
        table.problems.add(
            table.lines[row],
            f"column time: {table.columns['time'][row]!r}, {abs(after_s[row]):.1f} s {side} the "
            f"origin of event {event}; expected a time within an hour after it "
            "(wrong event, day or clock?)",
        )


def _keys(picks: Picks) -> list[tuple[int, int, str]]:
    columns = (picks.event_index.tolist(), picks.station_index.tolist(), picks.phase.tolist())
    return list(zip(*columns, strict=True))

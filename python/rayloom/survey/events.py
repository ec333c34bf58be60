"""The events of a survey."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Final

import numpy as np

from rayloom.survey.columns import ColumnReader, Span
from rayloom.survey.formats import Progress, Source, read_table
from rayloom.survey.notices import Notice
from rayloom.survey.problems import Problems
from rayloom.survey.spans import LATITUDE, LONGITUDE
from rayloom.survey.stations import wrapped_longitude_deg
from rayloom.survey.tables import (
    BoolArray,
    ColumnTable,
    FloatArray,
    TextArray,
    TimeArray,
    no_floats,
)
from rayloom.survey.text_table import TextTable, text_table_of_frame

if TYPE_CHECKING:
    import pandas as pd

DEPTH: Final = Span(0.0, 800.0, "km", "positive down; metres? above sea level write 0")
MAGNITUDE: Final = Span(-3.0, 10.5, "magnitude units", "leave it blank where unknown")

_REQUIRED: Final = ("event", "time", "latitude", "longitude", "depth_km")
_OPTIONAL: Final = ("magnitude",)


@dataclass(frozen=True, eq=False)
class Events(ColumnTable):
    """Hypocentres, one row per event.

    Parameters
    ----------
    event : (n,) str array
        Name.
    time : (n,) datetime64[ns] array
        Origin time, UTC.
    latitude_deg : (n,) float array
        Geographic latitude (WGS84), degrees north.
    longitude_deg : (n,) float array
        Longitude, degrees east.
    depth_km : (n,) float array
        Depth below sea level, km.
    magnitude : (n,) float array, optional
        NaN where unknown.
    """

    event: TextArray
    time: TimeArray
    latitude_deg: FloatArray
    longitude_deg: FloatArray
    depth_km: FloatArray
    magnitude: FloatArray = field(default_factory=no_floats)

    def __post_init__(self) -> None:
        if not len(self.magnitude):
            object.__setattr__(self, "magnitude", np.full(len(self.event), np.nan))
        super().__post_init__()

    def to_frame(self) -> pd.DataFrame:
        """Return a data frame with the columns of the events file.

        Returns
        -------
        DataFrame
            One row per event.
        """
        import pandas as pd

        return pd.DataFrame(
            {
                "event": self.event,
                "time": self.time,
                "latitude": self.latitude_deg,
                "longitude": self.longitude_deg,
                "depth_km": self.depth_km,
                "magnitude": self.magnitude,
            }
        )

    @classmethod
    def from_frame(cls, frame: pd.DataFrame, *, notices: list[Notice] | None = None) -> Events:
        """Take events from a data frame with the columns of the events file.

        Parameters
        ----------
        frame : DataFrame
            One row per event.
        notices : list of Notice, optional
            Remarks are appended here.

        Returns
        -------
        Events

        Raises
        ------
        FileProblemsError
            With every problem of the frame, as for a file.
        """
        return _events(text_table_of_frame(frame, "events frame"), notices)


def read_events(
    path: Source, *, notices: list[Notice] | None = None, progress: Progress | None = None
) -> Events:
    """Read events from CSV, QuakeML or the text of an FDSN event service.

    Columns of CSV: event, time, latitude, longitude, depth_km; optional magnitude.
    Other columns are ignored. Of QuakeML the preferred origins count; events are
    named by the last part of their identifier.

    Parameters
    ----------
    path : path, sequence of paths or DataFrame
        Files, or folders of files, formats told by contents; or a data frame with
        the columns of the CSV file.
    notices : list of Notice, optional
        Remarks are appended here.
    progress : callable, optional
        Called with the bytes read and the bytes in all.

    Returns
    -------
    Events

    Raises
    ------
    FileAccessError
        If a file cannot be read.
    FileProblemsError
        With every problem of the files: line, column, value, what was expected.
    MissingExtraError
        If a file is QuakeML and obspy is not installed.
    """
    return _events(read_table(path, "events", progress=progress), notices)


def _events(table: TextTable, notices: list[Notice] | None) -> Events:
    reader = ColumnReader(table)
    known = _REQUIRED + _OPTIONAL
    reader.require(_REQUIRED, known)
    remarks = [*table.remarks, *reader.misspelt(_OPTIONAL, known)]
    events = Events(
        event=reader.text("event"),
        time=reader.time("time"),
        latitude_deg=reader.number("latitude", LATITUDE),
        longitude_deg=wrapped_longitude_deg(reader.number("longitude", LONGITUDE)),
        depth_km=reader.number("depth_km", DEPTH),
        magnitude=reader.number("magnitude", MAGNITUDE, optional=True),
    )
    if reader.has("event"):
        events = events.select(_first_of_each(events, table.lines, table.problems, remarks))
    table.problems.raise_if_any()
    if notices is not None:
        notices.extend(remarks)
    return events


def _first_of_each(
    events: Events, lines: list[int], problems: Problems, notices: list[Notice]
) -> BoolArray:
    """Mark the first row of each event; repeats that differ from it are problems."""
    kept = np.ones(len(events), dtype=bool)
    first: dict[str, int] = {}
    names = list(events.column_names())
    for row, event in enumerate(events.event.tolist()):
        other = first.setdefault(event, row)
        if other == row or not event:
            continue
        kept[row] = False
        pair = f"{problems.place}s {lines[other]} and {lines[row]}"
        columns = [getattr(events, name) for name in names]
        if all(
            column[row] == column[other] or _both_void(column, row, other) for column in columns
        ):
            detail = f"event {event}: {pair} of {problems.source} are the same; one is kept"
            notices.append(Notice("info", "repeated_event", event, detail))
        else:
            problems.add(
                lines[row],
                f"column event: {event!r}; stands in {problems.place} {lines[other]} with other "
                "values; expected one row per event",
            )
    return kept


def _both_void(column: np.ndarray, row: int, other: int) -> bool:
    """Whether both values are NaN or NaT, which never equal themselves."""
    return bool(column[row] != column[row] and column[other] != column[other])

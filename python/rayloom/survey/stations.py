"""The stations of a survey."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Final

import numpy as np

from rayloom.survey.columns import ColumnReader
from rayloom.survey.epochs import tidy_epochs
from rayloom.survey.formats import Progress, Source, read_table
from rayloom.survey.notices import Notice
from rayloom.survey.spans import BURIAL, ELEVATION, LATITUDE, LONGITUDE
from rayloom.survey.tables import (
    ColumnTable,
    FloatArray,
    TextArray,
    TimeArray,
    no_floats,
    no_times,
)
from rayloom.survey.text_table import TextTable, text_table_of_frame
from rayloom.units import M_PER_KM

if TYPE_CHECKING:
    import pandas as pd

_REQUIRED: Final = ("network", "station", "latitude", "longitude", "elevation_m")
_OPTIONAL: Final = ("burial_m", "start", "end")


@dataclass(frozen=True, eq=False)
class Stations(ColumnTable):
    """Where and when stations recorded; one row per station and epoch.

    Parameters
    ----------
    network, station : (n,) str arrays
        Codes.
    latitude_deg : (n,) float array
        Geographic latitude (WGS84), degrees north.
    longitude_deg : (n,) float array
        Longitude, degrees east.
    elevation_m : (n,) float array
        Elevation of the surface, or of the sea floor, metres above sea level.
    burial_m : (n,) float array, optional
        Depth of the sensor below that surface, metres; 0 where not given.
    start, end : (n,) datetime64[ns] arrays, optional
        Epoch, UTC; NaT where open.
    """

    network: TextArray
    station: TextArray
    latitude_deg: FloatArray
    longitude_deg: FloatArray
    elevation_m: FloatArray
    burial_m: FloatArray = field(default_factory=no_floats)
    start: TimeArray = field(default_factory=no_times)
    end: TimeArray = field(default_factory=no_times)

    def __post_init__(self) -> None:
        count = len(self.network)
        if not len(self.burial_m):
            object.__setattr__(self, "burial_m", np.zeros(count))
        for name in ("start", "end"):
            if not len(getattr(self, name)):
                object.__setattr__(self, name, np.full(count, "NaT", dtype="datetime64[ns]"))
        super().__post_init__()

    @property
    def depth_km(self) -> FloatArray:
        """Depth of each sensor, km below sea level (negative above), shape (n,)."""
        return (self.burial_m - self.elevation_m) / M_PER_KM

    @property
    def labels(self) -> TextArray:
        """``NET.STA`` of each row, shape (n,)."""
        return np.strings.add(np.strings.add(self.network, "."), self.station)

    def to_frame(self) -> pd.DataFrame:
        """Return a data frame with the columns of the stations file.

        Returns
        -------
        DataFrame
            One row per station.
        """
        import pandas as pd

        return pd.DataFrame(
            {
                "network": self.network,
                "station": self.station,
                "latitude": self.latitude_deg,
                "longitude": self.longitude_deg,
                "elevation_m": self.elevation_m,
                "burial_m": self.burial_m,
                "start": self.start,
                "end": self.end,
            }
        )

    @classmethod
    def from_frame(cls, frame: pd.DataFrame, *, notices: list[Notice] | None = None) -> Stations:
        """Take stations from a data frame with the columns of the stations file.

        Parameters
        ----------
        frame : DataFrame
            One row per station.
        notices : list of Notice, optional
            Remarks are appended here.

        Returns
        -------
        Stations

        Raises
        ------
        FileProblemsError
            With every problem of the frame, as for a file.
        """
        return _stations(text_table_of_frame(frame, "stations frame"), notices)


def read_stations(
    path: Source, *, notices: list[Notice] | None = None, progress: Progress | None = None
) -> Stations:
    """Read stations from CSV, StationXML or the text of an FDSN station service.

    Columns of CSV: network, station, latitude, longitude, elevation_m; optional
    burial_m, start, end. Other columns are ignored. Channels of the other formats
    are reduced to one position per station and time.

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
    Stations

    Raises
    ------
    FileAccessError
        If a file cannot be read.
    FileProblemsError
        With every problem of the files: line, column, value, what was expected.
    MissingExtraError
        If a file is StationXML and obspy is not installed.
    """
    return _stations(read_table(path, "stations", progress=progress), notices)


def _stations(table: TextTable, notices: list[Notice] | None) -> Stations:
    reader = ColumnReader(table)
    known = _REQUIRED + _OPTIONAL
    reader.require(_REQUIRED, known)
    remarks = [*table.remarks, *reader.misspelt(_OPTIONAL, known)]
    longitude_deg = reader.number("longitude", LONGITUDE)
    stations = Stations(
        network=reader.text("network"),
        station=reader.text("station"),
        latitude_deg=reader.number("latitude", LATITUDE),
        longitude_deg=wrapped_longitude_deg(longitude_deg),
        elevation_m=reader.number("elevation_m", ELEVATION),
        burial_m=reader.number("burial_m", BURIAL, optional=True, missing=0.0),
        start=reader.time("start", optional=True, day_alone=True),
        end=reader.time("end", optional=True, day_alone=True),
    )
    for row in np.flatnonzero(stations.end <= stations.start):
        table.problems.add(
            table.lines[row],
            f"column end: {table.columns['end'][row]!r}; expected a time after the start "
            f"({table.columns['start'][row]})",
        )
    if not table.problems:
        stations = tidy_epochs(stations, table.lines, table.problems, remarks)
    table.problems.raise_if_any()
    if notices is not None:
        notices.extend(remarks)
    return stations


def wrapped_longitude_deg(longitude_deg: FloatArray) -> FloatArray:
    """Bring longitudes of -180 to 360 degrees east into -180 to 180; others stay exactly."""
    return np.where(longitude_deg > 180.0, longitude_deg - 360.0, longitude_deg)

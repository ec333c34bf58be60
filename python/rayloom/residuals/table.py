"""The table of residuals."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from rayloom.earth import ReferenceEarth
from rayloom.residuals.exclusions import Exclusions
from rayloom.residuals.groups import group_numbers, relative_to_median_s
from rayloom.survey import Events, Notice, Stations
from rayloom.survey.tables import (
    BoolArray,
    ColumnTable,
    FloatArray,
    IndexArray,
    TextArray,
    no_floats,
)
from rayloom.writing import write_frame

if TYPE_CHECKING:
    import pandas as pd


@dataclass(frozen=True, eq=False)
class Residuals(ColumnTable):
    """Residuals, observed minus predicted: late is positive.

    Parameters
    ----------
    stations, events : Stations, Events
        The tables that the indices point into.
    earth : ReferenceEarth
        The Earth of the predictions.
    event_index, station_index : (n,) int arrays
        Rows in the events and the stations table.
    phase, wave : (n,) str arrays
        Phase name; wave type at the station, ``"P"`` or ``"S"``.
    residual_s : (n,) float array
        Observed minus predicted arrival time, s.
    uncertainty_s : (n,) float array
        Standard deviation of the pick, s.
    distance_deg, azimuth_deg, back_azimuth_deg : (n,) float arrays
        Epicentral distance, azimuth at the event and at the station, degrees,
        on geocentric latitudes.
    predicted_s : (n,) float array
        Predicted travel time, s, its corrections included.
    ellipticity_s, elevation_s : (n,) float arrays
        The parts of it due to ellipticity and to elevation and burial, s.
    crust_s : (n,) float array, optional
        The part of it due to local crust, s; 0 if not given.
    relative_residual_s : (n,) float array, optional
        Residual minus the median of its group (event, phase), s; computed if
        not given.
    excluded : Exclusions, optional
        Picks that were left out, with reasons.
    notices : list of Notice, optional
        Remarks made on the way.
    """

    stations: Stations
    events: Events
    earth: ReferenceEarth
    event_index: IndexArray
    station_index: IndexArray
    phase: TextArray
    wave: TextArray
    residual_s: FloatArray
    uncertainty_s: FloatArray
    distance_deg: FloatArray
    azimuth_deg: FloatArray
    back_azimuth_deg: FloatArray
    predicted_s: FloatArray
    ellipticity_s: FloatArray
    elevation_s: FloatArray
    crust_s: FloatArray = field(default_factory=no_floats)
    relative_residual_s: FloatArray = field(default_factory=no_floats)
    excluded: Exclusions = field(default_factory=Exclusions)
    notices: list[Notice] = field(default_factory=list)

    def __post_init__(self) -> None:
        if not len(self.crust_s):
            object.__setattr__(self, "crust_s", np.zeros(len(self.residual_s)))
        if len(self.residual_s) and not len(self.relative_residual_s):
            group = group_numbers(self.event_index, self.phase)
            relative_s = relative_to_median_s(self.residual_s, group)
            object.__setattr__(self, "relative_residual_s", relative_s)
        super().__post_init__()

    @property
    def group_index(self) -> IndexArray:
        """Group (event, phase) of each row, numbered from 0, shape (n,)."""
        return group_numbers(self.event_index, self.phase)

    def select(self, rows: BoolArray | IndexArray) -> Residuals:
        """Return the residuals of some rows, relative to the medians of those rows.

        Parameters
        ----------
        rows : (n,) bool or (k,) int array
            Mask over the rows, or their numbers.

        Returns
        -------
        Residuals
        """
        columns = {name: getattr(self, name)[rows] for name in self.column_names()}
        columns["relative_residual_s"] = no_floats()
        return replace(self, **columns)

    def to_frame(self) -> pd.DataFrame:
        """Return a data frame with the columns of the residuals file and more.

        Returns
        -------
        DataFrame, n rows
        """
        import pandas as pd

        named = {
            "event": self.events.event[self.event_index],
            "network": self.stations.network[self.station_index],
            "station": self.stations.station[self.station_index],
        }
        skipped = ("event_index", "station_index")
        columns = {
            name: getattr(self, name) for name in self.column_names() if name not in skipped
        }
        return pd.DataFrame(named | columns)

    def write_csv(self, path: str | Path) -> None:
        """Write the table as CSV; :func:`read_residuals` reads it back.

        Parameters
        ----------
        path : str or Path
            The file.

        Raises
        ------
        FileAccessError
            If the file cannot be written.
        """
        write_frame(self.to_frame(), path)

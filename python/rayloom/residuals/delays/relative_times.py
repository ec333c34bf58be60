"""One relative time per event, phase and station: :class:`RelativeTimes`."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from rayloom.residuals.delays.adjustment import Adjustment, adjust
from rayloom.residuals.delays.table import Delays
from rayloom.residuals.groups import group_numbers
from rayloom.survey import Events, Stations
from rayloom.survey.tables import (
    BoolArray,
    ColumnTable,
    FloatArray,
    IndexArray,
    TextArray,
)

if TYPE_CHECKING:
    import pandas as pd


@dataclass(frozen=True, eq=False)
class RelativeTimes(ColumnTable):
    """Adjusted times, one row per event, phase and station.

    Parameters
    ----------
    event_index, station_index : (n,) int arrays
        Rows in the events and the stations table.
    phase : (n,) str array
        Phase name.
    time_s : (n,) float array
        Arrival time relative to the mean of the part, s.
    error_s : (n,) float array
        Standard error, s.
    closure_s : (n,) float array
        Root mean square misfit of the delays of the station, s.
    delay_count : (n,) int array
        Delays that the time rests on.
    part : (n,) int array
        Part of the stations of the event that delays connect; 0 is the largest.
    delays : Delays
        What was measured.
    delay_closure_s : (m,) float array
        Delay measured minus delay of the adjusted times, s.
    suspected : tuple of bool, m of them
        Delays that the others contradict, left out.
    """

    event_index: IndexArray
    station_index: IndexArray
    phase: TextArray
    time_s: FloatArray
    error_s: FloatArray
    closure_s: FloatArray
    delay_count: IndexArray
    part: IndexArray
    delays: Delays
    delay_closure_s: tuple[float, ...]
    suspected: tuple[bool, ...]

    def to_frame(self, stations: Stations, events: Events) -> pd.DataFrame:
        """Return a data frame with one row per adjusted time.

        Parameters
        ----------
        stations, events : Stations, Events
            Tables that the times refer to.

        Returns
        -------
        DataFrame
            Columns event, network, station, phase, time_s, error_s, closure_s, delays, part.
        """
        import pandas as pd

        return pd.DataFrame(
            {
                "event": events.event[self.event_index],
                "network": stations.network[self.station_index],
                "station": stations.station[self.station_index],
                "phase": self.phase,
                "relative_time_s": self.time_s,
                "error_s": self.error_s,
                "closure_s": self.closure_s,
                "delays": self.delay_count,
                "part": self.part,
            }
        )

    def delays_frame(self, stations: Stations, events: Events) -> pd.DataFrame:
        """Return a data frame with one row per delay: how well it closes, and if it is suspected.

        Parameters
        ----------
        stations, events : Stations, Events
            Tables that the delays refer to.

        Returns
        -------
        DataFrame
            Columns event, station_a, station_b, phase, delay_s, uncertainty_s, closure_s,
            suspected.
        """
        import pandas as pd

        delays = self.delays
        return pd.DataFrame(
            {
                "event": events.event[delays.event_index],
                "station_a": stations.labels[delays.first_index],
                "station_b": stations.labels[delays.second_index],
                "phase": delays.phase,
                "delay_s": delays.delay_s,
                "uncertainty_s": delays.uncertainty_s,
                "closure_s": self.delay_closure_s,
                "suspected": self.suspected,
            }
        )


def relative_times(delays: Delays) -> RelativeTimes:
    """Adjust the delays of each event and phase to one time per station.

    Parameters
    ----------
    delays : Delays
        What was measured.

    Returns
    -------
    RelativeTimes
    """
    group = group_numbers(delays.event_index, delays.phase)
    closure_s = np.zeros(len(delays))
    suspected = np.zeros(len(delays), dtype=bool)
    columns: list[tuple[np.ndarray, ...]] = []
    for number in range(int(group.max(initial=-1)) + 1):
        rows = np.flatnonzero(group == number)
        stations, ends = np.unique(
            np.concatenate([delays.first_index[rows], delays.second_index[rows]]),
            return_inverse=True,
        )
        first, second = ends[: len(rows)], ends[len(rows) :]
        found = adjust(
            first, second, delays.delay_s[rows], delays.uncertainty_s[rows], len(stations)
        )
        closure_s[rows], suspected[rows] = found.closure_s, found.suspected
        rms_s, count = _closures(found, first, second, len(stations))
        event = np.full(len(stations), delays.event_index[rows[0]])
        phase = np.full(len(stations), delays.phase[rows[0]])
        columns.append(
            (event, stations, phase, found.time_s, found.error_s, rms_s, count, found.part)
        )
    return _joined(columns, delays, closure_s, suspected)


def _closures(
    found: Adjustment, first: IndexArray, second: IndexArray, count: int
) -> tuple[FloatArray, IndexArray]:
    """RMS misfit, s, and number of the delays used at each station."""
    used = ~found.suspected
    ends = np.concatenate([first[used], second[used]])
    square = np.tile(found.closure_s[used] ** 2, 2)
    number = np.bincount(ends, minlength=count)
    return np.sqrt(np.bincount(ends, square, count) / np.maximum(number, 1)), number


def _joined(
    columns: list[tuple[np.ndarray, ...]],
    delays: Delays,
    closure_s: FloatArray,
    suspected: BoolArray,
) -> RelativeTimes:
    names = [name for name in RelativeTimes.column_names()]
    if columns:
        joined = [np.concatenate(parts) for parts in zip(*columns, strict=True)]
    else:
        joined = [np.empty(0) for _ in names]
    return RelativeTimes(
        **dict(zip(names, joined, strict=True)),
        delays=delays,
        delay_closure_s=tuple(closure_s.tolist()),
        suspected=tuple(suspected.tolist()),
    )

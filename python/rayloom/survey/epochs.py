"""Epochs of stations: repeated rows, overlaps, and the epoch of a pick's time."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import TYPE_CHECKING, Final

import numpy as np

from rayloom.survey.notices import Notice, few
from rayloom.survey.problems import Problems
from rayloom.survey.tables import BoolArray, IndexArray, TextArray, TimeArray

if TYPE_CHECKING:
    from rayloom.survey.stations import Stations

_EVER: Final = np.datetime64("1677-09-22", "ns")
_NEVER: Final = np.datetime64("2262-04-11", "ns")

UNKNOWN_STATION: Final = -1
"""Index of a station that the table does not have."""

NO_EPOCH: Final = -2
"""Index of a station that the table has, at another time."""


def tidy_epochs(
    stations: Stations, lines: Sequence[int], problems: Problems, notices: list[Notice]
) -> Stations:
    """Drop repeated rows, join overlapping epochs of one position, note conflicts.

    Parameters
    ----------
    stations : Stations
        As read.
    lines : (n,) sequence of int
        Line of each row.
    problems : Problems
        Gets each pair of overlapping epochs at different positions.
    notices : list of Notice
        Gets what was dropped or joined.
    """
    start, end = _bounds(stations)
    position = np.stack(
        [
            stations.latitude_deg,
            stations.longitude_deg,
            stations.elevation_m,
            stations.burial_m,
        ],
        axis=1,
    )
    dropped = np.zeros(len(stations), dtype=bool)
    joined: list[str] = []
    for label, rows in _repeated(stations.labels).items():
        ordered = sorted(rows, key=lambda row: (start[row], row))
        last = ordered[0]
        for row in ordered[1:]:
            if start[row] >= end[last]:
                last = row
            elif np.array_equal(position[row], position[last]):
                end[last] = max(end[last], end[row])
                dropped[row] = True
                joined.append(f"{label} {lines[last]} and {lines[row]}")
            else:
                problems.add(
                    lines[row],
                    f"station {label}: stands at another position in {problems.place} "
                    f"{lines[last]} at the same time; expected one position at a time "
                    "(correct it, or give both rows start and end)",
                )
    if joined:
        detail = (
            f"{len(joined)} rows of {problems.source} give a station's position again at "
            "overlapping times; "
            f"taken as one station each ({problems.place}s: {few(joined)})"
        )
        notices.append(Notice("info", "repeated_stations", problems.source, detail))
    closed = np.where(end == _NEVER, np.datetime64("NaT", "ns"), end)
    return replace(stations, end=closed).select(~dropped)


def _bounds(stations: Stations) -> tuple[TimeArray, TimeArray]:
    """Start and end with open ends replaced by the limits of the type."""
    start = np.where(np.isnat(stations.start), _EVER, stations.start)
    end = np.where(np.isnat(stations.end), _NEVER, stations.end)
    return start, end


def _repeated(labels: TextArray) -> dict[str, list[int]]:
    rows: dict[str, list[int]] = {}
    for row, label in enumerate(labels.tolist()):
        rows.setdefault(label, []).append(row)
    return {label: found for label, found in rows.items() if len(found) > 1}


class EpochFinder:
    """Finds the row of the stations table that holds for a code at a time.

    An epoch holds from its start, inclusive, to its end, exclusive.

    Parameters
    ----------
    stations : Stations
        The table.
    """

    def __init__(self, stations: Stations) -> None:
        self.stations = stations
        self._start, self._end = _bounds(stations)
        self._rows: dict[tuple[str, str], list[int]] = {}
        codes = zip(stations.network.tolist(), stations.station.tolist(), strict=True)
        for row, code in enumerate(codes):
            self._rows.setdefault(code, []).append(row)

    def find(self, network: TextArray, station: TextArray, time: TimeArray) -> IndexArray:
        """Return the row of each station code at each time.

        Parameters
        ----------
        network, station : (n,) str arrays
            Codes.
        time : (n,) datetime64[ns] array
            UTC; NaT matches any epoch.

        Returns
        -------
        (n,) int array
            Row, or ``UNKNOWN_STATION``, or ``NO_EPOCH``.
        """
        codes = list(zip(network.tolist(), station.tolist(), strict=True))
        first = np.array([self._rows.get(code, [-1])[0] for code in codes], dtype=np.int64)
        moved = [row for row, code in enumerate(codes) if len(self._rows.get(code, ())) > 1]
        found = np.where((first >= 0) & ~self._holds(first, time), NO_EPOCH, first)
        for row in moved:
            candidates = np.array(self._rows[codes[row]], dtype=np.int64)
            holding = candidates[self._holds(candidates, time[row])]
            found[row] = holding[0] if len(holding) else NO_EPOCH
        return found

    def networks_with(self, station: str) -> list[str]:
        """Networks in which a station of this code stands."""
        return sorted({network for network, code in self._rows if code == station})

    def epochs_text(self, network: str, station: str) -> str:
        """Write out the epochs of a station for a message."""
        rows = self._rows[network, station]
        return ", ".join(
            f"{_day(self.stations.start[row])} to {_day(self.stations.end[row])}" for row in rows
        )

    def _holds(self, rows: IndexArray, time: TimeArray | np.datetime64) -> BoolArray:
        inside = (self._start[rows] <= time) & (time < self._end[rows])
        return np.asarray(inside | np.isnat(time))


def _day(moment: np.datetime64) -> str:
    return "open" if np.isnat(moment) else str(moment.astype("datetime64[s]"))

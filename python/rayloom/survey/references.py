"""Which event and which station a row of picks or residuals names."""

from __future__ import annotations

import difflib
from collections.abc import Sequence
from typing import Final

import numpy as np

from rayloom.survey.epochs import NO_EPOCH, UNKNOWN_STATION, EpochFinder
from rayloom.survey.events import Events
from rayloom.survey.notices import few
from rayloom.survey.problems import Problems
from rayloom.survey.stations import Stations
from rayloom.survey.tables import BoolArray, IndexArray, TextArray, TimeArray

UNKNOWN_EVENT: Final = -1
_GUESSES: Final = 20


def find_events(
    event: TextArray, events: Events, lines: Sequence[int], problems: Problems
) -> IndexArray:
    """Return the row of each named event; each unknown name is one problem.

    Returns
    -------
    (n,) int array
        Row in the events table, -1 where unknown.
    """
    rows = {name: row for row, name in enumerate(events.event.tolist())}
    names = [(name,) for name in event.tolist()]
    found = np.array([rows.get(name, UNKNOWN_EVENT) for (name,) in names], dtype=np.int64)
    unknown = _lines_by_name(names, found == UNKNOWN_EVENT, lines)
    for number, ((name,), where) in enumerate(unknown.items()):
        close = difflib.get_close_matches(name, list(rows), n=1) if number < _GUESSES else []
        guess = f"; did you mean {close[0]!r}?" if close else ""
        text = f"column event: {name!r}; expected an event of the events table{guess}"
        problems.add(where[0], text + _elsewhere(where, problems))
    return found


def find_stations(
    network: TextArray,
    station: TextArray,
    time: TimeArray,
    stations: Stations,
    lines: Sequence[int],
    problems: Problems,
) -> IndexArray:
    """Return the row of each named station at its time; each unknown one is one problem.

    Returns
    -------
    (n,) int array
        Row in the stations table, negative where none holds.
    """
    finder = EpochFinder(stations)
    found = finder.find(network, station, time)
    codes = list(zip(network.tolist(), station.tolist(), strict=True))
    for (net, code), where in _lines_by_name(codes, found == UNKNOWN_STATION, lines).items():
        others = finder.networks_with(code)
        guess = f"; it has {code} in network {', '.join(others)}" if others else ""
        text = f"column station: '{net}.{code}'; expected a station of the stations table{guess}"
        problems.add(where[0], text + _elsewhere(where, problems))
    for (net, code), where in _lines_by_name(codes, found == NO_EPOCH, lines).items():
        epochs = finder.epochs_text(net, code)
        text = f"column time: outside the epochs of station {net}.{code}; expected {epochs}"
        problems.add(where[0], text + _elsewhere(where, problems))
    return found


def _lines_by_name(
    names: Sequence[tuple[str, ...]], unknown: BoolArray, lines: Sequence[int]
) -> dict[tuple[str, ...], list[int]]:
    """Gather the lines on which each unknown name stands (blank names are noted elsewhere)."""
    where: dict[tuple[str, ...], list[int]] = {}
    for row in np.flatnonzero(unknown).tolist():
        name = names[row]
        if all(name):
            where.setdefault(name, []).append(lines[row])
    return where


def _elsewhere(lines: list[int], problems: Problems) -> str:
    """Name the further lines with the same problem."""
    further = lines[1:]
    if not further:
        return ""
    plural = "s" if len(further) > 1 else ""
    return f" (also {problems.place}{plural} {few(further)})"

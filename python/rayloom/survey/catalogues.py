"""Picks of a catalogue that concern the survey, and those that do not."""

from __future__ import annotations

import numpy as np

from rayloom.survey.columns import ColumnReader
from rayloom.survey.epochs import NO_EPOCH, UNKNOWN_STATION, EpochFinder
from rayloom.survey.events import Events
from rayloom.survey.notices import Notice, few
from rayloom.survey.problems import Problems
from rayloom.survey.references import UNKNOWN_EVENT, find_events
from rayloom.survey.stations import Stations
from rayloom.survey.tables import BoolArray, TimeArray, seconds_between
from rayloom.survey.text_table import TextTable


def picks_of_survey(
    table: TextTable, stations: Stations, events: Events, *, latest_arrival_s: float
) -> TextTable:
    """Keep the picks of a catalogue that belong to the stations and events given.

    A catalogue names stations of the whole world and times that no table was made
    for, so what would be a fault in a table of picks is left out here, counted by
    reason in notices. A blank network is filled in where one network only has a
    station of that code.

    Parameters
    ----------
    table : TextTable
        Picks table.
    stations, events : Stations, Events
        The survey.
    latest_arrival_s : float
        Time after the origin beyond which no pick counts, s.
    """
    named = _with_networks(table, stations)
    scratch = Problems(table.source)
    reader = ColumnReader(TextTable(named.columns, named.lines, scratch))
    codes = {name: reader.text(name) for name in ("event", "network", "station", "phase")}
    time = reader.time("time")
    event = find_events(codes["event"], events, table.lines, scratch)
    found = EpochFinder(stations).find(codes["network"], codes["station"], time)
    reasons = {
        "of events that the events table does not have": event == UNKNOWN_EVENT,
        "at stations that the stations table does not have": found == UNKNOWN_STATION,
        "outside the epochs of their stations": found == NO_EPOCH,
        "not within an hour after the origin": _out_of_time(event, time, events, latest_arrival_s),
    }
    kept = np.ones(len(table), dtype=bool)
    remarks = list(named.remarks)
    for reason, rows in reasons.items():
        new = rows & kept
        if new.any():
            remarks.append(_left_out(named, new, reason))
        kept &= ~rows
    return _selected(named, kept, remarks)


def _with_networks(table: TextTable, stations: Stations) -> TextTable:
    """Fill blank networks from the stations table where it leaves no doubt."""
    finder = EpochFinder(stations)
    networks = list(table.columns["network"])
    filled = 0
    for row, network in enumerate(networks):
        if not network:
            possible = finder.networks_with(table.columns["station"][row])
            networks[row] = possible[0] if len(possible) == 1 else "?"
            filled += len(possible) == 1
    remarks = list(table.remarks)
    if filled:
        detail = (
            f"{filled} picks of {table.source} name no network; "
            "taken from the one station of that code"
        )
        remarks.append(Notice("info", "networks_filled_in", table.source, detail))
    columns = table.columns | {"network": networks}
    return TextTable(columns, table.lines, table.problems, remarks)


def _out_of_time(
    event: np.ndarray, time: TimeArray, events: Events, latest_arrival_s: float
) -> BoolArray:
    after_s = seconds_between(events.time[np.maximum(event, 0)], time)
    return np.asarray((event >= 0) & ((after_s <= 0.0) | (after_s > latest_arrival_s)))


def _left_out(table: TextTable, rows: BoolArray, reason: str) -> Notice:
    columns = table.columns
    names = dict.fromkeys(
        f"{columns['network'][row]}.{columns['station'][row]} of {columns['event'][row]}"
        for row in np.flatnonzero(rows).tolist()
    )
    detail = (
        f"{int(rows.sum())} of {len(table)} picks of {table.source} are {reason} "
        f"({few(list(names))}); left out"
    )
    return Notice("warning", "picks_left_out", table.source, detail)


def _selected(table: TextTable, kept: BoolArray, remarks: list[Notice]) -> TextTable:
    rows = np.flatnonzero(kept).tolist()
    columns = {name: [cells[row] for row in rows] for name, cells in table.columns.items()}
    return TextTable(columns, [table.lines[row] for row in rows], table.problems, remarks)

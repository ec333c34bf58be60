"""A whole survey: stations, events and picks that belong together."""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path

import numpy as np

from rayloom.survey.events import Events, read_events
from rayloom.survey.network import remote_stations
from rayloom.survey.notices import Notice, few
from rayloom.survey.picks import Picks, read_picks
from rayloom.survey.settings import SurveySettings
from rayloom.survey.stations import Stations, read_stations


@dataclass(frozen=True, eq=False)
class Survey:
    """Stations, events and picks, with the remarks made while reading them.

    Parameters
    ----------
    stations : Stations
    events : Events
    picks : Picks
        Their indices point into ``stations`` and ``events``.
    notices : list of Notice
        What was assumed, dropped or looks odd.
    """

    stations: Stations
    events: Events
    picks: Picks
    notices: list[Notice] = field(default_factory=list)


def read_survey(
    *,
    stations: str | Path,
    events: str | Path,
    picks: str | Path,
    settings: SurveySettings | None = None,
) -> Survey:
    """Read a survey from three CSV files.

    Parameters
    ----------
    stations, events, picks : str or Path
        The files; their columns are described at :func:`read_stations`,
        :func:`read_events` and :func:`read_picks`.
    settings : SurveySettings, optional
        Uncertainty by default and of each quality class.

    Returns
    -------
    Survey

    Raises
    ------
    FileAccessError
        If a file cannot be read.
    FileProblemsError
        With every problem of the first file that has any.
    """
    notices: list[Notice] = []
    station_table = read_stations(stations, notices=notices)
    event_table = read_events(events, notices=notices)
    pick_table = read_picks(picks, station_table, event_table, settings=settings, notices=notices)
    notices += remote_stations(station_table)
    notices += _without_picks(station_table, event_table, pick_table)
    return Survey(station_table, event_table, pick_table, notices)


def _without_picks(stations: Stations, events: Events, picks: Picks) -> list[Notice]:
    notices = []
    tables = (
        ("station", stations.labels, picks.station_index),
        ("event", events.event, picks.event_index),
    )
    for kind, labels, used in tables:
        idle = labels[np.setdiff1d(np.arange(len(labels)), used)]
        if len(idle):
            detail = f"{len(idle)} of {len(labels)} {kind}s have no pick ({few(idle.tolist())})"
            notices.append(Notice("info", f"{kind}_without_picks", f"{kind}s", detail))
    return notices

"""A whole survey: stations, events and picks that belong together."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from rayloom.survey.events import Events, read_events
from rayloom.survey.formats import Progress, Source, total_bytes
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
    stations: Source,
    events: Source,
    picks: Source,
    settings: SurveySettings | None = None,
    progress: Progress | None = None,
) -> Survey:
    """Read a survey from CSV, StationXML, QuakeML, FDSN text or data frames.

    Parameters
    ----------
    stations, events, picks : path, sequence of paths or DataFrame
        Files, folders of files, or data frames; their contents are described at
        :func:`read_stations`, :func:`read_events` and :func:`read_picks`. One
        QuakeML file may serve as events and picks.
    settings : SurveySettings, optional
        Uncertainty by default and of each quality class.
    progress : callable, optional
        Called with the bytes read and the bytes in all.

    Returns
    -------
    Survey

    Raises
    ------
    FileAccessError
        If a file cannot be read.
    FileProblemsError
        With every problem of the first of the three that has any.
    MissingExtraError
        If a file is XML and obspy is not installed.
    """
    notices: list[Notice] = []
    hear = _stages(progress, stations, events, picks)
    station_table = read_stations(stations, notices=notices, progress=hear[0])
    event_table = read_events(events, notices=notices, progress=hear[1])
    pick_table = read_picks(
        picks, station_table, event_table, settings=settings, notices=notices, progress=hear[2]
    )
    notices += remote_stations(station_table)
    notices += _without_picks(station_table, event_table, pick_table)
    return Survey(station_table, event_table, pick_table, notices)


def _stages(
    progress: Progress | None, stations: Source, events: Source, picks: Source
) -> list[Progress | None]:
    """Give each stage of the reading a progress of its own that counts on from the last."""
    if progress is None:
        return [None] * 3
    told = progress
    sizes = [
        total_bytes(stations, "stations"),
        total_bytes(events, "events"),
        total_bytes(picks, "picks"),
    ]

    def stage(before: int) -> Progress:
        return lambda done, _total: told(before + done, sum(sizes))

    return [stage(sum(sizes[:number])) for number in range(len(sizes))]


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

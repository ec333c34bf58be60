"""Stations, events and arrival picks, read from tables and checked.

The main type is :class:`Survey`; :func:`read_survey` makes one from CSV files or open
formats. Each table is a frozen dataclass of equally long numpy arrays. Latitudes
are geographic (WGS84) here, as they are in the files.
"""

from __future__ import annotations

from rayloom.survey.events import Events, read_events
from rayloom.survey.notices import Notice
from rayloom.survey.picks import Picks, read_picks
from rayloom.survey.settings import SurveySettings
from rayloom.survey.stations import Stations, read_stations
from rayloom.survey.whole import Survey, read_survey

__all__ = [
    "Events",
    "Notice",
    "Picks",
    "Stations",
    "Survey",
    "SurveySettings",
    "read_events",
    "read_picks",
    "read_stations",
    "read_survey",
]

"""All arrivals with what is known of each, those left out included.

The main type is :class:`Evidence`.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace

import numpy as np

from rayloom.earth import ReferenceEarth, phase_wave
from rayloom.residuals.assembly import Screened, screen_readings
from rayloom.residuals.crust import StationCrust
from rayloom.residuals.delays import RelativeTimes, readings_of_times
from rayloom.residuals.groups import group_numbers, relative_to_median_s
from rayloom.residuals.prediction import Geometry
from rayloom.residuals.readings import (
    Readings,
    read_ready_residuals,
    travel_times_of,
    with_usual_names,
)
from rayloom.residuals.settings import USUAL_WINDOWS_DEG, ResidualSettings
from rayloom.survey import Events, Notice, Stations, Survey, SurveySettings
from rayloom.survey.formats import Source
from rayloom.survey.tables import BoolArray, FloatArray, IndexArray, TextArray

NO_WAVE = ""
"""Stands for the wave type of an unknown phase."""


@dataclass(frozen=True, eq=False)
class Evidence:
    """What the screens look at: one row per reading, used or left out.

    Parameters
    ----------
    stations, events : Stations, Events
        The tables that the indices point into.
    earth : ReferenceEarth
        The Earth of the predictions.
    settings : ResidualSettings
        Windows and limits.
    readings : Readings
        Travel times, or residuals if ``ready``.
    geometry : Geometry
        Distance and directions of each row.
    wave : (n,) str array
        ``"P"``, ``"S"``, or empty for an unknown phase.
    predicted_s, residual_s : (n,) float arrays
        Predicted travel time; observed minus predicted; s, NaN where the phase does
        not arrive.
    reason, detail : (n,) str arrays
        Why a row is left out, as in the list of exclusions; empty for rows used.
    ready : bool
        Whether residuals were computed by others, or have no absolute level: there are
        no travel times to look at.
    notices : list of Notice
        Remarks made while reading.
    """

    stations: Stations
    events: Events
    earth: ReferenceEarth
    settings: ResidualSettings
    readings: Readings
    geometry: Geometry
    wave: TextArray
    predicted_s: FloatArray
    residual_s: FloatArray
    reason: TextArray
    detail: TextArray
    ready: bool = False
    notices: list[Notice] = field(default_factory=list)

    def __len__(self) -> int:
        return len(self.residual_s)

    @property
    def event_index(self) -> IndexArray:
        """Row of the event of each reading, shape (n,)."""
        return self.readings.event_index

    @property
    def station_index(self) -> IndexArray:
        """Row of the station of each reading, shape (n,)."""
        return self.readings.station_index

    @property
    def phase(self) -> TextArray:
        """Phase of each reading, shape (n,)."""
        return self.readings.phase

    @property
    def uncertainty_s(self) -> FloatArray:
        """Standard deviation stated for each reading, s, shape (n,)."""
        return self.readings.uncertainty_s

    @property
    def kept(self) -> BoolArray:
        """Whether each row is used, shape (n,)."""
        return np.asarray(self.reason == "")

    def name(self, row: int) -> str:
        """Name a reading: event, station, phase."""
        event = self.events.event[self.event_index[row]]
        label = self.stations.labels[self.station_index[row]]
        return f"{event} {label} {self.phase[row]}"


def evidence_of_survey(
    survey: Survey,
    earth: ReferenceEarth,
    settings: ResidualSettings | None = None,
    *,
    crust: StationCrust | None = None,
) -> Evidence:
    """Gather the evidence of a survey's picks.

    Parameters
    ----------
    survey : Survey
        Stations, events and picks.
    earth : ReferenceEarth
        The Earth of the predictions.
    settings : ResidualSettings, optional
        Windows and limits.
    crust : StationCrust, optional
        Crust below stations, part of the predicted times.

    Returns
    -------
    Evidence
    """
    return _evidence(
        travel_times_of(survey),
        survey.stations,
        survey.events,
        earth,
        settings,
        survey.notices,
        ready=False,
        crust=crust,
    )


def evidence_of_residuals(
    path: Source,
    stations: Stations,
    events: Events,
    earth: ReferenceEarth,
    settings: ResidualSettings | None = None,
    *,
    survey_settings: SurveySettings | None = None,
) -> Evidence:
    """Gather the evidence of residuals that others computed.

    Parameters
    ----------
    path : path or sequence of paths
        The files (CSV), as for :func:`rayloom.residuals.read_residuals`.
    stations, events : Stations, Events
        Tables that the residuals refer to.
    earth : ReferenceEarth
        The Earth of the predicted times.
    settings : ResidualSettings, optional
        Windows and limits.
    survey_settings : SurveySettings, optional
        Uncertainty by default and of each quality class.

    Returns
    -------
    Evidence

    Raises
    ------
    FileAccessError
        If the file cannot be read.
    FileProblemsError
        With every problem of the file.
    """
    notices: list[Notice] = []
    readings = read_ready_residuals(
        path, stations, events, survey_settings or SurveySettings(), notices
    )
    return _evidence(readings, stations, events, earth, settings, notices, ready=True)


def evidence_of_times(
    times: RelativeTimes,
    stations: Stations,
    events: Events,
    earth: ReferenceEarth,
    settings: ResidualSettings | None = None,
    *,
    crust: StationCrust | None = None,
) -> Evidence:
    """Gather the evidence of relative times, whose residuals have no absolute level.

    Parameters
    ----------
    times : RelativeTimes
        Adjusted times; those of the largest part of each event count.
    stations, events : Stations, Events
        Tables that the times refer to.
    earth : ReferenceEarth
        The Earth of the predicted times.
    settings : ResidualSettings, optional
        Windows and limits.
    crust : StationCrust, optional
        Crust below stations, part of the predicted times.

    Returns
    -------
    Evidence
    """
    settings = settings or ResidualSettings()
    readings = with_usual_names(readings_of_times(times))
    screened = screen_readings(
        readings, stations, events, earth, settings, ready=False, everywhere=True, crust=crust
    )
    residual_s = screened.residual_s.copy()
    there = np.isfinite(residual_s)
    group = group_numbers(readings.event_index[there], readings.phase[there])
    residual_s[there] = relative_to_median_s(residual_s[there], group)
    screened = replace(screened, residual_s=residual_s)
    return evidence_of_screened(readings, screened, stations, events, earth, settings, ready=True)


def _evidence(
    readings: Readings,
    stations: Stations,
    events: Events,
    earth: ReferenceEarth,
    settings: ResidualSettings | None,
    notices: list[Notice],
    *,
    ready: bool,
    crust: StationCrust | None = None,
) -> Evidence:
    settings = settings or ResidualSettings()
    readings = with_usual_names(readings)
    screened = screen_readings(
        readings, stations, events, earth, settings, ready=ready, everywhere=True, crust=crust
    )
    return evidence_of_screened(
        readings, screened, stations, events, earth, settings, ready=ready, notices=notices
    )


def evidence_of_screened(
    readings: Readings,
    screened: Screened,
    stations: Stations,
    events: Events,
    earth: ReferenceEarth,
    settings: ResidualSettings,
    *,
    ready: bool = False,
    notices: list[Notice] | None = None,
) -> Evidence:
    """Gather the evidence of readings that were predicted and screened.

    Parameters
    ----------
    readings : Readings
        Phases by their usual names.
    screened : Screened
        Their predictions, and which of them are left out.
    stations, events : Stations, Events
        The tables that the readings refer to.
    earth : ReferenceEarth
        The Earth of the predictions.
    settings : ResidualSettings
        Windows and limits.
    ready : bool
        Whether the readings are residuals.
    notices : list of Notice, optional
        Remarks made while reading.

    Returns
    -------
    Evidence
    """
    selection = screened.selection
    return Evidence(
        stations=stations,
        events=events,
        earth=earth,
        settings=settings,
        readings=readings,
        geometry=screened.geometry,
        wave=_waves(readings.phase),
        predicted_s=screened.prediction.total_s,
        residual_s=screened.residual_s,
        reason=np.array(selection.reason, dtype=np.str_),
        detail=np.array(selection.detail, dtype=np.str_),
        ready=ready,
        notices=notices or [],
    )


def _waves(phase: TextArray) -> TextArray:
    names, number = np.unique(phase, return_inverse=True)
    waves = [phase_wave(name) if name in USUAL_WINDOWS_DEG else NO_WAVE for name in names.tolist()]
    return np.asarray(np.array(waves, dtype=np.str_)[number])

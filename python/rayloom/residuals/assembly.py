"""Residuals from a survey's picks, or from residuals that others computed."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from rayloom.earth import ReferenceEarth, phase_wave
from rayloom.errors import InputError
from rayloom.residuals.choices import apply_choices, unmatched_names
from rayloom.residuals.crust import StationCrust
from rayloom.residuals.exclusions import Exclusions, Selection
from rayloom.residuals.groups import group_numbers, relative_to_median_s
from rayloom.residuals.prediction import Geometry, Prediction, pair_geometry, predict
from rayloom.residuals.readings import (
    Readings,
    read_ready_residuals,
    travel_times_of,
    with_usual_names,
)
from rayloom.residuals.screening import (
    screen_arrivals,
    screen_distances,
    screen_phases,
    screen_residuals,
    window_notices,
)
from rayloom.residuals.settings import ResidualSettings
from rayloom.residuals.table import Residuals
from rayloom.survey import Events, Notice, Stations, Survey, SurveySettings
from rayloom.survey.formats import Source
from rayloom.survey.tables import BoolArray, FloatArray


def compute_residuals(
    survey: Survey,
    earth: ReferenceEarth,
    settings: ResidualSettings | None = None,
    *,
    crust: StationCrust | None = None,
) -> Residuals:
    """Turn the picks of a survey into residuals.

    A residual is observed minus predicted arrival time: late is positive. The
    prediction is the time in the reference Earth at the event's depth, plus
    ellipticity, plus elevation and burial of the station.

    Parameters
    ----------
    survey : Survey
        Stations, events and picks.
    earth : ReferenceEarth
        The Earth of the predictions.
    settings : ResidualSettings, optional
        Distance windows, corrections, limits.
    crust : StationCrust, optional
        Crust below stations, part of the prediction unless the settings say no.

    Returns
    -------
    Residuals
        Its ``excluded`` names every pick left out, with the reason.

    Raises
    ------
    InputError
        If no pick is left.
    """
    return _assembled(
        travel_times_of(survey),
        survey.stations,
        survey.events,
        earth,
        settings or ResidualSettings(),
        ready=False,
        notices=[],
        crust=crust,
    )


def read_residuals(
    path: Source,
    stations: Stations,
    events: Events,
    earth: ReferenceEarth,
    settings: ResidualSettings | None = None,
    *,
    survey_settings: SurveySettings | None = None,
    crust: StationCrust | None = None,
) -> Residuals:
    """Read residuals that others computed, and screen them like computed ones.

    Columns: event, network, station, phase, residual_s and uncertainty_s or
    quality; other columns are ignored. The residuals are taken as they are;
    geometry and predicted times are computed beside them.

    Parameters
    ----------
    path : path, sequence of paths or DataFrame
        Files (CSV), folders of files, or a data frame with their columns.
    stations, events : Stations, Events
        Tables that the residuals refer to.
    earth : ReferenceEarth
        The Earth of the predicted times.
    settings : ResidualSettings, optional
        Distance windows, limits.
    survey_settings : SurveySettings, optional
        Uncertainty by default and of each quality class.
    crust : StationCrust, optional
        Crust below stations, part of the predicted times.

    Returns
    -------
    Residuals
        What can be used, and with reasons what cannot.

    Raises
    ------
    FileAccessError
        If the file cannot be read.
    FileProblemsError
        With every problem of the file: line, column, value, what was expected.
    InputError
        If no residual is left.
    """
    notices: list[Notice] = []
    readings = read_ready_residuals(
        path, stations, events, survey_settings or SurveySettings(), notices
    )
    return _assembled(
        readings,
        stations,
        events,
        earth,
        settings or ResidualSettings(),
        ready=True,
        notices=notices,
        crust=crust,
    )


def residuals_of_readings(
    readings: Readings,
    stations: Stations,
    events: Events,
    earth: ReferenceEarth,
    settings: ResidualSettings | None = None,
    *,
    crust: StationCrust | None = None,
    relative: bool = False,
) -> Residuals:
    """Turn travel times into residuals.

    Parameters
    ----------
    readings : Readings
        Travel times, s.
    stations, events : Stations, Events
        The tables that they refer to.
    earth : ReferenceEarth
        The Earth of the predictions.
    settings : ResidualSettings, optional
        Distance windows, corrections, limits.
    crust : StationCrust, optional
        Crust below stations.
    relative : bool
        Whether the times of each group (event, phase) have a level of their own, so that
        only their differences count; the median residual of each group is then zero.

    Returns
    -------
    Residuals

    Raises
    ------
    InputError
        If no residual is left.
    """
    return _assembled(
        readings,
        stations,
        events,
        earth,
        settings or ResidualSettings(),
        ready=False,
        notices=[],
        crust=crust,
        relative=relative,
    )


@dataclass(frozen=True)
class Screened:
    """Readings with what was computed beside them, and which of them are still in."""

    selection: Selection
    geometry: Geometry
    prediction: Prediction
    residual_s: FloatArray


def _assembled(
    readings: Readings,
    stations: Stations,
    events: Events,
    earth: ReferenceEarth,
    settings: ResidualSettings,
    *,
    ready: bool,
    notices: list[Notice],
    crust: StationCrust | None,
    relative: bool = False,
) -> Residuals:
    readings = with_usual_names(readings)
    screened = screen_readings(
        readings, stations, events, earth, settings, ready=ready, crust=crust
    )
    excluded = _exclusions(screened.selection, readings, stations, events)
    _check_any_left(screened.selection, excluded)
    kept = screened.selection.kept
    used, geometry = readings.select(kept), screened.geometry.select(kept)
    prediction = screened.prediction.select(kept)
    residual_s = screened.residual_s[kept]
    if relative:
        residual_s = relative_to_median_s(residual_s, group_numbers(used.event_index, used.phase))
    lost = _lost_events(screened.selection, readings, events)
    return Residuals(
        stations=stations,
        events=events,
        earth=earth,
        event_index=used.event_index,
        station_index=used.station_index,
        phase=used.phase,
        wave=np.array([phase_wave(name) for name in used.phase.tolist()], dtype=np.str_),
        residual_s=residual_s,
        uncertainty_s=used.uncertainty_s,
        distance_deg=geometry.distance_deg,
        azimuth_deg=geometry.azimuth_deg,
        back_azimuth_deg=geometry.back_azimuth_deg,
        predicted_s=prediction.total_s,
        ellipticity_s=prediction.ellipticity_s,
        elevation_s=prediction.elevation_s,
        crust_s=prediction.crust_s,
        excluded=excluded,
        notices=[
            *notices,
            *window_notices(settings),
            *unmatched_names(readings, stations, events, settings),
            *lost,
        ],
    )


def screen_readings(
    readings: Readings,
    stations: Stations,
    events: Events,
    earth: ReferenceEarth,
    settings: ResidualSettings,
    *,
    ready: bool,
    everywhere: bool = False,
    crust: StationCrust | None = None,
) -> Screened:
    """Predict readings and tell which of them are left out, and why.

    Parameters
    ----------
    readings : Readings
        Phases by their usual names.
    stations, events : Stations, Events
        The tables that the readings refer to.
    earth : ReferenceEarth
        The Earth of the predictions.
    settings : ResidualSettings
        Windows, limits, corrections.
    ready : bool
        Whether the readings are residuals already.
    everywhere : bool
        Predict readings outside the windows as well, which are left out all the same.
    crust : StationCrust, optional
        Crust below stations.

    Returns
    -------
    Screened
    """
    selection = Selection(len(readings))
    apply_choices(selection, readings, stations, events, settings)
    phase = readings.phase
    geometry = pair_geometry(events, stations, readings.event_index, readings.station_index)
    screen_phases(selection, phase, settings)
    known = np.isin(phase, list(settings.windows_deg))
    screen_distances(selection, phase, geometry.distance_deg, settings)
    prediction = _predicted_where(
        known if everywhere else selection.kept,
        readings,
        geometry,
        stations,
        events,
        earth,
        settings,
        crust,
    )
    predicted_s = prediction.total_s
    screen_arrivals(selection, phase, geometry.distance_deg, predicted_s)
    residual_s = readings.observed_s - (0.0 if ready else predicted_s)
    screen_residuals(
        selection, readings.event_index, readings.station_index, phase, residual_s, settings
    )
    return Screened(selection, geometry, prediction, residual_s)


def _predicted_where(
    kept: BoolArray,
    readings: Readings,
    geometry: Geometry,
    stations: Stations,
    events: Events,
    earth: ReferenceEarth,
    settings: ResidualSettings,
    crust: StationCrust | None,
) -> Prediction:
    """Predict the rows that are still in; the others are NaN."""
    used = readings.select(kept)
    prediction = predict(
        earth,
        events,
        stations,
        used.event_index,
        used.station_index,
        used.phase,
        geometry.select(kept),
        ellipticity=settings.ellipticity,
        elevation=settings.elevation,
        crust=crust if settings.crust else None,
    )
    columns = {}
    for name in Prediction.column_names():
        columns[name] = np.full(len(readings), np.nan)
        columns[name][kept] = getattr(prediction, name)
    return Prediction(**columns)


def _exclusions(
    selection: Selection, readings: Readings, stations: Stations, events: Events
) -> Exclusions:
    out = np.flatnonzero(~selection.kept)
    station = readings.station_index[out]
    return Exclusions(
        event=events.event[readings.event_index[out]],
        network=stations.network[station],
        station=stations.station[station],
        phase=readings.phase[out],
        reason=np.array([selection.reason[row] for row in out], dtype=np.str_),
        detail=np.array([selection.detail[row] for row in out], dtype=np.str_),
    )


def _check_any_left(selection: Selection, excluded: Exclusions) -> None:
    if selection.kept.any():
        return
    if not len(excluded):
        raise InputError("there are no picks; expected at least one event with several picks")
    counts = ", ".join(f"{count} {reason}" for reason, count in excluded.counts().items())
    raise InputError(
        f"no pick is left ({counts}; for example {excluded.event[0]} at "
        f"{excluded.network[0]}.{excluded.station[0]}: {excluded.detail[0]}); check the event "
        "coordinates and times, or widen the limits in the residuals settings"
    )


def _lost_events(selection: Selection, readings: Readings, events: Events) -> list[Notice]:
    """Warn of events that lost all their picks, with the reasons."""
    picked = np.unique(readings.event_index)
    lost = np.setdiff1d(picked, readings.event_index[selection.kept])
    notices = []
    for event in lost:
        rows = np.flatnonzero(readings.event_index == event)
        reasons = sorted({selection.reason[row] for row in rows})
        detail = (
            f"event {events.event[event]}: all {len(rows)} picks are left out "
            f"({', '.join(reasons)}); for example: {selection.detail[rows[0]]}"
        )
        notices.append(Notice("warning", "event_left_out", str(events.event[event]), detail))
    return notices

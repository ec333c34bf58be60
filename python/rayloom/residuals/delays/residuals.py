"""Residuals of relative times: :func:`residuals_of_delays`."""

from __future__ import annotations

from dataclasses import fields, replace
from pathlib import Path
from typing import Final

import numpy as np

from rayloom.earth import ReferenceEarth
from rayloom.residuals.assembly import residuals_of_readings
from rayloom.residuals.crust import StationCrust
from rayloom.residuals.delays.relative_times import RelativeTimes, relative_times
from rayloom.residuals.delays.table import read_delays
from rayloom.residuals.exclusions import Exclusions
from rayloom.residuals.readings import Readings
from rayloom.residuals.settings import ResidualSettings
from rayloom.residuals.table import Residuals
from rayloom.survey import Events, Notice, Stations, SurveySettings
from rayloom.survey.notices import few

NOT_TIED: Final = "not_tied"


def compute_delay_residuals(
    path: str | Path,
    stations: Stations,
    events: Events,
    earth: ReferenceEarth,
    settings: ResidualSettings | None = None,
    *,
    survey_settings: SurveySettings | None = None,
    crust: StationCrust | None = None,
) -> Residuals:
    """Read delays between stations and turn them into residuals.

    Parameters
    ----------
    path : str or Path
        The file (CSV), as for :func:`read_delays`.
    stations, events : Stations, Events
        Tables that the delays refer to.
    earth : ReferenceEarth
        The Earth of the predictions.
    settings : ResidualSettings, optional
        Distance windows, corrections, limits.
    survey_settings : SurveySettings, optional
        Uncertainty by default and of each quality class.
    crust : StationCrust, optional
        Crust below stations.

    Returns
    -------
    Residuals
        As :func:`residuals_of_delays` makes them.

    Raises
    ------
    FileAccessError
        If the file cannot be read.
    FileProblemsError
        With every problem of the file.
    InputError
        If no residual is left.
    """
    notices: list[Notice] = []
    delays = read_delays(path, stations, events, settings=survey_settings, notices=notices)
    times = relative_times(delays)
    data = residuals_of_delays(times, stations, events, earth, settings, crust=crust)
    return replace(data, notices=[*notices, *data.notices])


def residuals_of_delays(
    times: RelativeTimes,
    stations: Stations,
    events: Events,
    earth: ReferenceEarth,
    settings: ResidualSettings | None = None,
    *,
    crust: StationCrust | None = None,
) -> Residuals:
    """Turn relative times into residuals: relative time minus relative prediction.

    Residuals have no absolute level: the median of each group (event, phase) is zero. Of
    stations that the delays of an event do not tie together the largest part counts; the
    others are exclusions.

    Parameters
    ----------
    times : RelativeTimes
        Adjusted times.
    stations, events : Stations, Events
        Tables that the times refer to.
    earth : ReferenceEarth
        The Earth of the predictions.
    settings : ResidualSettings, optional
        Distance windows, corrections, limits.
    crust : StationCrust, optional
        Crust below stations.

    Returns
    -------
    Residuals
        Uncertainties are the standard errors of the adjustment; its ``notices`` tell
        suspected delays and how well the delays close.

    Raises
    ------
    InputError
        If no residual is left.
    """
    data = residuals_of_readings(
        readings_of_times(times), stations, events, earth, settings, crust=crust, relative=True
    )
    excluded = _joined(_untied(times, stations, events), data.excluded)
    notices = [*_suspects(times, stations, events), *_closure(times), *data.notices]
    return replace(data, excluded=excluded, notices=notices)


def readings_of_times(times: RelativeTimes) -> Readings:
    """Take the times of the largest part of each event and phase as readings.

    Parameters
    ----------
    times : RelativeTimes
        Adjusted times.

    Returns
    -------
    Readings
        Their level is that of the times: zero mean in each group.
    """
    tied = times.part == 0
    return Readings(
        times.event_index[tied],
        times.station_index[tied],
        times.phase[tied],
        times.time_s[tied],
        times.error_s[tied],
    )


def _untied(times: RelativeTimes, stations: Stations, events: Events) -> Exclusions:
    rows = np.flatnonzero(times.part > 0)
    detail = []
    for row in rows.tolist():
        group = (times.event_index == times.event_index[row]) & (times.phase == times.phase[row])
        here = int((group & (times.part == times.part[row])).sum())
        there = int((group & (times.part == 0)).sum())
        detail.append(
            f"no delay ties it, or the {here} stations it is tied to, to the largest part of "
            f"{there} stations; a delay between the two would"
        )
    station = times.station_index[rows]
    return Exclusions(
        event=events.event[times.event_index[rows]],
        network=stations.network[station],
        station=stations.station[station],
        phase=times.phase[rows],
        reason=np.full(len(rows), NOT_TIED),
        detail=np.array(detail, dtype=np.str_),
    )


def _joined(one: Exclusions, other: Exclusions) -> Exclusions:
    names = [field.name for field in fields(Exclusions)]
    return Exclusions(
        **{name: np.concatenate([getattr(one, name), getattr(other, name)]) for name in names}
    )


def _suspects(times: RelativeTimes, stations: Stations, events: Events) -> list[Notice]:
    delays, labels = times.delays, stations.labels
    return [
        Notice(
            "warning",
            "suspected_delay",
            str(events.event[delays.event_index[row]]),
            f"event {events.event[delays.event_index[row]]}: the {delays.phase[row]} delay "
            f"{labels[delays.first_index[row]]} minus {labels[delays.second_index[row]]} of "
            f"{delays.delay_s[row]:+.3f} s is {times.delay_closure_s[row]:+.3f} s off what the "
            "others say; it is left out",
        )
        for row in np.flatnonzero(times.suspected).tolist()
    ]


def _closure(times: RelativeTimes) -> list[Notice]:
    """Tell how well the delays close, and which stations rest on a single one."""
    used = ~np.array(times.suspected, dtype=bool)
    if not used.any():
        return []
    rms_s = float(np.sqrt(np.mean(np.square(np.array(times.delay_closure_s)[used]))))
    single = np.flatnonzero(times.delay_count == 1)
    unchecked = f"; {len(single)} times rest on one delay, unchecked" if len(single) else ""
    phases = few(np.unique(times.phase).tolist())
    detail = (
        f"{int(used.sum())} {phases} delays give {len(times)} relative times and close "
        f"to {rms_s:.3f} s RMS{unchecked}"
    )
    return [Notice("info", "delay_closure", "delays", detail)]

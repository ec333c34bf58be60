"""What a person drops or keeps by name, against what the limits would say."""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np

from rayloom.residuals.exclusions import Selection
from rayloom.residuals.readings import Readings
from rayloom.residuals.settings import ResidualSettings
from rayloom.survey import Events, Notice, Stations
from rayloom.survey.notices import few
from rayloom.survey.tables import BoolArray, TextArray

DROPPED = "dropped_by_settings"


def apply_choices(
    selection: Selection,
    readings: Readings,
    stations: Stations,
    events: Events,
    settings: ResidualSettings,
) -> None:
    """Leave out what the settings drop, and protect what they keep.

    Parameters
    ----------
    selection : Selection
        Marked in place.
    readings : Readings
        The rows.
    stations, events : Stations, Events
        The tables that they refer to.
    settings : ResidualSettings
        ``drop_stations``, ``drop_events``, ``drop_picks`` and ``keep``.
    """
    if not settings.chosen_names:
        return
    event, label, pick = _names(readings, stations, events)
    for key, names in (("drop_events", event), ("drop_stations", label), ("drop_picks", pick)):
        rows = np.isin(names, list(getattr(settings, key)))
        detail = [f"named in {key} of the residuals settings"] * int(rows.sum())
        selection.leave_out(rows, DROPPED, detail)
    kept = list(settings.keep)
    protected: BoolArray = np.isin(event, kept) | np.isin(label, kept) | np.isin(pick, kept)
    selection.protect(protected)


def unmatched_names(
    readings: Readings, stations: Stations, events: Events, settings: ResidualSettings
) -> list[Notice]:
    """Warn of names in the settings that no reading bears.

    Parameters
    ----------
    readings : Readings
        The rows.
    stations, events : Stations, Events
        The tables that they refer to.
    settings : ResidualSettings
        The lists of names.

    Returns
    -------
    list of Notice
    """
    if not settings.chosen_names:
        return []
    event, label, pick = (set(names.tolist()) for names in _names(readings, stations, events))
    known = {
        "drop_events": event,
        "drop_stations": label,
        "drop_picks": pick,
        "keep": event | label | pick,
    }
    return [
        Notice(
            "warning",
            "unmatched_name",
            key,
            f"{key} of the residuals settings names what no reading bears: {few(missing)}; events "
            "are named as in their table, stations NET.STA, picks 'EVENT NET.STA PHASE'",
        )
        for key, names in known.items()
        if (missing := _missing(getattr(settings, key), names))
    ]


def _missing(chosen: Iterable[str], known: set[str]) -> list[str]:
    return [name for name in chosen if name not in known]


def _names(
    readings: Readings, stations: Stations, events: Events
) -> tuple[TextArray, TextArray, TextArray]:
    """Event, station and full name of each row."""
    event = events.event[readings.event_index]
    label = stations.labels[readings.station_index]
    pick = [" ".join(words) for words in zip(event, label, readings.phase, strict=True)]
    return event, label, np.array(pick, dtype=np.str_)

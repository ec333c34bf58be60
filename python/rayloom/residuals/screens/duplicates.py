"""Things that stand in the tables twice: picks, events, stations."""

from __future__ import annotations

from collections import Counter
from typing import Final

import numpy as np

from rayloom.earth import distance_azimuth_deg, geocentric_latitude_deg
from rayloom.residuals.screens.evidence import Evidence
from rayloom.residuals.screens.finding import Finding
from rayloom.survey.notices import few
from rayloom.survey.tables import seconds_between
from rayloom.units import KM_PER_DEGREE

_SAME_TIME_S: Final = 0.002
_LEAST_SHARED: Final = 3
_SHARED_SHARE: Final = 0.3
_SAME_EVENT_S: Final = 60.0
_SAME_EVENT_KM: Final = 300.0


def screen_duplicates(evidence: Evidence) -> list[Finding]:
    """Find picks given twice, events listed twice and stations with the same picks.

    Parameters
    ----------
    evidence : Evidence
        All arrivals.

    Returns
    -------
    list of Finding
        Kinds ``duplicate_pick``, ``duplicate_event`` and ``duplicate_station``.
    """
    findings = _conflicting(evidence) + _repeated(evidence) + _twin_events(evidence)
    return findings if evidence.ready else findings + _twin_stations(evidence)


def _conflicting(evidence: Evidence) -> list[Finding]:
    """Find picks of one event, station and phase with different times; told by station."""
    rows = np.flatnonzero(evidence.reason == "conflicting_rows")
    labels = evidence.stations.labels[evidence.station_index[rows]]
    findings = []
    for label in np.unique(labels).tolist():
        names = [evidence.name(row) for row in rows[labels == label].tolist()]
        findings.append(
            Finding(
                "warning",
                "duplicate_pick",
                str(label),
                f"{len(names)} picks are given twice with different times ({few(names)}); the "
                "one closer to its event's median is used",
                float(len(names)),
                "picks",
                "keep one of each in the picks table",
            )
        )
    return findings


def _repeated(evidence: Evidence) -> list[Finding]:
    """Rows repeated word for word, as the reader told."""
    return [
        Finding("note", "duplicate_pick", one.who, one.detail, 0.0, "", "nothing needs doing")
        for one in evidence.notices
        if one.what == "repeated_rows"
    ]


def _twin_events(evidence: Evidence) -> list[Finding]:
    """Find events close in time and place, maybe one earthquake listed twice."""
    events = evidence.events
    order = np.argsort(events.time, kind="stable")
    one, other = order[:-1], order[1:]
    gap_s = seconds_between(events.time[one], events.time[other])
    latitude_deg = geocentric_latitude_deg(events.latitude_deg)
    path = distance_azimuth_deg(
        latitude_deg[one],
        events.longitude_deg[one],
        latitude_deg[other],
        events.longitude_deg[other],
    )
    apart_km = path.distance_deg * KM_PER_DEGREE
    return [
        Finding(
            "warning",
            "duplicate_event",
            f"{events.event[one[pair]]} and {events.event[other[pair]]}",
            f"{gap_s[pair]:.1f} s and {apart_km[pair]:.0f} km apart: the same earthquake twice?",
            float(gap_s[pair]),
            "s",
            "if so, keep one (drop_events leaves the other out)",
        )
        for pair in np.flatnonzero(
            (gap_s <= _SAME_EVENT_S) & (apart_km <= _SAME_EVENT_KM)
        ).tolist()
    ]


def _twin_stations(evidence: Evidence) -> list[Finding]:
    """Stations with exactly the same arrival times in several events."""
    stations, number = np.unique(evidence.stations.labels, return_inverse=True)
    shared: Counter[tuple[int, int]] = Counter()
    site = number[evidence.station_index]
    picks = np.bincount(site, minlength=len(stations))
    _, phase = np.unique(evidence.phase, return_inverse=True)
    order = np.lexsort((evidence.readings.observed_s, phase, evidence.event_index))
    for step in (1, 2):
        one, other = order[:-step], order[step:]
        same = (
            (evidence.event_index[one] == evidence.event_index[other])
            & (phase[one] == phase[other])
            & (site[one] != site[other])
        )
        gap_s = evidence.readings.observed_s[other] - evidence.readings.observed_s[one]
        same &= gap_s <= _SAME_TIME_S
        low, high = np.minimum(site[one], site[other]), np.maximum(site[one], site[other])
        shared.update(zip(low[same].tolist(), high[same].tolist(), strict=True))
    return [
        _twin_finding(str(stations[one]), str(stations[other]), count)
        for (one, other), count in shared.items()
        if count >= max(_LEAST_SHARED, _SHARED_SHARE * min(picks[one], picks[other]))
    ]


def _twin_finding(one: str, other: str, count: int) -> Finding:
    return Finding(
        "warning",
        "duplicate_station",
        f"{one} and {other}",
        f"{count} picks have the same time at both",
        float(count),
        "picks",
        "if it is one station under two names, keep one (drop_stations)",
    )

"""Where the events are: outside the window, in few directions, in clusters."""

from __future__ import annotations

from typing import Final

import numpy as np

from rayloom.earth import geocentric_latitude_deg
from rayloom.residuals.screens.evidence import Evidence
from rayloom.residuals.screens.finding import Finding
from rayloom.residuals.screens.settings import CheckSettings
from rayloom.survey.notices import few
from rayloom.survey.tables import FloatArray, IndexArray
from rayloom.units import EARTH_RADIUS_KM

_OUTSIDE: Final = ("outside_distance_window", "no_arrival")
_LEAST_CLUSTER: Final = 10
_FULL_CIRCLE_DEG: Final = 360.0


def screen_coverage(evidence: Evidence, settings: CheckSettings) -> list[Finding]:
    """Find events outside the window, thin sectors of back-azimuth and clusters of events.

    Parameters
    ----------
    evidence : Evidence
        All arrivals.
    settings : CheckSettings
        Sectors and clusters.

    Returns
    -------
    list of Finding
        Kinds ``outside_window``, ``thin_sector`` and ``event_cluster``.
    """
    return (
        _outside_window(evidence)
        + _thin_sectors(evidence, settings)
        + _clusters(evidence, settings)
    )


def _outside_window(evidence: Evidence) -> list[Finding]:
    """Events that lose all their picks, or some, to the distance window."""
    findings = []
    outside = np.isin(evidence.reason, _OUTSIDE)
    for event in np.unique(evidence.event_index[outside]).tolist():
        rows = np.flatnonzero(evidence.event_index == event)
        count = int(outside[rows].sum())
        whole = not evidence.kept[rows].any()
        distance_deg = float(np.median(evidence.geometry.distance_deg[rows[outside[rows]]]))
        findings.append(
            Finding(
                "warning" if whole else "note",
                "outside_window",
                str(evidence.events.event[event]),
                f"{count} of {len(rows)} picks lie outside the distance window of their phase "
                f"(at {distance_deg:.1f} deg); {'none' if whole else 'the rest'} is used",
                distance_deg,
                "deg",
                "check its coordinates; widen the window in [residuals] if they are right",
            )
        )
    return findings


def _thin_sectors(evidence: Evidence, settings: CheckSettings) -> list[Finding]:
    findings = []
    for wave in np.unique(evidence.wave[evidence.kept]).tolist():
        rows = np.flatnonzero(evidence.kept & (evidence.wave == wave))
        counts = np.bincount(
            _sector_of_event(evidence, rows, settings.sectors), minlength=settings.sectors
        )
        thin = np.flatnonzero(counts < settings.sector_events)
        if not len(thin):
            continue
        width_deg = _FULL_CIRCLE_DEG / settings.sectors
        half = 2 * len(thin) >= settings.sectors
        named = [
            f"{sector * width_deg:g}-{(sector + 1) * width_deg:g} ({counts[sector]})"
            for sector in thin.tolist()
        ]
        findings.append(
            Finding(
                "warning" if half else "note",
                "thin_sector",
                f"{wave} back-azimuths",
                f"{len(thin)} of {settings.sectors} sectors have fewer than "
                f"{settings.sector_events} events: {', '.join(named)} deg",
                float(len(thin)),
                "sectors",
                "expect smearing along the directions that are there; add events of those that "
                "are not",
            )
        )
    return findings


def _sector_of_event(evidence: Evidence, rows: IndexArray, sectors: int) -> IndexArray:
    """Sector of the mean back-azimuth of each event in use."""
    events, number = np.unique(evidence.event_index[rows], return_inverse=True)
    angle = np.radians(evidence.geometry.back_azimuth_deg[rows])
    east = np.bincount(number, np.sin(angle), minlength=len(events))
    north = np.bincount(number, np.cos(angle), minlength=len(events))
    turn = np.arctan2(east, north) / (2.0 * np.pi) % 1.0
    return np.minimum((turn * sectors).astype(np.int64), sectors - 1)


def _clusters(evidence: Evidence, settings: CheckSettings) -> list[Finding]:
    """Take the fullest circle of events away as long as it holds too many."""
    events = np.unique(evidence.event_index[evidence.kept])
    least = max(_LEAST_CLUSTER, settings.cluster_share * len(events))
    findings = []
    close = _close_pairs(evidence, events, settings.cluster_km)
    left = np.ones(len(events), dtype=bool)
    while left.any():
        counts = np.where(left, (close & left).sum(axis=1), 0)
        centre = int(np.argmax(counts))
        if counts[centre] < least:
            break
        members = close[centre] & left
        names = evidence.events.event[events[members]].tolist()
        findings.append(
            Finding(
                "warning",
                "event_cluster",
                str(evidence.events.event[events[centre]]),
                f"{len(names)} of {len(events)} events lie within {settings.cluster_km:g} km of "
                f"it ({few(names)})",
                float(len(names)),
                "events",
                "they repeat one direction: consider summary rays, or drop some",
            )
        )
        left &= ~members
    return findings


def _close_pairs(evidence: Evidence, events: IndexArray, radius_km: float) -> np.ndarray:
    latitude = np.radians(geocentric_latitude_deg(evidence.events.latitude_deg[events]))
    longitude = np.radians(evidence.events.longitude_deg[events])
    point: FloatArray = np.column_stack(
        [
            np.cos(latitude) * np.cos(longitude),
            np.cos(latitude) * np.sin(longitude),
            np.sin(latitude),
        ]
    )
    return np.asarray(point @ point.T >= np.cos(radius_km / EARTH_RADIUS_KM))

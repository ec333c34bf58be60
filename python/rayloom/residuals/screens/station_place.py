"""Stations whose picks place them elsewhere: coordinates shifted, exchanged, of wrong sign."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Final

import numpy as np

from rayloom.earth import distance_azimuth_deg, geocentric_latitude_deg
from rayloom.residuals.prediction import pair_geometry, predict
from rayloom.residuals.screens.evidence import Evidence
from rayloom.residuals.screens.finding import Finding
from rayloom.residuals.screens.nearby import Nearby
from rayloom.residuals.screens.pattern import Pattern, sigma_of
from rayloom.residuals.screens.robust_fit import robust_fit
from rayloom.residuals.screens.settings import CheckSettings
from rayloom.survey.tables import FloatArray, IndexArray
from rayloom.units import KM_PER_DEGREE

_LEAST_ROWS: Final = 12
_LEAST_ROWS_TO_LOCATE: Final = 6
_SIGMAS: Final = 5.0
_OTHERS: Final = 4.0
_EXPLAINED_SHARE: Final = 0.6
_LOST_SHARE: Final = 0.5
_GROSS: Final = ("gross_residual", "outside_distance_window", "no_arrival")
_STEPS: Final = 12
_LARGEST_STEP_DEG: Final = 3.0
_LOCATED_SCATTER_S: Final = 2.0
_SAME_PLACE_KM: Final = 50.0


@dataclass(frozen=True)
class Mistake:
    """A way to write coordinates down wrongly.

    Parameters
    ----------
    what : str
        The mistake in words.
    latitude_deg, longitude_deg : float
        The right coordinates, if that was the mistake.
    """

    what: str
    latitude_deg: float
    longitude_deg: float


def usual_mistakes(latitude_deg: float, longitude_deg: float) -> list[Mistake]:
    """Return what coordinates should read if they were exchanged or lost a sign.

    Parameters
    ----------
    latitude_deg, longitude_deg : float
        As the table has them.

    Returns
    -------
    list of Mistake
        Those whose latitude is possible.
    """
    signs = (
        ("the sign of the latitude wrong", -latitude_deg, longitude_deg),
        ("the sign of the longitude wrong", latitude_deg, -longitude_deg),
        ("both signs wrong", -latitude_deg, -longitude_deg),
        ("latitude and longitude exchanged", longitude_deg, latitude_deg),
        ("latitude and longitude exchanged and a sign wrong", -longitude_deg, latitude_deg),
        ("latitude and longitude exchanged and a sign wrong", longitude_deg, -latitude_deg),
        ("latitude and longitude exchanged and both signs wrong", -longitude_deg, -latitude_deg),
    )
    return [Mistake(*one) for one in signs if abs(one[1]) <= 90.0]


def screen_station_places(nearby: Nearby, settings: CheckSettings) -> list[Finding]:
    """Find stations that the picks place elsewhere.

    A station off its coordinates is late for events on one side and early for those on the
    other. Where most of its picks are left out as impossible, it is located anew from
    its travel times.

    Parameters
    ----------
    nearby : Nearby
        Residuals and what neighbouring rays let expect.
    settings : CheckSettings
        From what distance on.

    Returns
    -------
    list of Finding
        Kind ``station_coordinates``.
    """
    evidence = nearby.pattern.evidence
    lost = set() if evidence.ready else _lost_stations(evidence)
    found = [_located(nearby.pattern, label) for label in sorted(lost)]
    findings = [one for one in found if one and one.value >= settings.station_shift_km]
    return findings + _shifted(nearby, settings, {one.who for one in findings})


def _lost_stations(evidence: Evidence) -> set[str]:
    """Stations most of whose picks are left out, although most picks of the others are not."""
    labels = evidence.stations.labels[evidence.station_index]
    gross = np.isin(evidence.reason, _GROSS)
    if gross.mean() > _LOST_SHARE:
        return set()
    return {
        str(label)
        for label in np.unique(labels[gross])
        if (labels == label).sum() >= _LEAST_ROWS_TO_LOCATE
        and gross[labels == label].mean() > _LOST_SHARE
    }


def _located(pattern: Pattern, label: str) -> Finding | None:
    """Locate a station by its travel times and compare with its coordinates."""
    evidence = pattern.evidence
    rows = np.flatnonzero(evidence.stations.labels[evidence.station_index] == label)
    term_s = _group_terms_s(pattern)
    known = np.isfinite(term_s[rows])
    rows = rows[known]
    if len(rows) < _LEAST_ROWS_TO_LOCATE:
        return None
    latitude_deg, longitude_deg, scatter_s = _locate(pattern, rows, term_s[rows])
    if not scatter_s <= _LOCATED_SCATTER_S:
        return None
    station = evidence.station_index[rows[0]]
    given = (
        float(evidence.stations.latitude_deg[station]),
        float(evidence.stations.longitude_deg[station]),
    )
    away_km = _apart_km(given, (latitude_deg, longitude_deg))
    evidence_text = (
        f"{len(rows)} picks place it at {latitude_deg:.2f}, {longitude_deg:.2f} (scatter "
        f"{scatter_s:.2f} s), {away_km:.0f} km from its coordinates"
    )
    for mistake in usual_mistakes(*given):
        right = (mistake.latitude_deg, mistake.longitude_deg)
        if _apart_km(right, (latitude_deg, longitude_deg)) <= _SAME_PLACE_KM:
            evidence_text += f": {mistake.what}"
            break
    advice = "correct its latitude and longitude in the stations table"
    return Finding("error", "station_coordinates", label, evidence_text, away_km, "km", advice)


def _group_terms_s(pattern: Pattern) -> FloatArray:
    """Term of the group of each row of the evidence, NaN where no row of it is used."""
    evidence = pattern.evidence
    used = np.unique(pattern.group[pattern.kept])
    terms = {
        (int(pattern.group_event[group]), str(pattern.group_phase[group])): float(
            pattern.group_term_s[group]
        )
        for group in used.tolist()
    }
    keys = zip(evidence.event_index.tolist(), evidence.phase.tolist(), strict=True)
    return np.array([terms.get(key, np.nan) for key in keys], dtype=np.float64)


def _locate(pattern: Pattern, rows: IndexArray, term_s: FloatArray) -> tuple[float, float, float]:
    """Gauss-Newton from the middle of the network: latitude, longitude, scatter in s."""
    evidence = pattern.evidence
    used = evidence.station_index[evidence.kept]
    latitude_deg = float(np.median(evidence.stations.latitude_deg[used]))
    longitude_deg = float(np.median(evidence.stations.longitude_deg[used]))
    site = evidence.stations.select(evidence.station_index[rows[:1]])
    scatter_s = np.inf
    for _ in range(_STEPS):
        place = replace(
            site,
            latitude_deg=np.array([latitude_deg]),
            longitude_deg=np.array([longitude_deg]),
        )
        pairs = (evidence.event_index[rows], np.zeros(len(rows), dtype=np.int64))
        geometry = pair_geometry(evidence.events, place, *pairs)
        parts = predict(
            evidence.earth,
            evidence.events,
            place,
            *pairs,
            evidence.phase[rows],
            geometry,
            ellipticity=evidence.settings.ellipticity,
            elevation=evidence.settings.elevation,
        )
        late_s = evidence.readings.observed_s[rows] - parts.total_s - term_s
        good = np.isfinite(late_s)
        if good.sum() < _LEAST_ROWS_TO_LOCATE:
            return latitude_deg, longitude_deg, np.inf
        angle = np.radians(geometry.back_azimuth_deg[good])
        slowness = 0.06 * np.ones(int(good.sum()))
        columns = np.column_stack(
            [np.ones(int(good.sum())), -slowness * np.sin(angle), -slowness * np.cos(angle)]
        )
        fit = robust_fit(columns, late_s[good])
        scatter_s = sigma_of(late_s[good])
        step_deg = np.clip(fit.value[1:] / KM_PER_DEGREE, -_LARGEST_STEP_DEG, _LARGEST_STEP_DEG)
        latitude_deg = float(np.clip(latitude_deg + step_deg[1], -89.0, 89.0))
        longitude_deg += float(step_deg[0]) / max(np.cos(np.radians(latitude_deg)), 0.05)
        longitude_deg = (longitude_deg + 180.0) % 360.0 - 180.0
        if np.abs(step_deg).max() < 1e-3:
            break
    return latitude_deg, longitude_deg, scatter_s


def _apart_km(one: tuple[float, float], other: tuple[float, float]) -> float:
    latitude_deg = geocentric_latitude_deg(np.array([one[0], other[0]]))
    path = distance_azimuth_deg(latitude_deg[0], one[1], latitude_deg[1], other[1])
    return float(path.distance_deg) * KM_PER_DEGREE


def _shifted(nearby: Nearby, settings: CheckSettings, known: set[str]) -> list[Finding]:
    pattern = nearby.pattern
    late_s = pattern.left_s + pattern.site_term_s[pattern.site] - nearby.other_sites.value_s
    angle, slowness = pattern.back_azimuth_rad, pattern.slowness_s_per_km
    columns = np.column_stack(
        [np.ones(len(pattern)), -slowness * np.sin(angle), -slowness * np.cos(angle)]
    )
    away_km, error_km, explained = (np.zeros(len(pattern.sites)) for _ in range(3))
    for site in range(len(pattern.sites)):
        rows = np.flatnonzero((pattern.site == site) & pattern.kept)
        if len(rows) < _LEAST_ROWS or np.linalg.matrix_rank(columns[rows]) < 3:
            continue
        fit = robust_fit(columns[rows], late_s[rows])
        away_km[site] = float(np.hypot(*fit.value[1:]))
        error_km[site] = float(np.max(fit.error[1:]))
        explained[site] = 1.0 - fit.scatter / max(sigma_of(late_s[rows]), 1e-9)
    usual_km = float(np.median(away_km[away_km > 0.0])) if (away_km > 0.0).any() else 0.0
    large = (
        (away_km + error_km >= settings.station_shift_km)
        & (away_km >= _SIGMAS * error_km)
        & (away_km >= _OTHERS * usual_km)
        & (explained >= 1.0 - _EXPLAINED_SHARE)
    )
    return [
        _shift_finding(pattern, site, float(away_km[site]), float(error_km[site]), usual_km)
        for site in np.flatnonzero(large).tolist()
        if str(pattern.sites.label[site]) not in known
    ]


def _shift_finding(
    pattern: Pattern, site: int, away_km: float, error_km: float, usual_km: float
) -> Finding:
    return Finding(
        "warning",
        "station_coordinates",
        str(pattern.sites.label[site]),
        f"late on one side and early on the other, as if it stood {away_km:.0f} ± "
        f"{error_km:.0f} km from its coordinates (other stations: {usual_km:.0f} km)",
        away_km,
        "km",
        "check its latitude and longitude",
    )

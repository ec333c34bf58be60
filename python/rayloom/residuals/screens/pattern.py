"""What a survey's residuals have in common: event terms and station terms.

The main type is :class:`Pattern`.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np

from rayloom.earth import ReferenceEarth, distance_azimuth_deg, geocentric_latitude_deg
from rayloom.residuals.groups import group_medians_s
from rayloom.residuals.screens.evidence import NO_WAVE, Evidence
from rayloom.survey import Stations
from rayloom.survey.tables import BoolArray, FloatArray, IndexArray, TextArray
from rayloom.units import EARTH_RADIUS_KM, KM_PER_DEGREE

MAD_TO_SIGMA: Final = 1.4826
"""Standard deviation of a normal variable over its median absolute deviation."""

_SWEEPS: Final = 8
_TYPICAL_DEPTH_KM: Final = 33.0


def sigma_of(values: FloatArray) -> float:
    """Robust standard deviation: scaled median absolute deviation from the median."""
    if not len(values):
        return float("nan")
    return MAD_TO_SIGMA * _median(np.abs(values - _median(values)))


def _median(values: FloatArray) -> float:
    """Return the median by sorting, which is the quickest way for few values."""
    ordered = np.sort(values)
    return 0.5 * float(ordered[(len(ordered) - 1) // 2] + ordered[len(ordered) // 2])


@dataclass(frozen=True, eq=False)
class Sites:
    """Places of recording, one per station label and wave type.

    Parameters
    ----------
    label, wave : (s,) str arrays
        Station as ``NET.STA``, and wave type.
    station_index : (s,) int array
        A row of the stations table with that label.
    x_km, y_km : (s,) float arrays
        East and north of the centre of the network.
    """

    label: TextArray
    wave: TextArray
    station_index: IndexArray
    x_km: FloatArray
    y_km: FloatArray

    def __len__(self) -> int:
        return len(self.label)


@dataclass(frozen=True, eq=False)
class Pattern:
    """Rows with a residual, split into event term, station term and the rest.

    Parameters
    ----------
    evidence : Evidence
        Where the rows come from.
    row : (m,) int array
        Row of the evidence of each row here: all those with a residual.
    kept : (m,) bool array
        Whether it is used.
    group, site : (m,) int arrays
        Group (event, phase) and site of each row.
    group_event : (g,) int array
        Event of each group.
    group_phase : (g,) str array
        Phase of each group.
    sites : Sites
        The sites.
    group_term_s, site_term_s : (g,), (s,) float arrays
        Residual that the rows of a group, of a site have in common, s.
    left_s : (m,) float array
        Residual without both terms, s.
    slowness_s_per_km : (m,) float array
        Horizontal slowness at the station.
    """

    evidence: Evidence
    row: IndexArray
    kept: BoolArray
    group: IndexArray
    site: IndexArray
    group_event: IndexArray
    group_phase: TextArray
    sites: Sites
    group_term_s: FloatArray
    site_term_s: FloatArray
    left_s: FloatArray
    slowness_s_per_km: FloatArray

    def __len__(self) -> int:
        return len(self.row)

    @property
    def back_azimuth_rad(self) -> FloatArray:
        """Direction towards the event at the station, rad, shape (m,)."""
        return np.radians(self.evidence.geometry.back_azimuth_deg[self.row])

    @property
    def azimuth_rad(self) -> FloatArray:
        """Direction towards the station at the event, rad, shape (m,)."""
        return np.radians(self.evidence.geometry.azimuth_deg[self.row])

    @property
    def uncertainty_s(self) -> FloatArray:
        """Standard deviation stated, s, shape (m,)."""
        return self.evidence.uncertainty_s[self.row]


def find_pattern(evidence: Evidence) -> Pattern:
    """Split residuals into event terms, station terms and the rest.

    Medians of rows and columns are taken off in turn (median polish; Tukey 1977),
    over the rows used. Groups and sites none of whose rows is used get their terms
    from the others.

    References
    ----------
    Tukey, J.W. (1977). Exploratory Data Analysis. Addison-Wesley, chapter 11.
    """
    row = np.flatnonzero(np.isfinite(evidence.residual_s) & (evidence.wave != NO_WAVE))
    kept = evidence.kept[row]
    group, group_event, group_phase = _groups(evidence, row)
    site, sites = _sites(evidence, row)
    residual_s = evidence.residual_s[row]
    group_term_s, site_term_s = _polish(residual_s, group, site, kept)
    return Pattern(
        evidence=evidence,
        row=row,
        kept=kept,
        group=group,
        site=site,
        group_event=group_event,
        group_phase=group_phase,
        sites=sites,
        group_term_s=group_term_s,
        site_term_s=site_term_s,
        left_s=residual_s - group_term_s[group] - site_term_s[site],
        slowness_s_per_km=_slowness(evidence, row),
    )


def _groups(evidence: Evidence, row: IndexArray) -> tuple[IndexArray, IndexArray, TextArray]:
    names, number = np.unique(evidence.phase[row], return_inverse=True)
    code = evidence.event_index[row] * max(len(names), 1) + number
    codes, group = np.unique(code, return_inverse=True)
    return group, codes // max(len(names), 1), names[codes % max(len(names), 1)]


def _sites(evidence: Evidence, row: IndexArray) -> tuple[IndexArray, Sites]:
    labels = evidence.stations.labels[evidence.station_index[row]]
    _, first, site = np.unique(
        np.char.add(np.char.add(labels, " "), evidence.wave[row]),
        return_index=True,
        return_inverse=True,
    )
    station = evidence.station_index[row][first]
    x_km, y_km = _plane_km(evidence.stations, station)
    return site, Sites(labels[first], evidence.wave[row][first], station, x_km, y_km)


def _plane_km(stations: Stations, rows: IndexArray) -> tuple[FloatArray, FloatArray]:
    """East and north of the median place, on the plane that keeps distance and azimuth."""
    if not len(rows):
        return np.empty(0), np.empty(0)
    latitude_deg = geocentric_latitude_deg(stations.latitude_deg[rows])
    longitude_deg = stations.longitude_deg[rows]
    apart_deg = (longitude_deg - longitude_deg[0] + 180.0) % 360.0 - 180.0
    centre_deg = longitude_deg[0] + float(np.median(apart_deg))
    path = distance_azimuth_deg(
        float(np.median(latitude_deg)), centre_deg, latitude_deg, longitude_deg
    )
    azimuth = np.radians(path.azimuth_deg)
    away_km = path.distance_deg * KM_PER_DEGREE
    return away_km * np.sin(azimuth), away_km * np.cos(azimuth)


def _polish(
    residual_s: FloatArray, group: IndexArray, site: IndexArray, kept: BoolArray
) -> tuple[FloatArray, FloatArray]:
    group_s = np.zeros(group.max(initial=-1) + 1)
    site_s = np.zeros(site.max(initial=-1) + 1)
    for _ in range(_SWEEPS):
        group_s = _medians(residual_s - site_s[site], group, kept, group_s)
        site_s = _medians(residual_s - group_s[group], site, kept, site_s)
        if len(site_s):
            site_s -= np.median(site_s)
    used = np.zeros(len(group_s), dtype=bool)
    used[group[kept]] = True
    seen = np.zeros(len(site_s), dtype=bool)
    seen[site[kept]] = True
    group_s = _medians(residual_s - site_s[site], group, ~used[group], group_s)
    site_s = _medians(residual_s - group_s[group], site, ~seen[site] & used[group], site_s)
    return group_s, site_s


def _medians(
    values_s: FloatArray, number: IndexArray, chosen: BoolArray, otherwise_s: FloatArray
) -> FloatArray:
    """Median of the chosen values of each number; ``otherwise_s`` where none is."""
    found_s = otherwise_s.copy()
    if chosen.any():
        present, compact = np.unique(number[chosen], return_inverse=True)
        found_s[present] = group_medians_s(values_s[chosen], compact)
    return found_s


def _slowness(evidence: Evidence, row: IndexArray) -> FloatArray:
    """Horizontal slowness, s/km, by interpolation; that at the nearest distance outside."""
    slowness = np.zeros(len(row))
    distance_deg = evidence.geometry.distance_deg[row]
    for name in np.unique(evidence.phase[row]).tolist():
        chosen = evidence.phase[row] == name
        slowness[chosen] = _phase_slowness(evidence.earth, name, distance_deg[chosen])
    return slowness


def _phase_slowness(earth: ReferenceEarth, phase: str, distance_deg: FloatArray) -> FloatArray:
    sampled_deg = np.linspace(distance_deg.min(), distance_deg.max(), 60)
    parameter = earth.ray_parameter(phase, sampled_deg, _TYPICAL_DEPTH_KM)
    there = np.isfinite(parameter)
    if not there.any():
        return np.zeros(len(distance_deg))
    return np.interp(distance_deg, sampled_deg[there], parameter[there]) / EARTH_RADIUS_KM

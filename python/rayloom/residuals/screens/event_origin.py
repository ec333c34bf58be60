"""Events whose origin time, depth or place is wrong."""

from __future__ import annotations

from dataclasses import replace
from typing import Final

import numpy as np

from rayloom.residuals.prediction import pair_geometry, predict
from rayloom.residuals.screens.finding import Finding
from rayloom.residuals.screens.nearby import Nearby
from rayloom.residuals.screens.pattern import Pattern, sigma_of
from rayloom.residuals.screens.robust_fit import robust_fit
from rayloom.residuals.screens.settings import CheckSettings
from rayloom.residuals.screens.station_place import usual_mistakes
from rayloom.survey.tables import FloatArray, IndexArray

_LEAST_GROUPS: Final = 8
_SIGMAS: Final = 5.0
_SIDE_SIGMAS: Final = 6.0
_LEAST_ROWS: Final = 8
_LOST_SHARE: Final = 0.5
_ABSURD_S: Final = 20.0
_FITTING_S: Final = 10.0
_FITTING_SCATTER_S: Final = 1.5
_DEPTH_S_PER_KM: Final = {"P": 0.1, "S": 0.2}
"""Change of the travel time of distant waves with depth of the source, about."""


def screen_event_origins(nearby: Nearby, settings: CheckSettings) -> list[Finding]:
    """Find events with wrong coordinates, origin time or depth.

    Parameters
    ----------
    nearby : Nearby
        Residuals and what neighbouring rays let expect.
    settings : CheckSettings
        From what size on.

    Returns
    -------
    list of Finding
        Kinds ``event_coordinates``, ``event_origin``, ``event_place``.
    """
    pattern = nearby.pattern
    off_s, sigma_s = group_offsets_s(pattern)
    exchanged = [] if pattern.evidence.ready else _exchanged(pattern, off_s)
    known = {one.who for one in exchanged}
    late = [] if pattern.evidence.ready else _late(pattern, off_s, sigma_s, settings, known)
    aside = _aside(nearby, settings, known)
    return exchanged + late + aside


def group_offsets_s(pattern: Pattern) -> tuple[FloatArray, FloatArray]:
    """Group terms minus their median over groups of the same phase, and their scale, s.

    Returns
    -------
    (g,), (g,) float arrays
        NaN for phases with few groups.
    """
    off_s, sigma_s = (np.full(len(pattern.group_term_s), np.nan) for _ in range(2))
    for phase in np.unique(pattern.group_phase).tolist():
        groups = np.flatnonzero(pattern.group_phase == phase)
        if len(groups) >= _LEAST_GROUPS:
            term_s = pattern.group_term_s[groups]
            off_s[groups] = term_s - np.median(term_s)
            sigma_s[groups] = sigma_of(term_s)
    return off_s, sigma_s


def _exchanged(pattern: Pattern, off_s: FloatArray) -> list[Finding]:
    """Events that fit well once their coordinates are exchanged or a sign is turned."""
    evidence = pattern.evidence
    absurd = pattern.group_event[np.abs(off_s) > _ABSURD_S]
    findings = []
    for event in np.unique(evidence.event_index).tolist():
        rows = np.flatnonzero((evidence.event_index == event) & (evidence.wave != ""))
        if len(rows) < _LEAST_ROWS:
            continue
        if event not in absurd and evidence.kept[rows].mean() > _LOST_SHARE:
            continue
        found = _mistaken(pattern, event, rows)
        findings += [found] if found else []
    return findings


def _mistaken(pattern: Pattern, event: int, rows: IndexArray) -> Finding | None:
    events = pattern.evidence.events
    given = float(events.latitude_deg[event]), float(events.longitude_deg[event])
    terms_s = _site_terms_s(pattern, rows)
    usual_s = float(np.median(pattern.group_term_s)) if len(pattern.group_term_s) else 0.0
    for mistake in usual_mistakes(*given):
        late_s = _late_at(pattern, rows, mistake.latitude_deg, mistake.longitude_deg) - terms_s
        good = late_s[np.isfinite(late_s)]
        if len(good) < 0.7 * len(rows):
            continue
        scatter_s = sigma_of(good)
        if scatter_s <= _FITTING_SCATTER_S and abs(np.median(good) - usual_s) <= _FITTING_S:
            text = (
                f"{mistake.what}: at {mistake.latitude_deg:g}, {mistake.longitude_deg:g} its "
                f"{len(good)} picks scatter by {scatter_s:.2f} s only"
            )
            advice = "correct its latitude and longitude in the events table"
            who = str(events.event[event])
            return Finding("error", "event_coordinates", who, text, scatter_s, "s", advice)
    return None


def _site_terms_s(pattern: Pattern, rows: IndexArray) -> FloatArray:
    labels = pattern.evidence.stations.labels[pattern.evidence.station_index[rows]]
    keys = zip(labels.tolist(), pattern.evidence.wave[rows].tolist(), strict=True)
    sites = zip(pattern.sites.label.tolist(), pattern.sites.wave.tolist(), strict=True)
    terms = dict(zip(sites, pattern.site_term_s.tolist(), strict=True))
    return np.array([terms.get(key, 0.0) for key in keys], dtype=np.float64)


def _late_at(
    pattern: Pattern, rows: IndexArray, latitude_deg: float, longitude_deg: float
) -> FloatArray:
    """Residuals of one event's rows as if it lay elsewhere, s."""
    evidence = pattern.evidence
    event = evidence.events.select(evidence.event_index[rows[:1]])
    moved = replace(
        event, latitude_deg=np.array([latitude_deg]), longitude_deg=np.array([longitude_deg])
    )
    pairs = (np.zeros(len(rows), dtype=np.int64), evidence.station_index[rows])
    geometry = pair_geometry(moved, evidence.stations, *pairs)
    parts = predict(
        evidence.earth,
        moved,
        evidence.stations,
        *pairs,
        evidence.phase[rows],
        geometry,
        ellipticity=False,
        elevation=False,
    )
    return np.asarray(evidence.readings.observed_s[rows] - parts.total_s)


def _late(
    pattern: Pattern,
    off_s: FloatArray,
    sigma_s: FloatArray,
    settings: CheckSettings,
    known: set[str],
) -> list[Finding]:
    """Events that are late or early as a whole, told once, by their largest group."""
    findings: dict[str, Finding] = {}
    used = np.zeros(len(off_s), dtype=bool)
    used[pattern.group[pattern.kept]] = True
    limit_s = np.maximum(settings.event_shift_s, _SIGMAS * sigma_s)
    for group in np.flatnonzero(used & (np.abs(off_s) >= limit_s)).tolist():
        who = str(pattern.evidence.events.event[pattern.group_event[group]])
        if who not in known and who not in findings:
            findings[who] = _late_finding(pattern, group, who, float(off_s[group]), sigma_s[group])
    return list(findings.values())


def _late_finding(pattern: Pattern, group: int, who: str, off_s: float, sigma_s: float) -> Finding:
    rows = np.flatnonzero(pattern.group == group)
    wave = str(pattern.sites.wave[pattern.site[rows[0]]])
    slowness = float(np.median(pattern.slowness_s_per_km[rows]))
    depth_km = -off_s / _DEPTH_S_PER_KM[wave]
    given_km = float(pattern.evidence.events.depth_km[pattern.group_event[group]])
    choices = [f"the origin time {abs(off_s):.1f} s too {'early' if off_s > 0.0 else 'late'}"]
    if given_km + depth_km >= 0.0:
        choices.append(f"the depth {abs(depth_km):.0f} km too {_side(depth_km)}")
    if slowness > 0.01:
        choices.append(f"the epicentre about {abs(off_s) / slowness:.0f} km off")
    text = (
        f"its {len(rows)} {pattern.group_phase[group]} picks are {off_s:+.1f} s off those of "
        f"other events (± {sigma_s:.1f} s): {' or '.join(choices)}"
    )
    advice = "compare its hypocentre with another catalogue; depth phases tell depth from time"
    return Finding("warning", "event_origin", who, text, off_s, "s", advice)


def _side(depth_km: float) -> str:
    return "small" if depth_km > 0.0 else "large"


def _aside(nearby: Nearby, settings: CheckSettings, known: set[str]) -> list[Finding]:
    """Events that lie to the side of their coordinates as seen from the network.

    Structure that neighbouring rays do not explain tilts the residuals of all events more
    than noise would; standard errors are scaled by how much.
    """
    pattern = nearby.pattern
    late_s = pattern.left_s - nearby.other_events.value_s
    chosen = []
    for event in np.unique(pattern.group_event).tolist():
        rows = np.flatnonzero((pattern.group_event[pattern.group] == event) & pattern.kept)
        if len(rows) >= _LEAST_ROWS:
            chosen.append((event, *_sideways_km(pattern, rows, late_s[rows])))
    if not chosen:
        return []
    events, side_km, error_km = (np.array(column) for column in zip(*chosen, strict=True))
    error_km = error_km * max(sigma_of(side_km / error_km), 1.0)
    large = (np.abs(side_km) >= settings.event_shift_km) & (
        np.abs(side_km) >= _SIDE_SIGMAS * error_km
    )
    findings = [
        _aside_finding(
            str(pattern.evidence.events.event[events[one]]), side_km[one], error_km[one]
        )
        for one in np.flatnonzero(large).tolist()
    ]
    return [one for one in findings if one.who not in known]


def _aside_finding(who: str, side_km: float, error_km: float) -> Finding:
    side = "right" if side_km > 0.0 else "left"
    text = (
        f"its picks point {abs(side_km):.0f} ± {error_km:.0f} km to the {side} of its epicentre, "
        "seen from there towards the network"
    )
    advice = "compare its epicentre with another catalogue"
    return Finding("warning", "event_place", who, text, float(side_km), "km", advice)


def _sideways_km(pattern: Pattern, rows: IndexArray, late_s: FloatArray) -> tuple[float, float]:
    """Fit the displacement across the direction to the network, km, and its error."""
    azimuth = pattern.azimuth_rad[rows]
    towards = np.arctan2(np.sin(azimuth).mean(), np.cos(azimuth).mean())
    turned = np.sin(azimuth - towards)
    columns = np.column_stack([np.ones(len(rows)), -pattern.slowness_s_per_km[rows] * turned])
    if np.linalg.matrix_rank(columns) < 2:
        return 0.0, np.inf
    fit = robust_fit(columns, late_s)
    return float(fit.value[1]), float(fit.error[1])

"""Stations that stand off their neighbours, and stations with swapped polarity."""

from __future__ import annotations

from typing import Final

import numpy as np

from rayloom.residuals.screens.finding import Finding, FindingSeverity
from rayloom.residuals.screens.nearby import Nearby
from rayloom.residuals.screens.pattern import Sites, sigma_of
from rayloom.residuals.screens.settings import CheckSettings
from rayloom.survey.tables import FloatArray, IndexArray

_LEAST_SITES: Final = 4
_CORRELATIONS: Final = (0.7, 1.2, 2.0, 3.0)
"""Correlation lengths tried, in median spacings of the stations."""

_NOISE_SHARES: Final = (0.15, 0.35, 0.6, 0.9)
"""Shares tried of the variance that stations have each for itself."""

_CLIP_SIGMAS: Final = 2.5
_LEAST_ROWS: Final = 8
_OFFSET_SIGMAS: Final = 3.5
_SURE_SIGMAS: Final = 5.0
"""Stations differ by nature: a note from the former on, a warning from the latter."""
_LEAST_SHARE: Final = 0.9
"""An estimate this share of the limit may well stem from an offset of the limit."""

_TWO_SIDED_SHARE: Final = 0.6
"""A station picked half a period early or late has a scatter that falls below this share
of itself once its residuals are folded on half a period."""

_HALF_TOLERANCE: Final = 0.3
_HALF_SIGMAS: Final = 3.0


def screen_station_offsets(nearby: Nearby, settings: CheckSettings) -> list[Finding]:
    """Find stations that stand off their neighbours, as a whole or by half a period.

    Parameters
    ----------
    nearby : Nearby
        Residuals and what neighbouring rays let expect.
    settings : CheckSettings
        From what size on, and the period.

    Returns
    -------
    list of Finding
        Kinds ``station_offset`` and ``polarity``.
    """
    pattern = nearby.pattern
    count = np.bincount(pattern.site, minlength=len(pattern.sites))
    off_s, ease = offsets_s(pattern.sites, pattern.site_term_s)
    findings = []
    for wave in np.unique(pattern.sites.wave).tolist():
        enough = (pattern.sites.wave == wave) & (count >= _LEAST_ROWS) & np.isfinite(off_s)
        sites = np.flatnonzero(enough)
        usual_s = sigma_of(off_s[sites] * ease[sites])
        for site in sites.tolist():
            found = _two_sided(nearby, site, settings) or _offset(
                nearby, site, float(off_s[site]), usual_s / float(ease[site]), settings
            )
            findings += [found] if found else []
    return findings


def offsets_s(sites: Sites, term_s: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Station terms minus what those of the other stations let expect, s.

    Each term is interpolated from the others by simple kriging; covariance and noise are
    chosen so that most terms are best expected. Terms far from the others do not drag
    their neighbours along: they count with the largest usual value.

    Parameters
    ----------
    sites : Sites
        Places, s of them.
    term_s : (s,) float array
        Station terms.

    Returns
    -------
    (s,), (s,) float arrays
        The differences, s; and the ease of expecting each term, which divides their standard
        deviation: larger amid many stations than at the edge. NaN with fewer than four
        stations.

    References
    ----------
    Dubrule, O. (1983). Cross validation of kriging in a unique neighborhood.
    Mathematical Geology 15, 687-699.
    """
    off_s, ease = np.full((2, len(sites)), np.nan)
    for wave in np.unique(sites.wave).tolist():
        rows = np.flatnonzero(sites.wave == wave)
        if len(rows) >= _LEAST_SITES:
            off_s[rows], ease[rows] = _off_others(sites.x_km[rows], sites.y_km[rows], term_s[rows])
    return off_s, ease


def _off_others(
    x_km: FloatArray, y_km: FloatArray, term_s: FloatArray
) -> tuple[FloatArray, FloatArray]:
    square = (x_km[:, np.newaxis] - x_km) ** 2 + (y_km[:, np.newaxis] - y_km) ** 2
    apart_km = np.sqrt(np.where(np.eye(len(x_km), dtype=bool), np.inf, square))
    spacing_km = max(float(np.median(apart_km.min(axis=1))), 1e-3)
    term_s = term_s - np.median(term_s)
    spread_s = max(sigma_of(term_s), 1e-6)
    tame_s = np.clip(term_s, -_CLIP_SIGMAS * spread_s, _CLIP_SIGMAS * spread_s)
    least_s, best = np.inf, (term_s, np.ones(len(term_s)))
    for correlation in _CORRELATIONS:
        smooth = np.exp(-0.5 * square / (correlation * spacing_km) ** 2)
        for share in _NOISE_SHARES:
            matrix = (1.0 - share) * smooth + share * np.eye(len(term_s))
            inverse = np.linalg.inv(matrix)
            expected_s = tame_s - (inverse @ tame_s) / np.diag(inverse)
            off_s = term_s - expected_s
            if sigma_of(off_s) < least_s:
                least_s, best = sigma_of(off_s), (off_s, np.sqrt(np.diag(inverse)))
    return best


def _offset(
    nearby: Nearby, site: int, off_s: float, sigma_s: float, settings: CheckSettings
) -> Finding | None:
    sites = nearby.pattern.sites
    label, wave = str(sites.label[site]), str(sites.wave[site])
    text = (
        f"{wave} residuals stand {off_s:+.2f} s off those of the stations around "
        f"(usual here: {sigma_s:.2f} s)"
    )
    limit_s = _LEAST_SHARE * settings.offset_s
    if abs(off_s) >= max(limit_s, _OFFSET_SIGMAS * sigma_s):
        advice = "check clock, coordinates and elevation; correct the picks, or drop the station"
        severity: FindingSeverity = "warning" if abs(off_s) >= _SURE_SIGMAS * sigma_s else "note"
        return Finding(severity, "station_offset", label, text, off_s, "s", advice)
    half_s = 0.5 * settings.wave_period_s(wave)
    near_half = abs(abs(off_s) - half_s) <= _HALF_TOLERANCE * half_s
    if near_half and abs(off_s) >= _HALF_SIGMAS * sigma_s:
        text += f", about half a period of {2.0 * half_s:g} s"
        advice = "check the polarity against a neighbour's records"
        return Finding("note", "polarity", label, text, off_s, "s", advice)
    return None


def _two_sided(nearby: Nearby, site: int, settings: CheckSettings) -> Finding | None:
    """Find picks that are half a period early or late, both at one station."""
    pattern = nearby.pattern
    rows = np.flatnonzero((pattern.site == site) & pattern.kept)
    if len(rows) < _LEAST_ROWS:
        return None
    wave = str(pattern.sites.wave[site])
    half_s = 0.5 * settings.wave_period_s(wave)
    alone_s = _without_structure(nearby, rows)
    centre_s = 0.5 * float(np.percentile(alone_s, 10.0) + np.percentile(alone_s, 90.0))
    folded_s = np.abs(alone_s - centre_s)
    scatter_s, within_s = sigma_of(alone_s), sigma_of(folded_s)
    apart_s = float(np.median(folded_s))
    both = 0.15 <= float(np.mean(alone_s > centre_s)) <= 0.85
    if (
        both
        and within_s <= _TWO_SIDED_SHARE * scatter_s
        and apart_s >= 3.0 * within_s
        and abs(apart_s - half_s) <= _HALF_TOLERANCE * half_s
    ):
        evidence = (
            f"its {len(rows)} {wave} picks are either early or late, {2.0 * apart_s:.2f} s apart "
            f"with {within_s:.2f} s scatter about each: half a period of {2.0 * half_s:g} s "
            "both ways"
        )
        advice = "the polarity may be swapped: turn the records over and pick again"
        label = str(pattern.sites.label[site])
        return Finding("warning", "polarity", label, evidence, apart_s, "s", advice)
    return None


def _without_structure(nearby: Nearby, rows: IndexArray) -> FloatArray:
    return np.asarray(nearby.pattern.left_s[rows] - nearby.other_sites.value_s[rows])

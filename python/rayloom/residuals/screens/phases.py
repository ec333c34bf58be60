"""Arrivals that another phase fits better than the one they are called."""

from __future__ import annotations

from typing import Final

import numpy as np

from rayloom.earth import phase_wave
from rayloom.residuals.prediction import predict
from rayloom.residuals.screens.finding import Finding
from rayloom.residuals.screens.nearby import Nearby
from rayloom.residuals.settings import USUAL_WINDOWS_DEG
from rayloom.survey.tables import FloatArray, IndexArray

_LEAST_S: Final = 2.0
_SIGMAS: Final = 8.0
_FITTING_S: Final = 2.0
_BETTER: Final = 0.25


def screen_phases_mixed(nearby: Nearby) -> list[Finding]:
    """Find picks called by one phase whose time is that of another.

    Parameters
    ----------
    nearby : Nearby
        Residuals and what neighbouring rays let expect.

    Returns
    -------
    list of Finding
        Kind ``phase_mixed``; none where residuals were computed by others.
    """
    pattern = nearby.pattern
    if pattern.evidence.ready:
        return []
    limit_s = max(_LEAST_S, _SIGMAS * nearby.surprise_sigma_s)
    used = np.unique(pattern.group[pattern.kept])
    odd = (np.abs(nearby.surprise_s) >= limit_s) & np.isin(pattern.group, used)
    rows = np.flatnonzero(odd)
    if not len(rows):
        return []
    names, misfit_s = _misfits(nearby, rows)
    best = np.argmin(np.abs(misfit_s), axis=0)
    findings = []
    for number, row in enumerate(rows.tolist()):
        found_s = float(misfit_s[best[number], number])
        own_s = float(nearby.surprise_s[row])
        if abs(found_s) <= min(_FITTING_S, _BETTER * abs(own_s)):
            findings.append(_finding(nearby, row, names[best[number]], own_s, found_s))
    return findings


def _misfits(nearby: Nearby, rows: IndexArray) -> tuple[list[str], FloatArray]:
    """Return what each phase would leave of each row, s; infinite where it does not arrive."""
    pattern, evidence = nearby.pattern, nearby.pattern.evidence
    source = pattern.row[rows]
    geometry = evidence.geometry.select(source)
    phases = evidence.phase[source]
    waves = np.array([phase_wave(name) for name in phases.tolist()])
    usual_s = evidence.residual_s[source] - nearby.surprise_s[rows]
    names = list(USUAL_WINDOWS_DEG)
    misfit_s = np.full((len(names), len(rows)), np.inf)
    for number, name in enumerate(names):
        fits = (phases != name) & (waves == phase_wave(name))
        if not fits.any():
            continue
        parts = predict(
            evidence.earth,
            evidence.events,
            evidence.stations,
            evidence.event_index[source[fits]],
            evidence.station_index[source[fits]],
            np.full(int(fits.sum()), name),
            geometry.select(fits),
            ellipticity=False,
            elevation=evidence.settings.elevation,
        )
        left_s = evidence.readings.observed_s[source[fits]] - parts.total_s - usual_s[fits]
        misfit_s[number, fits] = np.where(np.isfinite(left_s), left_s, np.inf)
    return names, misfit_s


def _finding(nearby: Nearby, row: int, name: str, own_s: float, found_s: float) -> Finding:
    evidence = nearby.pattern.evidence
    source = int(nearby.pattern.row[row])
    return Finding(
        "warning",
        "phase_mixed",
        evidence.name(source),
        f"{own_s:+.1f} s off as {evidence.phase[source]}, {found_s:+.1f} s as {name}",
        own_s,
        "s",
        f"look at the record: call it {name} if it is that, or list it in drop_picks",
    )

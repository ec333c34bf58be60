"""Stations whose offset changes in time: a step (clock, sensor) or a drift (clock)."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np

from rayloom.residuals.screens.finding import Finding
from rayloom.residuals.screens.nearby import Nearby
from rayloom.residuals.screens.pattern import sigma_of
from rayloom.residuals.screens.settings import CheckSettings
from rayloom.survey.tables import FloatArray, IndexArray, seconds_between

_LEAST_ROWS: Final = 12
_LEAST_SIDE: Final = 5
_LEAN_KM: Final = 30.0
"""Rays of one station that differ by this much in the ray metric are half alike."""

_LEAST_STRUCTURE: Final = 0.4
"""Structure that neighbouring stations do not explain, over the noise, at least."""

_CLIP_SIGMAS: Final = 4.0
_STEP_SIGMAS: Final = 5.5
_DRIFT_SIGMAS: Final = 4.2
"""Significance asked for; a step is sought at every time, so it has more chances."""

_CHOICE: Final = 6.0
"""By how much a step must lower chi-square more than a drift does to be preferred."""


@dataclass(frozen=True)
class _Change:
    """The best step or drift of one series."""

    kind: str
    size_s: float
    error_s: float
    after: int
    gain: float


def screen_station_times(nearby: Nearby, settings: CheckSettings) -> list[Finding]:
    """Find stations whose offset steps or drifts.

    What neighbouring stations do not explain of a station's residuals is a smooth function of
    the direction of the wave plus noise. With the covariance of both whitened away, a step at
    each time and a line are fitted by least squares, and the best of them is reported if it is
    large and significant.

    Parameters
    ----------
    nearby : Nearby
        Residuals and what neighbouring rays let expect.
    settings : CheckSettings
        From what size on.

    Returns
    -------
    list of Finding
        Kinds ``station_step`` and ``station_drift``.
    """
    pattern = nearby.pattern
    findings = []
    for site in range(len(pattern.sites)):
        rows = np.flatnonzero((pattern.site == site) & pattern.kept)
        if len(rows) < _LEAST_ROWS:
            continue
        times = pattern.evidence.events.time[pattern.group_event[pattern.group[rows]]]
        rows = rows[np.argsort(times, kind="stable")]
        change = _best_change(nearby, rows)
        if change is not None and _is_large(change, settings.step_s):
            findings.append(_finding(nearby, site, rows, change, settings))
    return findings


def _is_large(change: _Change, limit_s: float) -> bool:
    """Whether the size may well reach the limit and is no accident."""
    sigmas = _DRIFT_SIGMAS if change.kind == "station_drift" else _STEP_SIGMAS
    size_s = abs(change.size_s)
    return size_s + 2.0 * change.error_s >= limit_s and size_s >= sigmas * change.error_s


def _best_change(nearby: Nearby, rows: IndexArray) -> _Change | None:
    """Fit all steps and the drift to one series in order of time."""
    left_s = _without_structure_s(nearby, rows)
    centre_s, spread_s = float(np.median(left_s)), sigma_of(left_s)
    rows = rows[np.abs(left_s - centre_s) <= _CLIP_SIGMAS * spread_s + 1e-9]
    left_s = _without_structure_s(nearby, rows)
    days = _days(nearby, rows)
    if len(rows) < _LEAST_ROWS or np.ptp(days) == 0.0:
        return None
    whiten = _whitening(nearby, rows)
    steps = np.tri(len(rows), k=-1)[:, _LEAST_SIDE - 1 : len(rows) - _LEAST_SIDE]
    line = (days - days.mean()) / np.ptp(days)
    columns = np.column_stack([line, steps])
    size_s, error_s, gain = _fits(whiten @ left_s, whiten @ np.ones(len(rows)), whiten @ columns)
    distinct = np.append(True, np.diff(days)[_LEAST_SIDE - 1 : len(rows) - _LEAST_SIDE] > 0.0)
    gain[~distinct] = -np.inf
    best = int(np.argmax(gain))
    if gain[0] >= gain[best] - _CHOICE:
        best = 0
    kind = "station_drift" if best == 0 else "station_step"
    after = best + _LEAST_SIDE - 1 if best else 0
    return _Change(kind, float(size_s[best]), float(error_s[best]), after, float(gain[best]))


def _without_structure_s(nearby: Nearby, rows: IndexArray) -> FloatArray:
    """Return what rays to other stations do not explain, s."""
    return np.asarray(nearby.pattern.left_s[rows] - nearby.other_sites.value_s[rows])


def _days(nearby: Nearby, rows: IndexArray) -> FloatArray:
    pattern = nearby.pattern
    times = pattern.evidence.events.time[pattern.group_event[pattern.group[rows]]]
    return seconds_between(np.full_like(times, times.min()), times) / 86400.0


def _whitening(nearby: Nearby, rows: IndexArray) -> FloatArray:
    """Inverse Cholesky factor of the covariance of a station's residuals."""
    points = nearby.points_km[rows]
    square = ((points[:, np.newaxis] - points[np.newaxis]) ** 2).sum(axis=2)
    noise_s = nearby.surprise_sigma_s
    excess_s2 = sigma_of(_without_structure_s(nearby, rows)) ** 2 - noise_s**2
    structure_s = np.sqrt(max(excess_s2, (_LEAST_STRUCTURE * noise_s) ** 2))
    covariance = structure_s**2 * np.exp(-0.5 * square / _LEAN_KM**2)
    covariance[np.diag_indices(len(rows))] += noise_s**2
    return np.asarray(np.linalg.inv(np.linalg.cholesky(covariance)))


def _fits(
    data: FloatArray, ones: FloatArray, columns: FloatArray
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Fit a constant and each column in turn: size, standard error, drop of the misfit."""
    unit = ones / np.linalg.norm(ones)
    data = data - unit * (unit @ data)
    columns = columns - np.outer(unit, unit @ columns)
    power = np.maximum((columns**2).sum(axis=0), 1e-12)
    size_s = columns.T @ data / power
    gain = size_s**2 * power
    best = np.argmax(gain)
    scale = max(sigma_of(data - columns[:, best] * size_s[best]), 0.5)
    return size_s, scale / np.sqrt(power), gain / scale**2


def _finding(
    nearby: Nearby, site: int, rows: IndexArray, change: _Change, settings: CheckSettings
) -> Finding:
    pattern = nearby.pattern
    label, wave = str(pattern.sites.label[site]), str(pattern.sites.wave[site])
    size = f"{change.size_s:+.2f} ± {change.error_s:.2f} s"
    if change.kind == "station_drift":
        evidence = f"{wave} residuals drift by {size} over the time of recording"
        advice = "check the clock; correct the picks, or drop the station"
    else:
        times = pattern.evidence.events.time[pattern.group_event[pattern.group[rows]]]
        day = str(times[min(change.after + 1, len(times) - 1)].astype("datetime64[D]"))
        evidence = f"{wave} residuals step by {size} at about {day}"
        advice = "check clock and log book; correct the picks, or drop one side of the step"
        half_s = 0.5 * settings.wave_period_s(wave)
        if abs(abs(change.size_s) - half_s) <= 0.2 * half_s:
            evidence += f" (half a period of {2.0 * half_s:g} s: was the polarity swapped?)"
    return Finding("warning", change.kind, label, evidence, change.size_s, "s", advice)

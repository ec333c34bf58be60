"""Which rows become residuals: windows, group sizes, conflicts, gross errors."""

from __future__ import annotations

import numpy as np

from rayloom.residuals.exclusions import Selection
from rayloom.residuals.groups import group_medians_s, group_numbers
from rayloom.residuals.settings import ResidualSettings
from rayloom.survey import Notice
from rayloom.survey.tables import BoolArray, FloatArray, IndexArray, TextArray

TRIPLICATIONS_END_DEG = 25.0
"""Distance at which the upper-mantle triplications end."""

TRIPLICATED = frozenset({"P", "pP", "sP", "S"})
"""Phases that turn in the mantle."""

LATEST_DEG = {
    "P": (98.0, "P enters the core shadow"),
    "pP": (98.0, "pP enters the core shadow"),
    "sP": (98.0, "sP enters the core shadow"),
    "PcP": (75.0, "PcP closes up on P"),
    "S": (82.0, "SKS arrives before S"),
    "ScS": (75.0, "ScS closes up on S"),
}
"""Distance beyond which the core disturbs, and how."""

SKS_LEADS_DEG = 82.0
"""Distance from which SKS arrives before S."""


def screen_phases(selection: Selection, phase: TextArray, settings: ResidualSettings) -> None:
    """Leave out phases that cannot be predicted."""
    usable = list(settings.windows_deg)
    unknown = ~np.isin(phase, usable)
    detail = [
        f"phase {name!r} is not used here; expected {', '.join(usable)}" for name in phase[unknown]
    ]
    selection.leave_out(unknown, "unknown_phase", detail)


def screen_distances(
    selection: Selection, phase: TextArray, distance_deg: FloatArray, settings: ResidualSettings
) -> None:
    """Leave out picks outside the distance window of their phase."""
    for name, (low, high) in settings.windows_deg.items():
        outside = (phase == name) & ((distance_deg < low) | (distance_deg > high))
        detail = [
            f"distance {value:.2f} deg; {name} is used from {low:g} to {high:g} deg"
            for value in distance_deg[outside]
        ]
        selection.leave_out(outside, "outside_distance_window", detail)


def screen_arrivals(
    selection: Selection, phase: TextArray, distance_deg: FloatArray, predicted_s: FloatArray
) -> None:
    """Leave out picks whose phase does not arrive at their distance."""
    missing = selection.kept & ~np.isfinite(predicted_s)
    detail = [
        f"the reference Earth has no {name} at {value:.2f} deg from this depth"
        for name, value in zip(phase[missing], distance_deg[missing], strict=True)
    ]
    selection.leave_out(missing, "no_arrival", detail)


def screen_residuals(
    selection: Selection,
    event_index: IndexArray,
    station_index: IndexArray,
    phase: TextArray,
    residual_s: FloatArray,
    settings: ResidualSettings,
) -> None:
    """Leave out small groups, all but one of conflicting rows, and gross residuals."""
    group = group_numbers(event_index, phase)
    _screen_group_sizes(selection, group, settings.min_picks_per_event)
    _screen_conflicts(selection, group, station_index, residual_s)
    _screen_gross(selection, group, residual_s, settings.max_residual_s)
    _screen_group_sizes(selection, group, settings.min_picks_per_event)


def _screen_group_sizes(selection: Selection, group: IndexArray, least: int) -> None:
    if not selection.kept.any():
        return
    sizes = np.bincount(group[selection.kept], minlength=group.max() + 1)[group]
    small = selection.kept & (sizes < least)
    detail = [
        f"{size} picks left of this event and phase; min_picks_per_event is {least}"
        for size in sizes[small]
    ]
    selection.leave_out(small, "too_few_picks", detail)


def _relative_s(kept: BoolArray, group: IndexArray, residual_s: FloatArray) -> FloatArray:
    """Residual minus the median of the kept rows of its group, NaN elsewhere, s."""
    relative_s = np.full(len(residual_s), np.nan)
    if kept.any():
        _, number = np.unique(group[kept], return_inverse=True)
        relative_s[kept] = residual_s[kept] - group_medians_s(residual_s[kept], number)[number]
    return relative_s


def _screen_conflicts(
    selection: Selection, group: IndexArray, station_index: IndexArray, residual_s: FloatArray
) -> None:
    """Of several rows of one event, station and phase keep the one closest to the median."""
    relative_s = _relative_s(selection.kept, group, residual_s)
    order = np.lexsort((np.abs(relative_s), station_index, group))
    order = order[selection.kept[order]]
    repeats = (np.diff(group[order]) == 0) & (np.diff(station_index[order]) == 0)
    conflicting = np.zeros(len(group), dtype=bool)
    conflicting[order[1:][repeats]] = True
    detail = [
        f"{value:+.2f} s from the event's median; another row of this event, station and phase "
        "lies closer and is used"
        for value in relative_s[conflicting]
    ]
    selection.leave_out(conflicting, "conflicting_rows", detail)


def _screen_gross(
    selection: Selection, group: IndexArray, residual_s: FloatArray, limit_s: float
) -> None:
    """Leave out gross residuals; medians are taken anew until none is left."""
    while True:
        relative_s = _relative_s(selection.kept, group, residual_s)
        gross = (np.abs(relative_s) > limit_s) & ~selection.protected
        if not gross.any():
            return
        detail = [
            f"{value:+.2f} s from the event's median; max_residual_s is {limit_s:g} s"
            for value in relative_s[gross]
        ]
        selection.leave_out(gross, "gross_residual", detail)


def window_notices(settings: ResidualSettings) -> list[Notice]:
    """Warn of distance windows that reach where arrivals get difficult."""
    notices = []
    for phase, (low, high) in settings.windows_deg.items():
        found = _too_near(phase, low)
        if found:
            detail = f"distance_min_deg of {phase} is {low:g}: below about {found}"
            notices.append(Notice("warning", "wide_window", phase, detail))
        latest, what = LATEST_DEG.get(phase, (180.0, ""))
        if high > latest:
            detail = f"distance_max_deg of {phase} is {high:g}: beyond about {latest:g} deg {what}"
            notices.append(Notice("warning", "wide_window", phase, detail))
    return notices


def _too_near(phase: str, low_deg: float) -> str:
    """Distance below which a phase is difficult, and why; empty if it is not."""
    if phase in TRIPLICATED and low_deg < TRIPLICATIONS_END_DEG:
        return (
            f"{TRIPLICATIONS_END_DEG:g} deg arrivals of several branches mix "
            "(upper-mantle triplications)"
        )
    if phase == "SKS" and low_deg < SKS_LEADS_DEG:
        return f"{SKS_LEADS_DEG:g} deg SKS arrives after S"
    return ""

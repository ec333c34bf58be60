"""Single picks that neighbouring rays contradict: cycle skips and other outliers."""

from __future__ import annotations

from typing import Final

import numpy as np

from rayloom.residuals.screens.finding import Finding
from rayloom.residuals.screens.nearby import Nearby
from rayloom.residuals.screens.settings import CheckSettings
from rayloom.survey.tables import BoolArray, FloatArray

_SIGMAS: Final = 7.5
_MOST_CYCLES: Final = 3
_TOLERANCE: Final = 0.3
"""Of the period: how far from a whole number of periods a skip may be."""


def screen_single_picks(
    nearby: Nearby, settings: CheckSettings, explained: BoolArray
) -> list[Finding]:
    """Find picks that stand off neighbouring rays, whole periods or otherwise.

    Parameters
    ----------
    nearby : Nearby
        Residuals and what neighbouring rays let expect.
    settings : CheckSettings
        Periods.
    explained : (m,) bool array
        Rows that another finding explains already.

    Returns
    -------
    list of Finding
        Kinds ``cycle_skip`` (warning) and ``outlier`` (note).
    """
    pattern = nearby.pattern
    surprise_s, sigma_s = nearby.surprise_s, nearby.all_rays.sigma_s
    wave = pattern.sites.wave[pattern.site]
    period_s = np.array([settings.wave_period_s(name) for name in ("P", "S")])
    period_s = np.where(wave == "S", period_s[1], period_s[0])
    cycles = _cycles(surprise_s, period_s)
    wide = np.abs(surprise_s) >= _SIGMAS * sigma_s
    suspect = wide & pattern.kept & ~explained
    return [
        _finding(nearby, row, int(cycles[row]), float(period_s[row]))
        for row in np.flatnonzero(suspect).tolist()
    ]


def _cycles(surprise_s: FloatArray, period_s: FloatArray) -> FloatArray:
    """Whole number of periods of each surprise, 0 where it is none."""
    cycles = np.round(surprise_s / period_s)
    near = np.abs(surprise_s - cycles * period_s) <= _TOLERANCE * period_s
    return np.where(near & (np.abs(cycles) <= _MOST_CYCLES), cycles, 0.0)


def _finding(nearby: Nearby, row: int, cycles: int, period_s: float) -> Finding:
    pattern = nearby.pattern
    value_s = float(nearby.surprise_s[row])
    who = pattern.evidence.name(int(pattern.row[row]))
    text = (
        f"{value_s:+.2f} s off what neighbouring rays let expect "
        f"(± {nearby.all_rays.sigma_s[row]:.2f} s)"
    )
    if cycles:
        count = "a period" if abs(cycles) == 1 else f"{abs(cycles)} periods"
        side = "late" if cycles > 0 else "early"
        text += f": {count} of {period_s:g} s {side}"
        advice = "pick again, or list it in drop_picks"
        return Finding("warning", "cycle_skip", who, text, value_s, "s", advice)
    advice = "look at the record; robust weights take care of single ones"
    return Finding("note", "outlier", who, text, value_s, "s", advice)

"""Events whose mean depends on which stations recorded them."""

from __future__ import annotations

from typing import Final

import numpy as np

from rayloom.residuals.screens.finding import Finding
from rayloom.residuals.screens.pattern import Pattern, sigma_of
from rayloom.residuals.screens.settings import CheckSettings

_LEAST_ROWS: Final = 4
_SIGMAS: Final = 4.2
"""More than chance among a few hundred events."""

_MEDIAN_SPREAD: Final = 1.2533
"""Standard error of a median over that of a mean, for normal variables: sqrt(pi / 2)."""


def screen_event_means(pattern: Pattern, settings: CheckSettings) -> list[Finding]:
    """Find events recorded by stations that are late, or early, on the whole.

    Their mean residual then differs from what all stations would have given by the mean
    of the terms of the stations that did record.

    Parameters
    ----------
    pattern : Pattern
        Residuals split into event and station terms.
    settings : CheckSettings
        From what size on.

    Returns
    -------
    list of Finding
        Kind ``event_mean``.
    """
    term_s = pattern.site_term_s[pattern.site]
    findings = []
    for group in range(len(pattern.group_term_s)):
        rows = np.flatnonzero((pattern.group == group) & pattern.kept)
        if len(rows) < _LEAST_ROWS:
            continue
        shift_s = float(np.median(term_s[rows]))
        if abs(shift_s) >= settings.mean_shift_s:
            findings.append(_finding(pattern, group, rows, shift_s))
    return findings


def _chance_s(pattern: Pattern, rows: np.ndarray) -> float:
    """Return the standard deviation of the shift if as many stations were drawn by lot, s."""
    terms_s = pattern.site_term_s[pattern.sites.wave == pattern.sites.wave[pattern.site[rows[0]]]]
    drawn = len(rows) / max(len(terms_s), 1)
    spread_s = sigma_of(terms_s) * _MEDIAN_SPREAD / np.sqrt(len(rows))
    return float(spread_s * np.sqrt(max(1.0 - drawn, 0.0)))


def _finding(pattern: Pattern, group: int, rows: np.ndarray, shift_s: float) -> Finding:
    who = f"{pattern.evidence.events.event[pattern.group_event[group]]}"
    sites = int((pattern.sites.wave == pattern.sites.wave[pattern.site[rows[0]]]).sum())
    chance_s = _chance_s(pattern, rows)
    return Finding(
        "warning" if abs(shift_s) >= _SIGMAS * chance_s else "note",
        "event_mean",
        who,
        f"the {len(rows)} of {sites} stations that recorded {pattern.group_phase[group]} are "
        f"{shift_s:+.2f} s off all on the whole, and so is its mean "
        f"(± {chance_s:.2f} s by lot)",
        shift_s,
        "s",
        "compare relative residuals of this event with care; the inversion takes the mean out "
        "together with the model",
    )

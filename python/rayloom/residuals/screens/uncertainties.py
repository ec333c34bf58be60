"""Stated uncertainties against the scatter that is there."""

from __future__ import annotations

from typing import Final

import numpy as np

from rayloom.residuals.screens.finding import Finding
from rayloom.residuals.screens.nearby import Nearby
from rayloom.residuals.screens.pattern import sigma_of
from rayloom.residuals.screens.settings import CheckSettings

_LEAST_ROWS: Final = 30
_LEAST_ROWS_OF_STATION: Final = 20


def screen_uncertainties(nearby: Nearby, settings: CheckSettings) -> list[Finding]:
    """Find uncertainties out of scale, of the survey as a whole and of single stations.

    Parameters
    ----------
    nearby : Nearby
        Residuals and what neighbouring rays let expect.
    settings : CheckSettings
        From what ratio on.

    Returns
    -------
    list of Finding
        Kind ``uncertainty_scale``; the number is scatter over uncertainty.
    """
    pattern = nearby.pattern
    findings = []
    wave = pattern.sites.wave[pattern.site]
    ratio = nearby.surprise_s / pattern.uncertainty_s
    for name in np.unique(wave).tolist():
        rows = (wave == name) & pattern.kept
        if rows.sum() < _LEAST_ROWS:
            continue
        whole = max(sigma_of(ratio[rows]), 1e-6)
        if not 1.0 / settings.uncertainty_ratio < whole < settings.uncertainty_ratio:
            findings.append(_of_survey(name, whole, nearby, rows))
        for site in np.unique(pattern.site[rows]).tolist():
            found = _of_station(nearby, site, ratio, whole, settings)
            findings += [found] if found else []
    return findings


def _of_survey(wave: str, whole: float, nearby: Nearby, rows: np.ndarray) -> Finding:
    scatter_s = sigma_of(nearby.surprise_s[rows])
    stated_s = float(np.median(nearby.pattern.uncertainty_s[rows]))
    side = "small" if whole > 1.0 else "large"
    return Finding(
        "warning",
        "uncertainty_scale",
        f"all {wave} picks",
        f"neighbouring rays differ by {scatter_s:.3f} s where the uncertainties say "
        f"{stated_s:.3f} s ({whole:.2g} times): uncertainties too {side}",
        whole,
        "ratio",
        "check the unit and what the column means; state standard deviations in seconds",
    )


def _of_station(
    nearby: Nearby, site: int, ratio: np.ndarray, whole: float, settings: CheckSettings
) -> Finding | None:
    pattern = nearby.pattern
    rows = np.flatnonzero((pattern.site == site) & pattern.kept)
    if len(rows) < _LEAST_ROWS_OF_STATION:
        return None
    here = max(sigma_of(ratio[rows]), 1e-6)
    factor = here / whole
    if 1.0 / settings.uncertainty_ratio < factor < settings.uncertainty_ratio:
        return None
    scatter_s = sigma_of(nearby.surprise_s[rows])
    stated_s = float(np.median(pattern.uncertainty_s[rows]))
    return Finding(
        "warning",
        "uncertainty_scale",
        str(pattern.sites.label[site]),
        f"scatter of {scatter_s:.3f} s where {stated_s:.3f} s is stated: the ratio is "
        f"{factor:.2g} times that of all stations",
        factor,
        "ratio",
        "check the uncertainties of this station, and its records",
    )

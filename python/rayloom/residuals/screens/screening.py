"""All screens, one after the other: :func:`screen`."""

from __future__ import annotations

import numpy as np

from rayloom.residuals.screens.coverage import screen_coverage
from rayloom.residuals.screens.duplicates import screen_duplicates
from rayloom.residuals.screens.event_means import screen_event_means
from rayloom.residuals.screens.event_origin import screen_event_origins
from rayloom.residuals.screens.evidence import Evidence
from rayloom.residuals.screens.finding import Finding, by_severity
from rayloom.residuals.screens.nearby import Nearby
from rayloom.residuals.screens.pattern import Pattern, find_pattern
from rayloom.residuals.screens.phases import screen_phases_mixed
from rayloom.residuals.screens.settings import CheckSettings
from rayloom.residuals.screens.single_picks import screen_single_picks
from rayloom.residuals.screens.station_offset import screen_station_offsets
from rayloom.residuals.screens.station_place import screen_station_places
from rayloom.residuals.screens.station_time import screen_station_times
from rayloom.residuals.screens.uncertainties import screen_uncertainties
from rayloom.survey.tables import BoolArray


def screen(evidence: Evidence, settings: CheckSettings | None = None) -> list[Finding]:
    """Look for all that is wrong or suspicious in the arrivals of a survey.

    Parameters
    ----------
    evidence : Evidence
        All arrivals, of :func:`evidence_of_survey` or :func:`evidence_of_residuals`.
    settings : CheckSettings, optional
        From what size on things are reported.

    Returns
    -------
    list of Finding
        Gravest first. Nothing is left out because of a finding.
    """
    settings = settings or CheckSettings()
    findings = screen_duplicates(evidence) + screen_coverage(evidence, settings)
    pattern = find_pattern(evidence)
    if pattern.kept.any():
        nearby = Nearby(pattern)
        findings += _of_stations(nearby, settings)
        findings += screen_event_origins(nearby, settings) + screen_event_means(pattern, settings)
        findings += screen_phases_mixed(nearby) + screen_uncertainties(nearby, settings)
        explained = _explained(pattern, findings)
        if explained.any():
            nearby = Nearby(pattern, silent=explained)
        findings += screen_single_picks(nearby, settings, explained)
    return by_severity(findings)


def _of_stations(nearby: Nearby, settings: CheckSettings) -> list[Finding]:
    """Screen stations; one that stands elsewhere needs no other explanation."""
    places = screen_station_places(nearby, settings)
    others = screen_station_times(nearby, settings) + screen_station_offsets(nearby, settings)
    misplaced = {one.who for one in places}
    return places + [one for one in others if one.who not in misplaced]


def _explained(pattern: Pattern, findings: list[Finding]) -> BoolArray:
    """Rows of stations, events and picks that a finding names already."""
    kinds = {
        "station_coordinates",
        "station_step",
        "station_drift",
        "polarity",
        "event_coordinates",
        "event_place",
        "phase_mixed",
    }
    named = {one.who for one in findings if one.kind in kinds and one.severity != "note"}
    evidence = pattern.evidence
    labels = pattern.sites.label[pattern.site]
    events = evidence.events.event[pattern.group_event[pattern.group]]
    picks = np.array([evidence.name(row) for row in pattern.row.tolist()], dtype=np.str_)
    chosen = list(named)
    return np.isin(labels, chosen) | np.isin(events, chosen) | np.isin(picks, chosen)

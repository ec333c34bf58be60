"""Screens: what looks wrong in the arrivals of a survey, before any inversion.

The main types are :class:`Evidence`, all arrivals with what is known of each, and
:class:`Finding`; :func:`screen` leads from one to the other.
"""

from rayloom.residuals.screens.evidence import (
    Evidence,
    evidence_of_residuals,
    evidence_of_survey,
    evidence_of_times,
)
from rayloom.residuals.screens.finding import (
    Finding,
    by_severity,
    findings_frame,
    write_findings_csv,
)
from rayloom.residuals.screens.screening import screen
from rayloom.residuals.screens.settings import CheckSettings

__all__ = [
    "CheckSettings",
    "Evidence",
    "Finding",
    "by_severity",
    "evidence_of_residuals",
    "evidence_of_survey",
    "evidence_of_times",
    "findings_frame",
    "screen",
    "write_findings_csv",
]

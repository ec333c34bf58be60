"""Looking a run folder's tables through before any inversion.

The main function is :func:`check`.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from pathlib import Path
from typing import Final

from rayloom.outputs.report_section import ReportSection, SectionTable
from rayloom.residuals.delays import read_delays, relative_times
from rayloom.residuals.screens import (
    Evidence,
    Finding,
    evidence_of_residuals,
    evidence_of_survey,
    evidence_of_times,
    screen,
    write_findings_csv,
)
from rayloom.settings import RunSettings
from rayloom.survey import read_events, read_stations, read_survey
from rayloom.workflow.data import Tables, read_earth, station_crust
from rayloom.workflow.folder import RunFolder
from rayloom.workflow.reporting import Reporter

FINDINGS_FILE: Final = "findings.csv"
SECTION_FILE: Final = "check_report.json"
_MOST_PER_KIND: Final = 5


def check(path: str | Path, *, reporter: Reporter | None = None) -> list[Finding]:
    """Look for what is wrong or suspicious in the tables of a run folder.

    Residuals are computed from the tables, those left out included; nothing else of the
    folder is needed, and nothing of it is changed but ``findings.csv`` and the section of
    the report.

    Parameters
    ----------
    path : str or pathlib.Path
        The run folder.
    reporter : Reporter, optional
        Hears what happens.

    Returns
    -------
    list of Finding
        Gravest first.

    Raises
    ------
    InputError
        If the settings or a table cannot be read.
    """
    reporter = reporter or Reporter()
    folder = RunFolder.at(path).run
    settings = folder.read_settings()
    reporter.begin("check", "reading the tables")
    evidence = _evidence(folder, settings)
    reporter.note(f"looking through {len(evidence)} arrivals")
    findings = screen(evidence, settings.check)
    write_findings_csv(folder.file(FINDINGS_FILE), findings)
    _section(findings).write(folder.file(SECTION_FILE))
    return findings


def _section(findings: Sequence[Finding]) -> ReportSection:
    """Tell errors and warnings, the first of each kind, and count the others."""
    shown = []
    by_kind: Counter[str] = Counter()
    for one in findings:
        by_kind[one.kind] += 1
        if one.severity != "note" and by_kind[one.kind] <= _MOST_PER_KIND:
            shown.append((one.severity, one.kind, one.who, one.evidence, one.advice))
    counts = ", ".join(f"{number} {kind}" for kind, number in by_kind.most_common())
    table = SectionTable(
        caption=f"Errors and warnings, {_MOST_PER_KIND} of a kind; all in {FINDINGS_FILE}.",
        names=("severity", "kind", "who", "evidence", "what to do"),
        rows=tuple(shown),
    )
    return ReportSection(
        title="What the check found in the tables",
        sentences=(f"{len(findings)} findings: {counts}." if findings else "Nothing.",),
        tables=(table,) if shown else (),
    )


def _evidence(folder: RunFolder, settings: RunSettings) -> Evidence:
    tables = Tables.of(folder, settings)
    earth = read_earth(folder, settings.earth.model)
    if tables.picks is not None:
        survey = read_survey(
            stations=tables.stations,
            events=tables.events,
            picks=tables.picks,
            settings=settings.survey,
        )
        crust = station_crust(tables, survey.stations)
        return evidence_of_survey(survey, earth, settings.residuals, crust=crust)
    stations, events = read_stations(tables.stations), read_events(tables.events)
    if tables.delays is not None:
        times = relative_times(
            read_delays(tables.delays, stations, events, settings=settings.survey)
        )
        crust = station_crust(tables, stations)
        return evidence_of_times(times, stations, events, earth, settings.residuals, crust=crust)
    return evidence_of_residuals(
        tables.residuals or (),
        stations,
        events,
        earth,
        settings.residuals,
        survey_settings=settings.survey,
    )

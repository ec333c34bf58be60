"""The screens of ``check`` against planted faults, and against surveys without any."""

from __future__ import annotations

import time
from collections import Counter
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np

from bench.planted.faults import FAULTS, Fault
from bench.planted.survey import clean_survey
from bench.report import Report
from rayloom.residuals.screens import Finding, screen

CLEAN, SPOILT = 200, 50
QUICK_CLEAN, QUICK_SPOILT = 12, 4
FIRST_SPOILT_SEED = 1000
WARNED_LIMIT = 2
SECONDS_LIMIT = 0.5
PROCESSES = 2

Task = tuple[int, float, int]
"""Number of the fault, times its size, number of surveys."""


@dataclass
class Count:
    """How surveys with one fault came out."""

    named: int = 0
    warned: int = 0
    others: int = 0
    kinds: Counter[str] = field(default_factory=Counter)


def run(*, quick: bool, output: Path) -> Report:
    """Screen clean surveys and surveys with one fault each."""
    clean, spoilt = (QUICK_CLEAN, QUICK_SPOILT) if quick else (CLEAN, SPOILT)
    report = Report(
        "Planted faults and clean surveys",
        {
            "clean surveys": clean,
            "surveys per fault": spoilt,
            "picks per survey": "2,600 to 6,500",
        },
    )
    with ProcessPoolExecutor(PROCESSES) as pool:
        _clean(report, list(pool.map(_clean_findings, range(clean), chunksize=4)))
        tasks = [
            (number, scale, spoilt)
            for number, fault in enumerate(FAULTS)
            for scale in fault.scales
        ]
        _spoilt(report, tasks, list(pool.map(_counted, tasks)))
    report.remarks += [
        "Surveys: 42 to 72 stations some 55 km apart, 90 to 130 events, structure of 0.3 to 0.5 s "
        "RMS (smooth random delays where rays cross four depths), station terms of 0.2 s, noise "
        "of 0.06 to 0.14 s, catalogue errors of 7 km and 0.6 s. A survey is drawn by its seed; "
        "networks and events come from a dozen.",
        "*Named* counts findings of the right kind on the right station, event or pick; *as a "
        "warning* those that are not mere notes. *Others* are warnings on something else.",
        "Structure here is as smooth as the screens suppose it to be. Sharper structure leaves "
        "more unexplained, and fewer faults stand out of it.",
    ]
    return report


def _clean_findings(seed: int) -> tuple[list[Finding], float]:
    """Screen one clean survey: findings, and CPU time in seconds."""
    evidence = clean_survey(seed).evidence()
    started = time.process_time()
    findings = screen(evidence)
    return findings, time.process_time() - started


def _clean(report: Report, found: list[tuple[list[Finding], float]]) -> None:
    warned = [{one.kind for one in findings if one.severity != "note"} for findings, _ in found]
    noted = [{one.kind for one in findings if one.severity == "note"} for findings, _ in found]
    for title, surveys in (("Clean surveys: warnings", warned), ("Clean surveys: notes", noted)):
        table = report.table(title, "kind", "surveys with it")
        for kind, number in Counter(kind for kinds in surveys for kind in kinds).most_common():
            table.add(kind, number)
        table.add("any", sum(map(bool, surveys)))
    report.at_most(
        f"clean surveys with a warning, of {len(found)}", sum(map(bool, warned)), WARNED_LIMIT
    )
    seconds = float(np.median([one for _, one in found]))
    report.at_most("screening one survey (CPU s, median)", seconds, SECONDS_LIMIT)


def _spoilt(report: Report, tasks: list[Task], found: list[Count]) -> None:
    table = report.table(
        "Surveys with one fault each",
        "fault",
        "size",
        "times",
        "surveys",
        "named",
        "as a warning",
        "others per survey",
        "kinds of the others",
    )
    for (number, scale, count), one in zip(tasks, found, strict=True):
        kinds = ", ".join(f"{kind} {times}" for kind, times in one.kinds.most_common())
        fault = FAULTS[number]
        table.add(
            fault.name,
            fault.size,
            scale,
            count,
            one.named,
            one.warned,
            one.others / count,
            kinds,
        )


def _counted(task: Task) -> Count:
    number, scale, count = task
    fault = FAULTS[number]
    found = Count()
    for seed in range(FIRST_SPOILT_SEED, FIRST_SPOILT_SEED + count):
        random = np.random.default_rng([seed, 47])
        draft, who = fault.plant(clean_survey(seed), random, scale)
        _add(found, fault, who, screen(draft.evidence()))
    return found


def _add(found: Count, fault: Fault, who: str, findings: list[Finding]) -> None:
    hits = [one for one in findings if fault.named_by(one, who)]
    found.named += bool(hits)
    found.warned += any(one.severity != "note" for one in hits)
    others = [
        one.kind
        for one in findings
        if one.severity != "note" and one not in hits and not (who and who in one.who)
    ]
    found.others += len(others)
    found.kinds.update(others)

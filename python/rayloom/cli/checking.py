"""The command that looks tables through before an inversion: ``check``."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Final

import click

from rayloom.cli.guard import FOLDER
from rayloom.cli.options import folder_argument, quiet_option
from rayloom.cli.teaching import TaughtCommand

if TYPE_CHECKING:
    from rich.console import Console

    from rayloom.residuals.screens import Finding

SHOWN_PER_KIND: Final = 8
_STYLES: Final = {"error": "bold red", "warning": "yellow", "note": "dim"}
_LEAST_WIDTH: Final = 110


@click.command(cls=TaughtCommand)
@folder_argument
@click.option("--all", "everything", is_flag=True, help="Print every finding, however many.")
@quiet_option
@click.pass_context
def check(ctx: click.Context, folder: Path, everything: bool, quiet: bool) -> None:
    """Tell what looks wrong in the tables.

    Looks for stations whose offset steps or drifts or stands off their neighbours, cycle
    skips, swapped polarity, picks, events and stations given twice, wrong coordinates,
    events outside the window, with wrong origins, in clusters or in few directions only,
    phases mixed up, uncertainties out of scale. Each finding says what speaks for it and what
    to do. Nothing is left out because of a finding: what is, you say in [residuals]
    (drop_stations, drop_events, drop_picks, keep). Needs no inversion.

    Reads:   the tables named in DIR/rayloom.toml; [earth] [survey] [residuals] [check]
    Writes:  findings.csv, check_report.json (shown in report.html by the next export)
    Example: rayloom check highland
    """
    from rayloom.cli.console import listening
    from rayloom.workflow.checking import FINDINGS_FILE
    from rayloom.workflow.checking import check as check_folder

    ctx.meta[FOLDER] = folder
    with listening(quiet=quiet) as reporter:
        findings = check_folder(folder, reporter=reporter)
    _print(findings, most=len(findings) if everything else SHOWN_PER_KIND)
    click.echo(f"{_counts(findings)}; all in {folder / FINDINGS_FILE}")


def _print(findings: Sequence[Finding], *, most: int) -> None:
    """Print a table of the findings, the first few of each kind."""
    from rich.console import Console

    console = Console(highlight=False)
    if not console.is_terminal:
        console = Console(highlight=False, width=max(console.width, _LEAST_WIDTH))
    shown: Counter[str] = Counter()
    chosen = []
    for one in findings:
        shown[one.kind] += 1
        if shown[one.kind] <= most:
            chosen.append(one)
    if chosen:
        _print_rows(console, chosen)
    for kind, count in shown.items():
        if count > most:
            click.echo(f"… and {count - most} more of the kind {kind.replace('_', ' ')} (--all)")


def _print_rows(console: Console, findings: Sequence[Finding]) -> None:
    from rich import box
    from rich.table import Table
    from rich.text import Text

    table = Table(box=box.SIMPLE_HEAD, pad_edge=False)
    table.add_column("", no_wrap=True)
    for heading, share in (("what", 2), ("who", 2), ("evidence", 6), ("what to do", 4)):
        table.add_column(heading, overflow="fold", ratio=share)
    for one in findings:
        cells = (one.severity, one.kind.replace("_", " "), one.who, one.evidence, one.advice)
        table.add_row(*(Text(cell, style=_STYLES[one.severity]) for cell in cells))
    console.print(table)


def _counts(findings: Sequence[Finding]) -> str:
    """Tell how many findings of each severity there are."""
    if not findings:
        return "Nothing looks wrong"
    counts = Counter(one.severity for one in findings)
    named = [
        f"{counts[severity]} {severity}{'s' if counts[severity] != 1 else ''}"
        for severity in ("error", "warning", "note")
    ]
    return f"Found {', '.join(named)}"

"""Telling a person what a job does: bars on a terminal, plain lines elsewhere.

The main function is :func:`listening`.
"""

from __future__ import annotations

import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager

import click
from rich.console import Console
from rich.progress import (
    BarColumn,
    MofNCompleteColumn,
    Progress,
    TaskID,
    TextColumn,
    TimeElapsedColumn,
    TimeRemainingColumn,
)

from rayloom.workflow import Reporter

LINE_EVERY_S = 5.0
"""Least time between two plain progress lines, in seconds."""

LINE_EVERY_SHARE = 0.1
"""The same as a share of the time that the step has taken, so that long jobs say less."""


@contextmanager
def listening(*, quiet: bool = False) -> Iterator[Reporter]:
    """Give a reporter fit for where the messages go (standard error).

    Parameters
    ----------
    quiet : bool
        Say nothing.

    Yields
    ------
    Reporter
        Colours and bars on a terminal (without colours where NO_COLOR is set), plain
        lines elsewhere.
    """
    if quiet:
        yield Reporter()
    elif sys.stderr.isatty():
        with BarReporter() as reporter:
            yield reporter
    else:
        yield LineReporter()


class LineReporter(Reporter):
    """Writes plain lines, progress at most every few seconds.

    Parameters
    ----------
    line_every_s : float
        Least time between two progress lines, in seconds.
    """

    def __init__(self, line_every_s: float = LINE_EVERY_S) -> None:
        self._line_every_s = line_every_s
        self._began = self._last_line = time.monotonic()

    def begin(self, step: str, reason: str) -> None:
        """Write that a step begins."""
        self._began = self._last_line = time.monotonic()
        _line(f"{step}: {reason}")

    def note(self, text: str) -> None:
        """Write a note."""
        _line(f"  {text}")

    def progress(self, label: str, done: int, total: int) -> None:
        """Write a progress line unless the last one is young."""
        now = time.monotonic()
        pause = max(self._line_every_s, LINE_EVERY_SHARE * (now - self._began))
        if now - self._last_line >= pause:
            self._last_line = now
            _line(f"  {label}: {_share(done, total)}")

    def finish(self, step: str, seconds: float) -> None:
        """Write that a step is finished."""
        _line(f"{step}: done in {seconds:.1f} s")


class BarReporter(Reporter):
    """Draws a bar for each long call and prints notes above it."""

    def __init__(self, console: Console | None = None) -> None:
        self._console = console or Console(stderr=True, highlight=False)
        self._bars = Progress(
            TextColumn("  {task.description}"),
            BarColumn(),
            MofNCompleteColumn(),
            TimeElapsedColumn(),
            TimeRemainingColumn(),
            console=self._console,
            transient=True,
            refresh_per_second=5,
        )
        self._task: TaskID | None = None
        self._label = ""

    def __enter__(self) -> BarReporter:
        self._bars.start()
        return self

    def __exit__(self, *_: object) -> None:
        self._clear()
        self._bars.stop()

    def begin(self, step: str, reason: str) -> None:
        """Print that a step begins."""
        self._console.print(f"[bold]{step}[/bold]  [dim]{reason}[/dim]")

    def note(self, text: str) -> None:
        """Print a note."""
        self._console.print(f"  {text}", markup=False)

    def progress(self, label: str, done: int, total: int) -> None:
        """Move the bar of this label, which replaces that of any other."""
        if self._task is None or label != self._label:
            self._clear()
            self._task, self._label = self._bars.add_task(label, total=total or None), label
        self._bars.update(self._task, completed=done, total=total or None)

    def finish(self, step: str, seconds: float) -> None:
        """Print that a step is finished."""
        self._clear()
        self._console.print(f"[green]done[/green]  {step}  [dim]{seconds:.1f} s[/dim]")

    def _clear(self) -> None:
        if self._task is not None:
            self._bars.remove_task(self._task)
            self._bars.refresh()
            self._task = None


def _line(text: str) -> None:
    click.echo(text, err=True)


def _share(done: int, total: int) -> str:
    """Tell how far along a call is; a total of 0 means that nobody knows."""
    return f"{done} of {total} ({100.0 * done / total:.0f} %)" if total else f"{done}"

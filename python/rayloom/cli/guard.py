"""What a person sees when something goes wrong, and the exit code it carries.

0 all went well; 2 something the person can mend; 1 an error of the program, whose
trace goes to a log file and never to the screen; 130 stopped with Ctrl-C or by the
system (SIGTERM).
"""

from __future__ import annotations

import signal
import tempfile
import threading
import traceback
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import click

from rayloom.cli.teaching import TaughtGroup
from rayloom.errors import RayloomError

FOLDER = "rayloom.folder"
"""Key of the run folder at work in the context's shared notes."""

RESUME = "rayloom.resume"
"""Key of the command that takes up an interrupted job, where it is not ``run``."""

PERSONS_MISTAKE = 2
PROGRAMS_ERROR = 1
INTERRUPTED = 130


class GuardedGroup(TaughtGroup):
    """A group of commands that turns every error into one message and an exit code."""

    def invoke(self, ctx: click.Context) -> Any:
        """Run the command; a request to terminate is taken like Ctrl-C."""
        if threading.current_thread() is threading.main_thread():
            signal.signal(signal.SIGTERM, signal.default_int_handler)
        try:
            return super().invoke(ctx)
        except (click.ClickException, click.exceptions.Exit, click.Abort):
            raise
        except RayloomError as error:
            _say(f"Error: {error}")
            ctx.exit(PERSONS_MISTAKE)
        except MemoryError:
            _say("Error: not enough memory; make the blocks of [grid] larger or use fewer picks")
            ctx.exit(PERSONS_MISTAKE)
        except KeyboardInterrupt:
            _say(_how_to_resume(ctx.meta.get(FOLDER), ctx.meta.get(RESUME, "run")))
            ctx.exit(INTERRUPTED)
        except Exception as error:
            _say(_own_error(error, ctx.meta.get(FOLDER)))
            ctx.exit(PROGRAMS_ERROR)


def _say(text: str) -> None:
    click.echo(text, err=True)


def _how_to_resume(folder: Path | None, command: str) -> str:
    if folder is None or not _is_run_folder(folder):
        return "Stopped; nothing half-written was left."
    return (
        "Stopped; what was finished is kept and nothing is half-written. "
        f"Resume with: rayloom {command} {folder}"
    )


def _is_run_folder(folder: Path) -> bool:
    """Tell whether a folder, or the one that it is the part of a wave of, has settings."""
    places = [folder, *([folder.parent] if folder.name in ("P", "S") else [])]
    return any((place / "rayloom.toml").exists() for place in places)


def _own_error(error: Exception, folder: Path | None) -> str:
    log = _write_log(folder)
    return (
        f"rayloom made an error of its own ({type(error).__name__}: {error}). "
        f"This is not your mistake; the details are in {log}"
    )


def _write_log(folder: Path | None) -> Path:
    text = f"{datetime.now(UTC).isoformat(timespec='seconds')}\n{traceback.format_exc()}\n"
    if folder is not None and folder.is_dir():
        log = folder / "rayloom_error.log"
        try:
            with log.open("a", encoding="utf-8") as stream:
                stream.write(text)
        except OSError:
            pass
        else:
            return log
    with tempfile.NamedTemporaryFile(
        "w", prefix="rayloom_error_", suffix=".log", delete=False, encoding="utf-8"
    ) as stream:
        stream.write(text)
        return Path(stream.name)

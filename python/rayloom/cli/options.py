"""Arguments and options that several commands share, and the way they do one step."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any, TypeVar

import click

from rayloom.cli.guard import FOLDER

Command = TypeVar("Command", bound=Callable[..., Any])


def folder_argument(command: Command) -> Command:
    """Take the run folder."""
    return click.argument(
        "folder", metavar="DIR", type=click.Path(file_okay=False, path_type=Path)
    )(command)


def quiet_option(command: Command) -> Command:
    """Take --quiet."""
    return click.option("-q", "--quiet", is_flag=True, help="Print the results only.")(command)


def again_option(command: Command) -> Command:
    """Take --again."""
    return click.option(
        "--again", is_flag=True, help="Do it although the results still match inputs and settings."
    )(command)


def file_option(
    name: str, columns: str, *, required: bool = False, multiple: bool = True
) -> Callable[..., Any]:
    """Take a file, or several by giving it again, ``columns`` saying what they hold."""
    return click.option(
        name,
        type=click.Path(path_type=Path),
        metavar="FILE",
        required=required,
        multiple=multiple,
        help=columns,
    )


def one_step(ctx: click.Context, name: str, folder: Path, *, again: bool, quiet: bool) -> None:
    """Do one step of a run folder and tell what came of it."""
    from rayloom.cli.console import listening
    from rayloom.workflow import run_step, summarise

    ctx.meta[FOLDER] = folder
    with listening(quiet=quiet) as reporter:
        done = run_step(folder, name, again=again, reporter=reporter)
    if not done:
        click.echo(f"{name}: up to date (do it again with --again).")
    click.echo(summarise(folder, upto=name))

"""The command that does everything still to do: ``run``."""

from __future__ import annotations

from pathlib import Path

import click

from rayloom.cli.guard import FOLDER
from rayloom.cli.options import folder_argument, quiet_option
from rayloom.cli.teaching import TaughtCommand


@click.command(cls=TaughtCommand)
@folder_argument
@quiet_option
@click.pass_context
def run(ctx: click.Context, folder: Path, quiet: bool) -> None:
    """Do everything still to do in a run folder.

    The steps are residuals, invert and export, the last two for each wave ([inversion]
    wave), and ratio where there are two. A step is done when its results are missing
    or when its input files or its settings have changed since (told by their contents, not
    their dates), and the reason is printed. An inversion that was stopped goes on from its
    last finished iteration.

    Reads:   DIR/rayloom.toml and the tables it names.
    Writes:  residuals.csv, exclusions.csv, residuals_after.csv, suspected_outliers.csv,
             station_terms.csv, mislocations.csv, history.csv, model.nc, inversion.npz,
             model.vts, rays.vtp, stations.vtp, events.vtp, figures/, report.html,
             settings_used.toml, provenance.json. With P and S arrivals the results of
             either go to DIR/P and DIR/S, and both side by side to ratio.nc
    Example: rayloom run highland
    """
    from rayloom.cli.console import listening
    from rayloom.workflow import run as run_all
    from rayloom.workflow import summarise

    ctx.meta[FOLDER] = folder
    with listening(quiet=quiet) as reporter:
        done = run_all(folder, reporter=reporter)
    if not done:
        click.echo("Everything is up to date.")
    click.echo(summarise(folder))

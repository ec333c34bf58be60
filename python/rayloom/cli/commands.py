"""The commands of ``rayloom``.

Each reads its arguments, calls :mod:`rayloom.workflow` or :mod:`rayloom.demo`, and
prints what came of it. Heavy modules are imported when a command runs, so that
``--help`` is there at once.
"""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any, TypeVar

import click

from rayloom import __version__
from rayloom.cli.guard import FOLDER, RESUME, GuardedGroup

Command = TypeVar("Command", bound=Callable[..., Any])

_CONTEXT = {"help_option_names": ["-h", "--help"], "max_content_width": 92}


@click.group(cls=GuardedGroup, context_settings=_CONTEXT)
@click.version_option(__version__, "-V", "--version", prog_name="rayloom")
def main() -> None:
    """Three-dimensional velocity models from arrival picks of distant earthquakes.

    Start here:
      rayloom demo                 an invented survey, the whole job, the truth beside it
      rayloom init DIR ...         a run folder from your own three CSV files
      rayloom run DIR              everything still to do in it

    The run folder holds everything of one run: rayloom.toml, which you edit, and all
    results. Only what is missing or no longer matches its inputs and settings is done
    again; a job stopped with Ctrl-C goes on where it was.

    Exit codes: 0 done, 2 something for you to mend (the message says what and where),
    1 an error of the program (details in a log file), 130 stopped with Ctrl-C.
    """


def _folder_argument(command: Command) -> Command:
    return click.argument(
        "folder", metavar="DIR", type=click.Path(file_okay=False, path_type=Path)
    )(command)


def _quiet_option(command: Command) -> Command:
    return click.option("-q", "--quiet", is_flag=True, help="Print the results only.")(command)


def _again_option(command: Command) -> Command:
    return click.option(
        "--again", is_flag=True, help="Do it although the results still match inputs and settings."
    )(command)


def _file_option(name: str, columns: str, *, required: bool = False) -> Callable[..., Any]:
    return click.option(
        name,
        type=click.Path(path_type=Path),
        metavar="FILE",
        required=required,
        help=columns,
    )


@main.command()
@click.argument(
    "folder",
    metavar="[DIR]",
    type=click.Path(file_okay=False, path_type=Path),
    default=Path("rayloom_demo"),
)
@_quiet_option
@click.pass_context
def demo(ctx: click.Context, folder: Path, quiet: bool) -> None:
    """Run the whole job on an invented survey.

    The survey is that of a volcanic highland. Its times are computed through a known
    structure (a tilted slow column, a fast body) on blocks finer than and unlike those
    inverted, with noise, mislocated events and gross errors; the answer is then printed
    beside the truth. DIR is ./rayloom_demo unless given.

    Writes:  DIR/survey/ (stations.csv, events.csv, picks.csv, truth.json) and all that
             'rayloom run' writes
    Example: rayloom demo highland_demo
    """
    from rayloom.cli.console import listening
    from rayloom.cli.demonstration import demonstrate

    ctx.meta[FOLDER] = folder
    ctx.meta[RESUME] = "demo"
    with listening(quiet=quiet) as reporter:
        text = demonstrate(folder, reporter)
    click.echo(text)


@main.command()
@_folder_argument
@_file_option(
    "--stations",
    "CSV: network, station, latitude, longitude, elevation_m; or StationXML or FDSN text. "
    "A folder stands for all files in it.",
    required=True,
)
@_file_option(
    "--events",
    "CSV: event, time, latitude, longitude, depth_km; or QuakeML or FDSN text.",
    required=True,
)
@_file_option("--picks", "CSV: event, network, station, phase, time, uncertainty_s; or QuakeML.")
@_file_option("--residuals", "CSV with residual_s in place of time, if you have residuals ready.")
@click.option(
    "--earth",
    default="ak135",
    show_default=True,
    metavar="MODEL",
    help="ak135, iasp91, or a CSV file with depth_km, vp_km_s, vs_km_s and density (g/cm³).",
)
@click.option("--copy", is_flag=True, help="Copy the tables into DIR/inputs.")
@click.option("--force", is_flag=True, help="Overwrite a rayloom.toml that is there already.")
@_quiet_option
@click.pass_context
def init(
    ctx: click.Context,
    folder: Path,
    stations: Path,
    events: Path,
    picks: Path | None,
    residuals: Path | None,
    earth: str,
    copy: bool,
    force: bool,
    quiet: bool,
) -> None:
    """Make a run folder from your tables.

    Reads the tables and reports every fault in them by file, line and column. Suggests
    blocks from the aperture, the station spacing and the steepness of the rays, and says
    why. Writes DIR/rayloom.toml, commented so that you can edit it. The tables stay where
    they are (named by relative path) unless you ask for copies.

    Example:
      rayloom init highland --stations stations.csv --events events.csv --picks picks.csv
      rayloom run highland
    """
    from rayloom.cli.console import listening
    from rayloom.workflow import Tables, initialise

    ctx.meta[FOLDER] = folder
    tables = Tables(stations=stations, events=events, picks=picks, residuals=residuals)
    with listening(quiet=quiet) as reporter:
        initialise(folder, tables, earth=earth, copy=copy, force=force, reporter=reporter)
    click.echo(f"Wrote {folder / 'rayloom.toml'}. Look it through, then: rayloom run {folder}")


@main.command()
@_folder_argument
@_quiet_option
@click.pass_context
def run(ctx: click.Context, folder: Path, quiet: bool) -> None:
    """Do everything still to do in a run folder.

    The steps are residuals, invert and export. A step is done when its results are missing
    or when its input files or its settings have changed since (told by their contents, not
    their dates), and the reason is printed. An inversion that was stopped goes on from its
    last finished iteration.

    Reads:   DIR/rayloom.toml and the tables it names.
    Writes:  residuals.csv, exclusions.csv, residuals_after.csv, suspected_outliers.csv,
             station_terms.csv, mislocations.csv, history.csv, model.nc, inversion.npz,
             model.vts, rays.vtp, stations.vtp, events.vtp, figures/, report.html,
             settings_used.toml, provenance.json
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


def _one_step(ctx: click.Context, name: str, folder: Path, *, again: bool, quiet: bool) -> None:
    from rayloom.cli.console import listening
    from rayloom.workflow import run_step, summarise

    ctx.meta[FOLDER] = folder
    with listening(quiet=quiet) as reporter:
        done = run_step(folder, name, again=again, reporter=reporter)
    if not done:
        click.echo(f"{name}: up to date (do it again with --again).")
    click.echo(summarise(folder, upto=name))


@main.command()
@_folder_argument
@_again_option
@_quiet_option
@click.pass_context
def residuals(ctx: click.Context, folder: Path, again: bool, quiet: bool) -> None:
    """Turn picks into residuals.

    Residuals are observed minus predicted arrival times; late is positive. Predictions hold
    the one-dimensional Earth, its ellipticity and the station elevations. What is left out
    is listed with its reason. You may remove rows from residuals.csv by hand: the inversion
    then takes your version.

    Reads:   the tables named in DIR/rayloom.toml [inputs]; [earth] [survey] [residuals]
    Writes:  residuals.csv, exclusions.csv
    Example: rayloom residuals highland
    """
    _one_step(ctx, "residuals", folder, again=again, quiet=quiet)


@main.command()
@_folder_argument
@_again_option
@_quiet_option
@click.pass_context
def invert(ctx: click.Context, folder: Path, again: bool, quiet: bool) -> None:
    """Find the model that explains the residuals.

    Rays are traced through the current model, the model is solved for, and rays are traced
    again until neither changes. Each finished iteration is kept in checkpoints/, so that a
    stopped inversion goes on from there.

    Reads:   residuals.csv; [grid] [forward] [inversion]
    Writes:  model.nc, history.csv, residuals_after.csv, suspected_outliers.csv,
             station_terms.csv, mislocations.csv, inversion.npz (all of it, for later steps);
             linear_system/ on request
    Example: rayloom invert highland
    """
    _one_step(ctx, "invert", folder, again=again, quiet=quiet)


@main.command()
@_folder_argument
@_again_option
@_quiet_option
@click.pass_context
def export(ctx: click.Context, folder: Path, again: bool, quiet: bool) -> None:
    """Write viewer files, figures and a report.

    Reads:   model.nc, inversion.npz; [outputs]
    Writes:  model.vts, rays.vtp, stations.vtp, events.vtp (for VTK viewers), figures/,
             report.html
    Example: rayloom export highland
    """
    _one_step(ctx, "export", folder, again=again, quiet=quiet)

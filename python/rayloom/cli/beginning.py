"""The commands that make a run folder: ``demo`` and ``init``."""

from __future__ import annotations

from pathlib import Path

import click

from rayloom.cli.guard import FOLDER, RESUME
from rayloom.cli.options import file_option, folder_argument, quiet_option
from rayloom.cli.teaching import TaughtCommand


@click.command(cls=TaughtCommand)
@click.argument(
    "folder",
    metavar="[DIR]",
    type=click.Path(file_okay=False, path_type=Path),
    default=Path("rayloom_demo"),
)
@quiet_option
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


@click.command(cls=TaughtCommand)
@folder_argument
@file_option(
    "--stations",
    "CSV: network, station, latitude, longitude, elevation_m; or StationXML or FDSN text. "
    "A folder stands for all files in it; an option may be given several times.",
    required=True,
)
@file_option(
    "--events",
    "CSV: event, time, latitude, longitude, depth_km; or QuakeML or FDSN text.",
    required=True,
)
@file_option("--picks", "CSV: event, network, station, phase, time, uncertainty_s; or QuakeML.")
@file_option("--residuals", "CSV with residual_s in place of time, if you have residuals ready.")
@file_option(
    "--delays",
    "CSV of differences of arrival times: event, network_a, station_a, network_b, station_b, "
    "delay_s (at a minus at b), uncertainty_s.",
    multiple=False,
)
@file_option(
    "--crust",
    "CSV of the crust below stations: network, station, crust_thickness_km or column.",
    multiple=False,
)
@click.option(
    "--earth",
    default="ak135",
    show_default=True,
    metavar="MODEL",
    help="ak135, iasp91, or a CSV file with depth_km, vp_km_s, vs_km_s and density (g/cm³).",
)
@click.option("--copy", is_flag=True, help="Copy the tables into DIR/inputs.")
@click.option("--force", is_flag=True, help="Overwrite a rayloom.toml that is there already.")
@quiet_option
@click.pass_context
def init(
    ctx: click.Context,
    folder: Path,
    stations: tuple[Path, ...],
    events: tuple[Path, ...],
    picks: tuple[Path, ...],
    residuals: tuple[Path, ...],
    delays: Path | None,
    crust: Path | None,
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
    tables = Tables.given(
        stations=stations,
        events=events,
        picks=picks,
        residuals=residuals,
        delays=() if delays is None else (delays,),
        crust=() if crust is None else (crust,),
    )
    with listening(quiet=quiet) as reporter:
        initialise(folder, tables, earth=earth, copy=copy, force=force, reporter=reporter)
    click.echo(f"Wrote {folder / 'rayloom.toml'}. Look it through, then: rayloom run {folder}")

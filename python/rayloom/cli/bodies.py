"""The command ``bodies``."""

from __future__ import annotations

from pathlib import Path

import click

from rayloom.cli.guard import FOLDER
from rayloom.cli.options import again_option, folder_argument, quiet_option
from rayloom.cli.teaching import TaughtCommand


@click.command(cls=TaughtCommand)
@folder_argument
@again_option
@quiet_option
@click.pass_context
def bodies(ctx: click.Context, folder: Path, again: bool, quiet: bool) -> None:
    """Find the anomalies, how deep they reach, and what could feign them.

    Connected anomalies of the mean model are measured in every posterior sample: centroid,
    depth range, width, volume, strength and delay with 90 % intervals. Squeezing forbids
    structure below and above rising depths and tells with which p-value the data object.
    Leak tests show what anomalies beside, below and in the crust would look like inside.
    Temperatures are ranges with sources and alternatives, not a hazard assessment.

    Reads:   model.nc, inversion.npz, posterior_samples.npz (of 'rayloom appraise');
             [bodies] [inversion] [outputs]
    Writes:  bodies.csv, bodies.json, squeezing.csv, leaks.csv, squeezed.nc (body_number,
             bodies_only_percent, demanded_outside_percent), figures/bodies.png,
             figures/squeezing.png, figures/demanded_outside.png, figures/leaks.png, a section
             of report.html
    Example: rayloom bodies highland
    """
    from rayloom.cli.console import listening
    from rayloom.workflow import RunFolder, run_step
    from rayloom.workflow.bodies import tell_bodies
    from rayloom.workflow.waves import wave_parts

    ctx.meta[FOLDER] = folder
    with listening(quiet=quiet) as reporter:
        done = run_step(folder, "bodies", again=again, reporter=reporter)
        run_step(folder, "export", again=False, reporter=reporter)
    if not done:
        click.echo("bodies: up to date (do it again with --again).")
    home = RunFolder.at(folder)
    for part in wave_parts(home, home.read_settings()):
        lines = tell_bodies(part.folder)
        if part.folder.wave is not None:
            lines.insert(0, f"{part.folder.wave} waves")
        click.echo("\n".join(lines))
    click.echo(f"results     in {home.path}: bodies.csv, report.html, figures/bodies.png")

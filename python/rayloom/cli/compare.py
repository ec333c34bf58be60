"""The command ``compare``."""

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
def compare(ctx: click.Context, folder: Path, again: bool, quiet: bool) -> None:
    """Invert with straight, reference and bent rays at the same misfit.

    Rows and robust weights are those of the inversion; for each kind of rays the strength
    of the prior is changed until χ² agrees within 2 %. Told are rms, variance reduction,
    strength and place of the main slow and the main fast body beside those of bent rays,
    and the time taken.

    Reads:   model.nc, inversion.npz; [forward] [inversion] [outputs]
    Writes:  ray_comparison.csv, model_straight_rays.nc, model_reference_rays.nc,
             model_bent_rays.nc, figures/ray_comparison.png
    Example: rayloom compare highland
    """
    from rayloom.cli.console import listening
    from rayloom.workflow import RunFolder, run_step
    from rayloom.workflow.compare import tell_comparison
    from rayloom.workflow.waves import wave_parts

    ctx.meta[FOLDER] = folder
    with listening(quiet=quiet) as reporter:
        done = run_step(folder, "compare", again=again, reporter=reporter)
    if not done:
        click.echo("compare: up to date (do it again with --again).")
    home = RunFolder.at(folder)
    for part in wave_parts(home, home.read_settings()):
        lines = tell_comparison(part.folder)
        if part.folder.wave is not None:
            lines = [f"{part.folder.wave} waves", *lines]
        click.echo("\n".join(lines))

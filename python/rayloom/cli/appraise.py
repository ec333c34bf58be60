"""The command ``appraise``."""

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
def appraise(ctx: click.Context, folder: Path, again: bool, quiet: bool) -> None:
    """Find out what the model is worth.

    Standard errors from posterior samples, beside an event bootstrap; resolution and
    smearing from random probes; what becomes of single blocks; structures put in and found
    again with errors of the data's own size (checkerboard and spikes unless rayloom.toml
    names others); how rays cross the blocks. A stopped appraisal goes on where it was.

    Reads:   model.nc, inversion.npz; [appraisal] [inversion] [outputs]
    Writes:  appraisal.nc (sigma_dvp, data_share, resolution, smearing, restorations, ...),
             posterior_samples.npz, restoration.csv, point_spread.csv, figures/appraisal_*,
             a section of report.html
    Example: rayloom appraise highland
    """
    from rayloom.cli.console import listening
    from rayloom.workflow import RunFolder, run_step
    from rayloom.workflow.appraising import tell_appraisal
    from rayloom.workflow.waves import wave_parts

    ctx.meta[FOLDER] = folder
    with listening(quiet=quiet) as reporter:
        done = run_step(folder, "appraise", again=again, reporter=reporter)
        run_step(folder, "export", again=False, reporter=reporter)
    if not done:
        click.echo("appraise: up to date (do it again with --again).")
    home = RunFolder.at(folder)
    for part in wave_parts(home, home.read_settings()):
        lines = tell_appraisal(part.folder)
        if part.folder.wave is not None:
            lines.insert(0, f"{part.folder.wave} waves")
        click.echo("\n".join(lines))
    click.echo(f"results     in {home.path}: report.html, appraisal.nc, figures/appraisal_*")

"""The command ``tradeoff``."""

from __future__ import annotations

from pathlib import Path

import click

from rayloom.cli.guard import FOLDER
from rayloom.cli.options import again_option, folder_argument, quiet_option
from rayloom.cli.teaching import TaughtCommand


@click.command(cls=TaughtCommand)
@folder_argument
@click.option(
    "--apply",
    "take",
    is_flag=True,
    help="Write the prior recommended into rayloom.toml; 'rayloom run' then inverts with it.",
)
@again_option
@quiet_option
@click.pass_context
def tradeoff(ctx: click.Context, folder: Path, take: bool, again: bool, quiet: bool) -> None:
    """Find how strong and how smooth a prior the data ask for.

    Tries many standard deviations and correlation lengths on the rays and weights of the
    inversion, without tracing a ray. Whole events are left out and predicted; beside this
    stand GCV, the evidence, the expected misfit and the corner of the L-curve. Priors that
    do as well within one standard error are told, with a map of what keeps its sign in all
    of their models.

    Reads:   model.nc, inversion.npz; [tradeoff] [inversion] [outputs]
    Writes:  tradeoff.csv, tradeoff.nc (model of the prior recommended; sign_kept,
             lowest_percent, highest_percent), figures/tradeoff.png,
             figures/tradeoff_sign.png
    Example: rayloom tradeoff highland --apply
    """
    from rayloom.cli.console import listening
    from rayloom.workflow import RunFolder, run_step
    from rayloom.workflow.tradeoff import apply_recommendation, tell_tradeoff
    from rayloom.workflow.waves import wave_parts

    ctx.meta[FOLDER] = folder
    with listening(quiet=quiet) as reporter:
        done = run_step(folder, "tradeoff", again=again, reporter=reporter)
    if not done:
        click.echo("tradeoff: up to date (do it again with --again).")
    home = RunFolder.at(folder)
    parts = [part.folder for part in wave_parts(home, home.read_settings())]
    for part in parts:
        click.echo("\n".join(_lines(part.wave, tell_tradeoff(part))))
    if take and len(parts) > 1:
        raise click.UsageError(
            f"the run has a recommendation for each wave; choose one: "
            f"rayloom tradeoff {parts[0].path} --apply"
        )
    if take:
        click.echo(f"{apply_recommendation(parts[0])}. Next: rayloom run {home.run.path}")


def _lines(wave: str | None, said: list[str]) -> list[str]:
    lines = [sentence[:1].upper() + sentence[1:] + "." for sentence in said]
    return lines if wave is None else [f"{wave} waves", *lines]

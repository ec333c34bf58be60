"""The command ``import-model``."""

from __future__ import annotations

from pathlib import Path

import click

from rayloom.cli.guard import FOLDER
from rayloom.cli.options import folder_argument, quiet_option
from rayloom.cli.teaching import TaughtCommand


@click.command("import-model", cls=TaughtCommand)
@folder_argument
@click.argument("vector", metavar="FILE", type=click.Path(path_type=Path))
@click.option(
    "--holds",
    "quantity",
    type=click.Choice(["percent", "slowness", "slowness-change"]),
    default="percent",
    show_default=True,
    help="What the values of a .npy are; a CSV tells it by the name of its column.",
)
@click.option(
    "--name", default="imported", show_default=True, help="Sub-folder for what comes of it."
)
@quiet_option
@click.pass_context
def import_model(
    ctx: click.Context, folder: Path, vector: Path, quantity: str, name: str, quiet: bool
) -> None:
    """Judge a model that another solver made of linear_system/.

    FILE holds one value per block, in the order of blocks.csv: a .npy, or a CSV with a
    column perturbation_percent, slowness_s_per_km or slowness_change_s_per_km (and block,
    if the rows are in another order). Rays are traced in that model; station terms and
    shifts of events are solved for beside it. The results of the run itself stay.

    Reads:   residuals.csv; [earth] [grid] [forward] [inversion]
    Writes:  imported/: model.nc, model.vts, rays.vtp, history.csv, residuals_after.csv, ...
    Example: rayloom import-model highland my_model.csv
    """
    from rayloom.cli.console import listening
    from rayloom.workflow.importing import import_model as do

    ctx.meta[FOLDER] = folder
    with listening(quiet=quiet) as reporter:
        done = do(folder, vector, quantity=quantity, name=name, reporter=reporter)
    first, last = done.result.history
    click.echo(
        f"rms {first.rms_kept_s:.3f} s -> {last.rms_kept_s:.3f} s without suspected outliers, "
        f"variance reduction {last.variance_reduction_percent:.0f} %, chi2 {last.chi2:.0f}, "
        f"perturbation rms {last.model_rms_percent:.2f} %"
    )
    click.echo(f"results in {done.folder}")

"""The commands that do one step of a run: ``residuals``, ``invert``, ``export``, ``ratio``."""

from __future__ import annotations

from pathlib import Path

import click

from rayloom.cli.options import again_option, folder_argument, one_step, quiet_option
from rayloom.cli.teaching import TaughtCommand


@click.command(cls=TaughtCommand)
@folder_argument
@again_option
@quiet_option
@click.pass_context
def residuals(ctx: click.Context, folder: Path, again: bool, quiet: bool) -> None:
    """Turn picks into residuals.

    Residuals are observed minus predicted arrival times; late is positive. Predictions hold
    the one-dimensional Earth, its ellipticity, the station elevations and, where [inputs]
    names a table of it, local crust. What is left out is listed with its reason. You may
    remove rows from residuals.csv by hand: the inversion then takes your version.

    Reads:   the tables named in DIR/rayloom.toml [inputs]; [earth] [survey] [residuals]
    Writes:  residuals.csv, exclusions.csv; station_crust.csv with local crust
    Example: rayloom residuals highland
    """
    one_step(ctx, "residuals", folder, again=again, quiet=quiet)


@click.command(cls=TaughtCommand)
@folder_argument
@again_option
@quiet_option
@click.pass_context
def invert(ctx: click.Context, folder: Path, again: bool, quiet: bool) -> None:
    """Find the model that explains the residuals.

    Rays are traced through the current model, the model is solved for, and rays are traced
    again until neither changes. Each finished iteration is kept in checkpoints/, so that a
    stopped inversion goes on from there.

    Reads:   residuals.csv; [grid] [forward] [inversion]
    Writes:  model.nc, history.csv, residuals_after.csv, suspected_outliers.csv,
             station_terms.csv, mislocations.csv, inversion.npz (all of it, for later steps);
             linear_system/ on request; summary_clusters.csv with summary rays
    Example: rayloom invert highland
    """
    one_step(ctx, "invert", folder, again=again, quiet=quiet)


@click.command(cls=TaughtCommand)
@folder_argument
@again_option
@quiet_option
@click.pass_context
def export(ctx: click.Context, folder: Path, again: bool, quiet: bool) -> None:
    """Write viewer files, figures and a report.

    Reads:   model.nc, inversion.npz; [outputs]
    Writes:  model.vts, rays.vtp, stations.vtp, events.vtp (for VTK viewers), figures/,
             report.html
    Example: rayloom export highland
    """
    one_step(ctx, "export", folder, again=again, quiet=quiet)


@click.command(cls=TaughtCommand)
@folder_argument
@again_option
@quiet_option
@click.pass_context
def ratio(ctx: click.Context, folder: Path, again: bool, quiet: bool) -> None:
    """Set the P and the S model of a run side by side.

    Maps d ln Vs / d ln Vp where both waves have enough rays and dVp is large enough, and
    the ratio of P to S velocity.

    Reads:   P/model.nc, S/model.nc; [outputs] ratio_min_hits, ratio_min_percent
    Writes:  ratio.nc, figures/ratio.png
    Example: rayloom ratio highland
    """
    one_step(ctx, "ratio", folder, again=again, quiet=quiet)

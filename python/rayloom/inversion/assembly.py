"""Assembles an inverse problem from residuals, a model and settings."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from rayloom.errors import InputError
from rayloom.inversion.depth_prior import coupling_across_edges, factor_of_blocks
from rayloom.inversion.forward_map import ForwardMap, Report
from rayloom.inversion.groups import (
    ParameterGroup,
    mislocation_group,
    mislocation_partials,
    station_term_group,
    station_term_layout,
)
from rayloom.inversion.prior_strength import with_chosen_prior
from rayloom.inversion.priors import SpectralPrior, damping_smoothing_prior, matern_prior
from rayloom.inversion.problem import Problem, rays_exist, trace_with_report
from rayloom.inversion.rows import DataRows, LeftOutGroup, rows_of_residuals
from rayloom.inversion.settings import InversionSettings
from rayloom.model import BlockGrid, SlownessModel

if TYPE_CHECKING:
    from rayloom.residuals import Residuals


def build_problem(
    data: Residuals,
    model: SlownessModel,
    settings: InversionSettings,
    *,
    forward: ForwardMap | None = None,
    report: Report | None = None,
) -> Problem:
    """Choose the rows, trace the reference model and lay out the unknowns.

    Parameters
    ----------
    data, model, settings, forward
        As for :func:`rayloom.invert`.
    report : callable, optional
        Told (stage, done, total).

    Raises
    ------
    InputError
        If no row can be used or a value is not finite.
    """
    rows, left_out = rows_of_residuals(
        data, wave=model.wave, min_picks_per_event=settings.min_picks_per_event
    )
    if forward is None:
        from rayloom.inversion.distant import DistantRays

        forward = DistantRays(data, np.sort(rows.data_row), settings)
    reference = model.with_slowness(model.reference)
    rays = trace_with_report(forward, reference, None, report)
    active, without_rays = _rows_with_rays(rows, rays_exist(rays)[rows.ray], settings)
    problem = Problem(
        rows=rows,
        model=model,
        forward=forward,
        block_prior=block_prior(model.grid, settings),
        linear_groups=linear_groups(data, rows, settings),
        settings=settings,
        reference_rays=rays,
        active=active,
        left_out=(*left_out, *without_rays),
    )
    return with_chosen_prior(problem, report) if settings.chooses_prior else problem


def block_prior(grid: BlockGrid, settings: InversionSettings) -> SpectralPrior:
    """Build the prior of fractional slowness perturbations that the settings choose."""
    coupling = coupling_across_edges(grid, settings.decoupled_depths_km, settings.decoupled_share)
    if settings.prior == "damping":
        horizontal_km, vertical_km = settings.smoothing_km
        return damping_smoothing_prior(
            grid,
            damping=settings.damping,
            horizontal_km=horizontal_km,
            vertical_km=vertical_km,
            depth_coupling=coupling,
        )
    horizontal_km, vertical_km = settings.correlation_km
    share = settings.starting_prior_std_percent / 100.0
    return matern_prior(
        grid,
        standard_deviation=share * factor_of_blocks(grid, settings.prior_factor_by_depth),
        horizontal_km=horizontal_km,
        vertical_km=vertical_km,
        depth_coupling=coupling,
    )


def linear_groups(
    data: Residuals, rows: DataRows, settings: InversionSettings
) -> tuple[ParameterGroup, ...]:
    """Lay out the unknowns whose columns do not depend on the model."""
    groups = []
    if settings.station_terms:
        groups.append(station_term_group(station_term_layout(rows), settings))
    if settings.mislocation:
        _, column = np.unique(rows.event, return_inverse=True)
        groups.append(
            mislocation_group(
                mislocation_partials(data, rows.data_row),
                column.astype(np.int64),
                standard_deviation_km=settings.mislocation_std_km,
            )
        )
    return tuple(groups)


def _rows_with_rays(
    rows: DataRows, traced: NDArray[np.bool_], settings: InversionSettings
) -> tuple[NDArray[np.bool_], list[LeftOutGroup]]:
    """Rows with a ray, without the groups that too few of them remain in."""
    counts = np.bincount(rows.group, weights=traced)
    enough = counts >= settings.min_picks_per_event
    active = traced & enough[rows.group]
    if not np.any(active):
        raise InputError(
            f"no residual is left to invert: {int(np.sum(traced))} of {traced.size} rays could "
            "be traced; check that the stations lie well inside the block grid"
        )
    left_out = []
    for group in np.flatnonzero(~enough).tolist():
        first = int(np.argmax(rows.group == group))
        left_out.append(
            LeftOutGroup(
                event=str(rows.event[first]),
                phase=str(rows.phase[first]),
                picks=int(np.sum(rows.group == group)),
                reason=f"{int(counts[group])} of at least {settings.min_picks_per_event} "
                "picks have a ray",
            )
        )
    return active, left_out

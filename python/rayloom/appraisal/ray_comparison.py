"""Bodies of one model measured in others: how much stronger, and how far away.

Main function: :func:`compare_bodies`.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rayloom.appraisal.bodies import BodyRegion, find_regions, measure_body, relative_to_layers
from rayloom.model import BlockGrid, SlownessModel
from rayloom.units import EARTH_RADIUS_KM

Floats = NDArray[np.float64]
Flags = NDArray[np.bool_]
_SHARE_OF_PEAK = 0.5
_PEAK_QUANTILE = 0.995
_LEAST_PERCENT = 0.1


@dataclass(frozen=True)
class BodyInModel:
    """One body of the first model, as another model has it.

    Attributes
    ----------
    body : str
        "slow 1" or "fast 1", the largest of its sign.
    peak_percent, mean_percent : float
        95th percentile and volume mean of dV in the blocks of the body, percent.
    share_of_amplitude : float
        Volume mean over that of the first model.
    shift_km : float
        Distance of the centroids, km, horizontally.
    deeper_km : float
        Depth of the centroid less that in the first model, km.
    """

    body: str
    peak_percent: float
    mean_percent: float
    share_of_amplitude: float
    shift_km: float
    deeper_km: float


def main_bodies(model: SlownessModel, usable: Flags) -> tuple[BodyRegion, ...]:
    """Find the largest slow and the largest fast body of a model.

    Blocks that reach half of the strongest perturbation of their sign (its 99.5th
    percentile) and connect with each other make a body; perturbations are relative to
    the layer's median.

    Parameters
    ----------
    model : SlownessModel
        The model.
    usable : (nx, ny, nz) bool array
        Blocks that count.
    """
    relative = relative_to_layers(model.grid, model.perturbation_percent, usable)
    found = []
    for sign in (-1, 1):
        strength = np.maximum(sign * relative[usable], 0.0)
        peak = float(np.quantile(strength, _PEAK_QUANTILE)) if strength.size else 0.0
        if peak < _LEAST_PERCENT:
            continue
        regions = find_regions(
            model.grid,
            relative,
            usable,
            threshold_percent=_SHARE_OF_PEAK * peak,
            min_volume_km3=0.0,
        )
        found += [region for region in regions if region.sign == sign][:1]
    return tuple(found)


def compare_bodies(
    models: Sequence[SlownessModel], regions: Sequence[BodyRegion], usable: Flags
) -> tuple[tuple[BodyInModel, ...], ...]:
    """Measure bodies of the first model in every model.

    Parameters
    ----------
    models : sequence of SlownessModel
        On the same blocks.
    regions : sequence of BodyRegion
        Bodies of the first model; see :func:`main_bodies`.
    usable : (nx, ny, nz) bool array
        Blocks that the layers' medians are taken over.

    Returns
    -------
    tuple of tuples
        One per model, of one :class:`BodyInModel` per body.
    """
    return tuple(
        tuple(_compared(models[0], model, region, usable) for region in regions)
        for model in models
    )


def _compared(
    first: SlownessModel, model: SlownessModel, region: BodyRegion, usable: Flags
) -> BodyInModel:
    grid = first.grid
    here, there = (
        measure_body(
            grid,
            region,
            relative_to_layers(grid, each.perturbation_percent, usable),
            threshold_percent=0.0,
            min_volume_km3=0.0,
        )
        for each in (model, first)
    )
    return BodyInModel(
        body=region.name,
        peak_percent=float(here.peak_percent[0]),
        mean_percent=float(here.mean_percent[0]),
        share_of_amplitude=float(here.mean_percent[0] / there.mean_percent[0]),
        shift_km=_distance_km(
            grid,
            (float(here.x[0]), float(here.y[0])),
            (float(there.x[0]), float(there.y[0])),
            float(there.depth_km[0]),
        ),
        deeper_km=float(here.depth_km[0] - there.depth_km[0]),
    )


def _distance_km(
    grid: BlockGrid, one: tuple[float, float], other: tuple[float, float], depth_km: float
) -> float:
    """Distance at a depth between two places near each other."""
    across, along = one[0] - other[0], one[1] - other[1]
    if grid.frame.is_flat:
        return float(np.hypot(across, along))
    across *= np.cos(np.radians(other[1]))
    return float(np.radians(np.hypot(across, along)) * (EARTH_RADIUS_KM - depth_km))

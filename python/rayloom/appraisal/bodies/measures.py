"""What is measured of a body in one model, and its spread over many samples.

Main types: :class:`BodyMeasures`, one row per sample, and :class:`Interval`.
"""

from __future__ import annotations

from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray

from rayloom.appraisal.bodies.regions import BodyRegion, main_component
from rayloom.model import BlockGrid

Floats = NDArray[np.float64]
Flags = NDArray[np.bool_]

_TAIL = 0.05
_EDGE_SHARE = 0.5
_PEAK_QUANTILE = 0.95


@dataclass(frozen=True)
class Interval:
    """A measure and what samples say of it.

    Attributes
    ----------
    estimate : float
        Median of the samples.
    low, high : float
        Ends of the central 90 % of the samples.
    """

    estimate: float
    low: float
    high: float

    @classmethod
    def of(cls, values: Floats) -> Interval:
        """Summarise samples; NaN where a sample has no such body."""
        known = values[np.isfinite(values)]
        if known.size == 0:
            return cls(float("nan"), float("nan"), float("nan"))
        low, estimate, high = np.quantile(known, [_TAIL, 0.5, 1.0 - _TAIL])
        return cls(float(estimate), float(low), float(high))


@dataclass(frozen=True)
class BodyMeasures:
    """One body in every sample, arrays of shape (samples,).

    Attributes
    ----------
    x, y : array
        Centroid in the frame, degrees (flat: km), weighted by |dV| and volume.
    depth_km : array
        Its depth.
    top_km, base_km : array
        Depths between which a column of the same volume per km would reach.
    width_km : array
        Diameter of a round column of the same volume and height.
    volume_km3 : array
        Volume beyond half of the peak, connected.
    mean_percent : array
        Volume mean of dV over the blocks of the mean model's body.
    peak_percent : array
        95th percentile of |dV| there, with the body's sign.
    explained_ms : array
        Root mean square of the delays that those blocks predict, group means
        taken off, ms.
    exists : bool array
        Whether the sample has a body there: beyond the threshold, connected and
        of at least the smallest volume.
    """

    x: Floats
    y: Floats
    depth_km: Floats
    top_km: Floats
    base_km: Floats
    width_km: Floats
    volume_km3: Floats
    mean_percent: Floats
    peak_percent: Floats
    explained_ms: Floats
    exists: Flags

    @classmethod
    def joined(cls, rows: list[BodyMeasures]) -> BodyMeasures:
        """Join the rows of several models."""
        return cls(
            **{
                field.name: np.concatenate([getattr(row, field.name) for row in rows])
                for field in fields(cls)
            }
        )

    def interval(self, name: str) -> Interval:
        """Median and central 90 % of one measure."""
        return Interval.of(getattr(self, name))


def measure_body(
    grid: BlockGrid,
    region: BodyRegion,
    percent: Floats,
    *,
    threshold_percent: float,
    min_volume_km3: float,
    explained_ms: float = float("nan"),
) -> BodyMeasures:
    """Measure a body in one model.

    Strength and centroid are taken in the fixed blocks of the mean model's
    body; extents from the connected blocks of its surroundings that reach half
    of the peak.

    Parameters
    ----------
    grid : BlockGrid
        The blocks.
    region : BodyRegion
        The body.
    percent : (nx, ny, nz) array
        The model relative to the regional mean, percent.
    threshold_percent, min_volume_km3 : float
        What counts as a body.
    explained_ms : float, optional
        Root mean square of its delays, ms.

    Returns
    -------
    BodyMeasures
        Arrays of one entry; extents NaN where nothing connects.
    """
    strength = region.sign * percent
    volumes = np.broadcast_to(grid.volumes_km3, grid.shape)
    inside, volume = strength[region.mask], volumes[region.mask]
    weight = volume * np.maximum(inside, 0.0)
    total = float(weight.sum())
    centres = grid.centres.reshape(*grid.shape, 3)[region.mask]
    centroid = weight @ centres / total if total > 0.0 else np.full(3, np.nan)
    peak = float(np.quantile(inside, _PEAK_QUANTILE))
    core = main_component(
        grid, region.domain & (strength >= _EDGE_SHARE * max(peak, 0.0)), region.mask
    )
    top, base = _depth_range_km(grid, core)
    core_km3 = float(volumes[core].sum())
    beyond = main_component(grid, region.domain & (strength >= threshold_percent), region.mask)
    values = {
        "x": centroid[0],
        "y": centroid[1],
        "depth_km": centroid[2],
        "top_km": top,
        "base_km": base,
        "width_km": 2.0 * np.sqrt(core_km3 / (base - top) / np.pi),
        "volume_km3": core_km3 if core_km3 > 0.0 else np.nan,
        "mean_percent": region.sign * float(np.average(inside, weights=volume)),
        "peak_percent": region.sign * peak,
        "explained_ms": explained_ms,
    }
    return BodyMeasures(
        exists=np.array([peak > 0.0 and volumes[beyond].sum() >= min_volume_km3]),
        **{name: np.array([value], dtype=np.float64) for name, value in values.items()},
    )


def _depth_range_km(grid: BlockGrid, inside: Flags) -> tuple[float, float]:
    """Give the ends of an even column whose 5 and 95 % of volume lie at the same depths."""
    volumes = np.broadcast_to(grid.volumes_km3, grid.shape)
    per_layer = np.where(inside, volumes, 0.0).sum(axis=(0, 1))
    if not per_layer.sum() > 0.0:
        return float("nan"), float("nan")
    share = np.concatenate([[0.0], np.cumsum(per_layer) / per_layer.sum()])
    layers = np.flatnonzero(per_layer)
    first, last = int(layers[0]), int(layers[-1])
    edges = grid.depth_edges_km[first : last + 2]
    shallow, deep = np.interp([_TAIL, 1.0 - _TAIL], share[first : last + 2], edges)
    rim = _TAIL / (1.0 - 2.0 * _TAIL) * (deep - shallow)
    return float(max(shallow - rim, edges[0])), float(min(deep + rim, edges[-1]))

"""Bodies with everything said of them: the table that answers "where is it".

Main function: :func:`find_bodies`; main type: :class:`Body`.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rayloom.appraisal.bodies.measures import BodyMeasures, Interval, measure_body
from rayloom.appraisal.bodies.regions import (
    BodyRegion,
    find_regions,
    main_component,
    relative_to_layers,
)
from rayloom.appraisal.bodies.smearing import Smearing, smearing_at
from rayloom.appraisal.samples import Samples
from rayloom.appraisal.temperature import TemperatureRange, temperature_range
from rayloom.errors import InputError
from rayloom.inversion import LinearisedProblem
from rayloom.model import BlockGrid

Floats = NDArray[np.float64]
Flags = NDArray[np.bool_]

_DEEPEST_PARTIAL_KM = 800.0
_PRIOR_SHARE = 1.5
"""Prior standard deviations that make a body: what is weaker may be any disorder."""


@dataclass(frozen=True)
class Body:
    """One body, its measures with 90 % intervals, and how far to trust them.

    Attributes
    ----------
    region : BodyRegion
        Its blocks in the mean model.
    core : (nx, ny, nz) bool array
        The blocks that reach half of the peak in the mean model.
    samples : BodyMeasures
        The body in every posterior sample.
    longitude_deg, latitude_deg : Interval
        Centroid, geographic; x and y in km with a flat frame.
    existence_share : float
        Share of the samples in which it exists.
    touches_edge : bool
        Whether it reaches the highest or the lowest layer that most of its
        columns resolve, so that it may go on beyond.
    smearing : Smearing
        The point-spread at its centroid.
    temperature : TemperatureRange or None
        From the interval of its mean; None for S velocity or beyond 800 km.
    """

    region: BodyRegion
    core: Flags
    samples: BodyMeasures
    longitude_deg: Interval
    latitude_deg: Interval
    existence_share: float
    touches_edge: bool
    smearing: Smearing
    temperature: TemperatureRange | None

    @property
    def name(self) -> str:
        """Name of the body."""
        return self.region.name

    def interval(self, measure: str) -> Interval:
        """Median and central 90 % of a measure of :class:`BodyMeasures`."""
        return self.samples.interval(measure)


def find_bodies(
    problem: LinearisedProblem,
    samples: Samples,
    *,
    threshold_percent: float | None = None,
    min_resolution: float = 0.2,
    min_volume_km3: float = 200_000.0,
    top_km: float = 35.0,
) -> tuple[Body, ...]:
    """Find the bodies of the mean model and measure them in every sample.

    Parameters
    ----------
    problem : LinearisedProblem
        A finished inversion.
    samples : Samples
        Of its posterior.
    threshold_percent : float, optional
        Smallest |dV| of a body, relative to the median of the layer's resolved
        blocks; 1.5 times the prior's standard deviation by default.
    min_resolution : float, optional
        Smallest 1 − (σ_posterior/σ_prior)² of its blocks.
    min_volume_km3 : float, optional
        Smallest volume; a cube of the prior's correlation lengths is a fair choice.
    top_km : float, optional
        Blocks above this depth belong to no body: there station terms and
        blocks cannot be told apart.

    Returns
    -------
    tuple of Body
        Slow ones first, the largest of each sign first.

    Raises
    ------
    InputError
        If the samples belong to other blocks.
    """
    grid = problem.model.grid
    if samples.shape != grid.shape:
        raise InputError(
            f"samples of {samples.shape} blocks do not belong to a model of {grid.shape}",
            where="samples",
        )
    if threshold_percent is None:
        threshold_percent = 100.0 * _PRIOR_SHARE * float(np.median(samples.prior_std))
    usable = usable_blocks(grid, samples, min_resolution=min_resolution, top_km=top_km)
    mean = relative_to_layers(grid, samples.mean_percent, usable)
    regions = find_regions(
        grid,
        mean,
        usable,
        threshold_percent=threshold_percent,
        min_volume_km3=min_volume_km3,
    )
    relative = relative_to_layers(
        grid, np.asarray(samples.perturbation_percent, dtype=np.float64), usable
    )
    return tuple(
        _body(problem, region, mean, relative, usable, threshold_percent, min_volume_km3)
        for region in regions
    )


def usable_blocks(
    grid: BlockGrid, samples: Samples, *, min_resolution: float, top_km: float
) -> Flags:
    """Mark the blocks that may belong to a body, (nx, ny, nz).

    The estimate from samples is noisy, so most of a block's neighbours decide.

    Parameters
    ----------
    grid : BlockGrid
        The blocks.
    samples : Samples
        Of the posterior.
    min_resolution : float
        Smallest 1 − (σ_posterior/σ_prior)².
    top_km : float
        Depth above which none may.
    """
    from scipy import ndimage

    below = grid.depth_edges_km[:-1] >= top_km - 0.01
    resolved = samples.resolution_mask() >= min_resolution
    smooth = ndimage.median_filter(resolved.astype(np.uint8), size=3) > 0
    return np.asarray(smooth & below)


def _body(
    problem: LinearisedProblem,
    region: BodyRegion,
    mean: Floats,
    relative: Floats,
    usable: Flags,
    threshold_percent: float,
    min_volume_km3: float,
) -> Body:
    grid = problem.model.grid
    explained = explained_ms(problem, region.mask, relative)
    measures = BodyMeasures.joined(
        [
            measure_body(
                grid,
                region,
                sample,
                threshold_percent=threshold_percent,
                min_volume_km3=min_volume_km3,
                explained_ms=delay,
            )
            for sample, delay in zip(relative, explained.tolist(), strict=True)
        ]
    )
    core = core_of(grid, region, mean)
    centroid = np.array([measures.interval(name).estimate for name in ("x", "y", "depth_km")])
    longitude, latitude = _geographic(grid, measures)
    return Body(
        region=region,
        core=core,
        samples=measures,
        longitude_deg=longitude,
        latitude_deg=latitude,
        existence_share=float(np.mean(measures.exists)),
        touches_edge=_touches_edge(core, usable),
        smearing=smearing_at(problem, centroid, core),
        temperature=_temperature(measures, problem.model.wave),
    )


def core_of(grid: BlockGrid, region: BodyRegion, percent: Floats) -> Flags:
    """Blocks of a body that reach half of its peak in a model, connected.

    Parameters
    ----------
    grid : BlockGrid
        The blocks.
    region : BodyRegion
        The body.
    percent : (nx, ny, nz) array
        The model relative to the regional mean, percent.
    """
    strength = region.sign * percent
    peak = float(np.quantile(strength[region.mask], 0.95))
    return main_component(grid, region.domain & (strength >= 0.5 * peak), region.mask)


def explained_ms(problem: LinearisedProblem, mask: Flags, percent: Floats) -> Floats:
    """Root mean square of the delays that a body predicts, group means taken off, ms.

    Parameters
    ----------
    problem : LinearisedProblem
        A finished inversion.
    mask : (nx, ny, nz) bool array
        The body's blocks.
    percent : (samples, nx, ny, nz) array
        Velocity perturbations.

    Returns
    -------
    (samples,) array
    """
    system = problem.system
    columns = system.groups[0].matrix.tocsc()[:, np.flatnonzero(mask.ravel())]
    fractional = 1.0 / (1.0 + percent[:, mask] / 100.0) - 1.0
    active = problem.active
    weight = system.means.root_weights[active]
    delays = [
        system.whiten_rows(np.asarray(columns @ sample))[active] / weight for sample in fractional
    ]
    return np.asarray(1e3 * np.sqrt(np.mean(np.square(delays), axis=1)))


def _geographic(grid: BlockGrid, measures: BodyMeasures) -> tuple[Interval, Interval]:
    known = np.isfinite(measures.x)
    x, y = measures.x[known], measures.y[known]
    if grid.frame.is_flat or not known.any():
        return Interval.of(x), Interval.of(y)
    longitude, latitude = grid.frame.geographic_coordinates(x, y)
    centre = grid.frame.longitude_deg
    unwrapped = np.mod(longitude - centre + 180.0, 360.0) - 180.0 + centre
    return Interval.of(unwrapped), Interval.of(np.asarray(latitude))


def _touches_edge(core: Flags, usable: Flags) -> bool:
    """Whether a body lies in the highest or lowest layer that most of its columns resolve."""
    resolved = np.flatnonzero(usable[core.any(axis=2)].mean(axis=0) >= 0.5)
    layers = np.flatnonzero(core.any(axis=(0, 1)))
    if not resolved.size or not layers.size:
        return False
    return bool(layers[0] <= resolved[0] or layers[-1] >= resolved[-1])


def _temperature(measures: BodyMeasures, wave: str) -> TemperatureRange | None:
    depth = measures.interval("depth_km").estimate
    if wave != "P" or not 0.0 <= depth <= _DEEPEST_PARTIAL_KM:
        return None
    mean = measures.interval("mean_percent")
    return temperature_range((mean.low, mean.high), depth)

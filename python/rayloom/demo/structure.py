"""What truly lies below the highland: a slow column, a fast root, weak disorder.

The structure is a function of the place, so that it can be put on any blocks;
:func:`truth_grid` cuts those on which the demo's times are computed, finer than
and turned against the ones a user would invert.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from rayloom.demo.highland import to_geographic, to_map_km
from rayloom.earth import ReferenceEarth
from rayloom.model import BlockGrid, Frame, SlownessModel
from rayloom.units import KM_PER_DEGREE

Floats = NDArray[np.float64]


class Structure(Protocol):
    """Anything that gives a velocity perturbation at map positions and depths."""

    def percent(self, east_km: Floats, north_km: Floats, depth_km: Floats) -> Floats:
        """Velocity perturbation in percent, of the shape of the arguments."""


@dataclass(frozen=True)
class TiltedColumn:
    """A column of round plan whose axis leans.

    Parameters
    ----------
    top_km, base_km : triple
        Ends of its axis: east, north, depth.
    radius_km : float
        Where the perturbation has fallen to half.
    core_percent : float
        Velocity perturbation on the axis.
    """

    top_km: tuple[float, float, float]
    base_km: tuple[float, float, float]
    radius_km: float
    core_percent: float

    def percent(self, east_km: Floats, north_km: Floats, depth_km: Floats) -> Floats:
        """Velocity perturbation in percent, of the shape of the arguments."""
        (east_top, north_top, top), (east_base, north_base, base) = self.top_km, self.base_km
        along = np.clip((depth_km - top) / (base - top), 0.0, 1.0)
        distance_km = np.hypot(
            east_km - east_top - along * (east_base - east_top),
            north_km - north_top - along * (north_base - north_top),
        )
        blend_km = 8.0
        ends = 0.5 * (np.tanh((depth_km - top) / blend_km) - np.tanh((depth_km - base) / blend_km))
        return self.core_percent * ends * _shoulder(distance_km / self.radius_km)


@dataclass(frozen=True)
class Ellipsoid:
    """A body of ellipsoidal shape with one vertical axis.

    Parameters
    ----------
    centre_km : triple
        East, north, depth.
    half_axes_km : triple
        Along strike, across strike, vertical: where the perturbation has fallen to half.
    strike_deg : float
        Azimuth of the first half axis.
    core_percent : float
        Velocity perturbation at the centre.
    """

    centre_km: tuple[float, float, float]
    half_axes_km: tuple[float, float, float]
    strike_deg: float
    core_percent: float

    def percent(self, east_km: Floats, north_km: Floats, depth_km: Floats) -> Floats:
        """Velocity perturbation in percent, of the shape of the arguments."""
        east, north, depth = self.centre_km
        strike = np.radians(self.strike_deg)
        along_km = (east_km - east) * np.sin(strike) + (north_km - north) * np.cos(strike)
        across_km = (east_km - east) * np.cos(strike) - (north_km - north) * np.sin(strike)
        a, b, c = self.half_axes_km
        rho = np.sqrt((along_km / a) ** 2 + (across_km / b) ** 2 + ((depth_km - depth) / c) ** 2)
        return self.core_percent * _shoulder(rho)


class Disorder:
    """A Gaussian random field: a sum of plane waves of random direction and phase.

    Parameters
    ----------
    std_percent : float
        Standard deviation of the velocity perturbation.
    correlation_km : pair
        Horizontal and vertical length l of the correlation exp(-d²/2l²).
    rng : numpy.random.Generator
        Source of chance.
    waves : int
        Number of plane waves.
    """

    def __init__(
        self,
        std_percent: float,
        correlation_km: tuple[float, float],
        rng: np.random.Generator,
        *,
        waves: int = 160,
    ) -> None:
        horizontal_km, vertical_km = correlation_km
        scale = np.array([horizontal_km, horizontal_km, vertical_km])
        self._wave_numbers = rng.normal(size=(waves, 3)) / scale
        self._phases = rng.uniform(0.0, 2.0 * np.pi, waves)
        self._amplitude = std_percent * np.sqrt(2.0 / waves)

    def percent(self, east_km: Floats, north_km: Floats, depth_km: Floats) -> Floats:
        """Velocity perturbation in percent, of the shape of the arguments."""
        total = np.zeros(np.broadcast(east_km, north_km, depth_km).shape)
        for (kx, ky, kz), phase in zip(self._wave_numbers, self._phases, strict=True):
            total += np.cos(kx * east_km + ky * north_km + kz * depth_km + phase)
        return np.asarray(self._amplitude * total)


SLOW_COLUMN = TiltedColumn(
    top_km=(34.0, -26.0, 60.0), base_km=(-34.0, 16.0, 280.0), radius_km=45.0, core_percent=-4.0
)
"""Below the volcano Ombrel; its base lies 80 km to the west-north-west of its top."""

FAST_ROOT = Ellipsoid(
    centre_km=(102.0, 84.0, 155.0),
    half_axes_km=(70.0, 42.0, 62.0),
    strike_deg=128.0,
    core_percent=2.5,
)
"""An old root below the eastern plateau."""

DISORDER_PERCENT = 0.5
DISORDER_LENGTHS_KM = (45.0, 35.0)

TRUTH_SPACING_KM = 15.0
TRUTH_CENTRE_KM = (7.3, -4.9)
TRUTH_AZIMUTH_DEG = 24.0
TRUTH_HALF_WIDTH_KM = 430.0
TRUTH_DEPTHS_KM = (-3.0, 342.0)


def truth_grid(
    earth: ReferenceEarth,
    *,
    spacing_km: float = TRUTH_SPACING_KM,
    half_width_km: float = TRUTH_HALF_WIDTH_KM,
) -> BlockGrid:
    """Blocks of the truth: fine below the network, coarser far outside.

    Parameters
    ----------
    earth : ReferenceEarth
        Its discontinuities become block edges.
    spacing_km : float
        Size of the fine blocks.
    half_width_km : float
        Distance of the sides from the centre, at the surface.
    """
    longitude, latitude = to_geographic(*np.array([TRUTH_CENTRE_KM]).T)
    frame = Frame(
        longitude=float(longitude[0]), latitude=float(latitude[0]), azimuth_deg=TRUTH_AZIMUTH_DEG
    )
    edges = _widening_edges(spacing_km, 0.48 * half_width_km, half_width_km) / KM_PER_DEGREE
    return BlockGrid(frame, edges, edges, _depth_edges(earth, spacing_km))


def truth_model(grid: BlockGrid, earth: ReferenceEarth, *structures: Structure) -> SlownessModel:
    """Put structures on blocks: the one-dimensional Earth times their sum.

    Parameters
    ----------
    grid : BlockGrid
        Any blocks on the sphere.
    earth : ReferenceEarth
        The reference.
    *structures : Structure
        Their perturbations, taken at the middle of each block, add up.
    """
    reference = SlownessModel.from_earth(grid, earth)
    east_km, north_km, depth_km = block_positions(grid)
    percent = sum(
        (structure.percent(east_km, north_km, depth_km) for structure in structures),
        start=np.zeros(grid.shape),
    )
    return reference.with_slowness(reference.reference / (1.0 + percent / 100.0))


def block_positions(grid: BlockGrid) -> tuple[Floats, Floats, Floats]:
    """Map position east and north (km) and depth (km) of every block, shaped as the grid."""
    x, y = np.meshgrid(grid.x_centres, grid.y_centres, indexing="ij")
    east_km, north_km = to_map_km(*grid.frame.geographic_coordinates(x, y))
    shape = grid.shape
    return (
        np.broadcast_to(east_km[:, :, np.newaxis], shape),
        np.broadcast_to(north_km[:, :, np.newaxis], shape),
        np.broadcast_to(grid.depth_centres_km, shape),
    )


def _shoulder(rho: Floats) -> Floats:
    """Fall from 1 over a flat top to half at rho = 1, and soon to zero."""
    return np.asarray(np.exp2(-(np.minimum(rho, 4.0) ** 4)))


def _widening_edges(spacing_km: float, fine_km: float, half_width_km: float) -> Floats:
    """Edges symmetric about zero: equal steps, then steps that grow to 2.4 times."""
    positions = [0.0]
    step_km = spacing_km
    while positions[-1] < half_width_km:
        if positions[-1] >= fine_km:
            step_km = min(1.15 * step_km, 2.4 * spacing_km)
        positions.append(positions[-1] + step_km)
    right = np.array(positions)
    return np.concatenate([-right[:0:-1], right])


def _depth_edges(earth: ReferenceEarth, spacing_km: float) -> Floats:
    """Depth edges (km) at equal steps and at every discontinuity inside."""
    top, bottom = TRUTH_DEPTHS_KM
    jumps = np.asarray(earth.discontinuities_km, dtype=np.float64)
    jumps = jumps[(jumps > top) & (jumps < bottom)]
    steps = np.arange(top, bottom + 0.5 * spacing_km, spacing_km)
    gap = np.abs(steps[:, np.newaxis] - jumps).min(axis=1, initial=np.inf)
    return np.unique(np.concatenate([steps[gap > 0.3 * spacing_km], jumps]))

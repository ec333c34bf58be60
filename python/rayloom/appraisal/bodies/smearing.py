"""Whether a body's shape could be that of the point-spread: the smearing check.

Main type: :class:`Smearing`.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rayloom.appraisal.bodies.regions import main_component
from rayloom.appraisal.spread import point_spread
from rayloom.inversion import LinearisedProblem
from rayloom.model import BlockGrid

Floats = NDArray[np.float64]
Flags = NDArray[np.bool_]

_ROD = np.sqrt(12.0)
"""Length of an even rod over the standard deviation of its positions."""


@dataclass(frozen=True)
class Smearing:
    """The longest direction of the point-spread at a body, and the body along it.

    Attributes
    ----------
    azimuth_deg, plunge_deg : float
        Direction in which a point is smeared most, downwards.
    point_spread_km : float
        Length along it of the part of the point-spread that reaches half its peak.
    body_km : float
        Length along it of the body.
    """

    azimuth_deg: float
    plunge_deg: float
    point_spread_km: float
    body_km: float

    @property
    def flagged(self) -> bool:
        """Whether the point-spread is longer than the body: its length is then not its own."""
        return self.point_spread_km > self.body_km


def smearing_at(problem: LinearisedProblem, centroid: Floats, body: Flags) -> Smearing:
    """Compare a body with the point-spread at its centroid.

    Parameters
    ----------
    problem : LinearisedProblem
        A finished inversion.
    centroid : (3,) array
        x, y, depth_km in the frame.
    body : (nx, ny, nz) bool array
        Blocks of the body that reach half of its peak.
    """
    grid = problem.model.grid
    block = int(grid.locate(centroid))
    x, y, depth_km = centroid.tolist()
    spread = point_spread(problem, [(x, y, depth_km)])[0].column
    here = np.zeros(grid.block_count, dtype=bool)
    here[block] = True
    core = main_component(grid, spread >= 0.5 * spread.max(), _at_peak(spread))
    positions = grid.frame.enu_km(grid.centres)
    direction, length_km = _longest(grid, positions, core)
    body_km = _length_along(grid, positions, body, direction)
    down = direction if direction[2] <= 0.0 else -direction
    return Smearing(
        azimuth_deg=float(np.degrees(np.arctan2(down[0], down[1])) % 360.0),
        plunge_deg=float(np.degrees(np.arcsin(np.clip(-down[2], -1.0, 1.0)))),
        point_spread_km=length_km,
        body_km=body_km,
    )


def _at_peak(values: Floats) -> Flags:
    return np.asarray(values == values.max())


def _longest(grid: BlockGrid, positions: Floats, inside: Flags) -> tuple[Floats, float]:
    """Find the unit vector of the largest second moment, and the rod of that moment, km."""
    values, vectors = np.linalg.eigh(_moments(grid, positions, inside))
    return vectors[:, -1], float(_ROD * np.sqrt(max(values[-1], 0.0)))


def _length_along(grid: BlockGrid, positions: Floats, inside: Flags, direction: Floats) -> float:
    moment = float(direction @ _moments(grid, positions, inside) @ direction)
    return float(_ROD * np.sqrt(max(moment, 0.0)))


def _moments(grid: BlockGrid, positions: Floats, inside: Flags) -> Floats:
    """Second moments of positions about their mean, blocks' own size included, km²."""
    chosen = inside.ravel()
    weights = np.broadcast_to(grid.volumes_km3, grid.shape).ravel()[chosen]
    x, y, z = np.unravel_index(np.flatnonzero(chosen), grid.shape)
    widths = grid.widths
    own = np.column_stack([widths.x_km[x], widths.y_km[y], widths.depth_km[z]]) ** 2 / 12.0
    offsets = positions[chosen] - np.average(positions[chosen], axis=0, weights=weights)
    spread = (weights[:, None] * offsets).T @ offsets / weights.sum()
    return np.asarray(spread + np.diag(np.average(own, axis=0, weights=weights)))

"""Anomalies beside and below the blocks, and the delays that they cause.

Main function: :func:`outside_sources`. The same survey is traced once more,
through larger blocks that hold the anomalies, along the rays of the
one-dimensional Earth.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rayloom.appraisal.leaks import LeakSource, slowness_change
from rayloom.forward import Rays, trace_distant
from rayloom.inversion import LinearisedProblem
from rayloom.model import BlockGrid, SlownessModel
from rayloom.residuals import Residuals
from rayloom.units import EARTH_RADIUS_KM

Floats = NDArray[np.float64]
Flags = NDArray[np.bool_]

_OUTER_BLOCK_KM = 50.0
_OUTER_LAYER_KM = 25.0
_SHARES = (0.2, 0.35, 0.5, 0.65, 0.8)
"""Where along a side balls are tried."""


@dataclass(frozen=True)
class Surroundings:
    """Larger blocks about those of an inversion, and the survey's rays through them.

    Attributes
    ----------
    inner : BlockGrid
        The blocks of the inversion; their edges are edges of the larger ones.
    model : SlownessModel
        The one-dimensional Earth in the larger blocks.
    rays : Rays
        Along which its waves run, one per row.
    """

    inner: BlockGrid
    model: SlownessModel
    rays: Rays

    def delays_s(self, fractional: Floats) -> Floats:
        """Delays of fractional slowness perturbations of the larger blocks, (rows,), s."""
        change = self.model.reference.ravel() * fractional.ravel()
        return np.asarray(self.rays.path_lengths @ change)


def outside_sources(
    problem: LinearisedProblem,
    data: Residuals,
    *,
    radius_km: float = 75.0,
    contrast_percent: float = -3.0,
    threads: int | None = None,
    progress: Callable[[int, int], object] | None = None,
) -> tuple[LeakSource, LeakSource]:
    """Put one ball beside the blocks and one below them.

    The first touches a side, between half the depth of the blocks and their
    base, where the rays cross it most; the second touches the base below the
    middle of the stations. Where no ray comes near, the delays are zero.

    Parameters
    ----------
    problem : LinearisedProblem
        A finished inversion, on a sphere.
    data : Residuals
        Its table of residuals.
    radius_km : float, optional
        Radius of the balls.
    contrast_percent : float, optional
        Their velocity perturbation.
    threads : int, optional
        Threads of the tracer.
    progress : callable, optional
        Told (rays done, rays in all).

    Returns
    -------
    pair of LeakSource
        "beside" and "below".
    """
    around = surroundings(
        problem, data, margin_km=2.0 * radius_km, threads=threads, progress=progress
    )
    grid = around.inner
    middle = station_middle(problem, data)
    side, beside = _beside(around, radius_km)
    below = (*middle, float(grid.depth_edges_km[-1]) + radius_km)
    places = (
        (
            "beside",
            beside,
            f"a ball of {radius_km:g} km radius against the {side} side, centre "
            f"{beside[2]:.0f} km deep",
        ),
        ("below", below, f"a ball of {radius_km:g} km radius against the base"),
    )
    change = slowness_change(contrast_percent)
    sources = [
        LeakSource(
            name=name,
            place=place,
            contrast_percent=contrast_percent,
            delay_s=around.delays_s(np.where(_ball(around, centre, radius_km), change, 0.0)),
            known=np.asarray(around.rays.traced, dtype=bool),
        )
        for name, centre, place in places
    ]
    return sources[0], sources[1]


def surroundings(
    problem: LinearisedProblem,
    data: Residuals,
    *,
    margin_km: float,
    threads: int | None = None,
    progress: Callable[[int, int], object] | None = None,
) -> Surroundings:
    """Trace the survey through larger blocks, along the rays of the one-dimensional Earth.

    Parameters
    ----------
    problem : LinearisedProblem
        A finished inversion, on a sphere.
    data : Residuals
        Its table of residuals.
    margin_km : float
        How far the larger blocks reach beyond the sides and the base.
    threads : int, optional
        Threads of the tracer.
    progress : callable, optional
        Told (rays done, rays in all).
    """
    grid = problem.model.grid
    model = SlownessModel.from_earth(
        enlarged_grid(grid, margin_km=margin_km), data.earth, wave=problem.model.wave
    )
    row = problem.rows.data_row
    rays = trace_distant(
        model,
        data.earth,
        data.events,
        data.stations,
        pairs=np.column_stack([data.event_index[row], data.station_index[row]]),
        phases=problem.rows.phase,
        method="reference",
        threads=threads,
        progress=progress,
    )
    return Surroundings(inner=grid, model=model, rays=rays)


def enlarged_grid(grid: BlockGrid, *, margin_km: float) -> BlockGrid:
    """Add blocks beside and below, those inside unchanged.

    Parameters
    ----------
    grid : BlockGrid
        The blocks, on a sphere.
    margin_km : float
        Least width of what is added at each side and below, km.
    """
    rim_km = np.radians(1.0) * (EARTH_RADIUS_KM - grid.depth_edges_km[-1])
    squeezed = rim_km * np.cos(np.radians(np.abs(grid.y_edges).max()))
    steps = np.arange(1, int(np.ceil(margin_km / _OUTER_BLOCK_KM)) + 1)
    layers = np.arange(1, int(np.ceil(margin_km / _OUTER_LAYER_KM)) + 1)
    outward = steps * _OUTER_BLOCK_KM
    deeper = grid.depth_edges_km[-1] + _OUTER_LAYER_KM * layers
    return BlockGrid(
        grid.frame,
        _widened(grid.x_edges, outward / squeezed),
        _widened(grid.y_edges, outward / rim_km),
        np.concatenate([grid.depth_edges_km, deeper]),
    )


def _widened(edges: Floats, outward: Floats) -> Floats:
    return np.concatenate([edges[0] - outward[::-1], edges, edges[-1] + outward])


def station_middle(problem: LinearisedProblem, data: Residuals) -> tuple[float, float]:
    """Median x and y of the stations in use.

    Parameters
    ----------
    problem : LinearisedProblem
        A finished inversion.
    data : Residuals
        Its table of residuals.
    """
    used = np.unique(data.station_index[problem.rows.data_row])
    x, y = problem.model.grid.frame.local_coordinates(
        data.stations.longitude_deg[used], data.stations.latitude_deg[used]
    )
    return float(np.median(x)), float(np.median(y))


def _beside(around: Surroundings, radius_km: float) -> tuple[str, tuple[float, float, float]]:
    """Name the side, and the ball's centre against it, that the rays cross most."""
    length = np.asarray(around.rays.path_lengths.sum(axis=0)).ravel()
    best, place = -1.0, ("", (0.0, 0.0, 0.0))
    for side, centre in _places_beside(around.inner, radius_km):
        crossed = float(length[_ball(around, centre, radius_km)].sum())
        if crossed > best:
            best, place = crossed, (side, centre)
    return place


def _places_beside(
    grid: BlockGrid, radius_km: float
) -> Iterator[tuple[str, tuple[float, float, float]]]:
    """Balls that touch a side, at several places along it and depths."""
    top, base = max(float(grid.depth_edges_km[0]), 0.0), float(grid.depth_edges_km[-1])
    for depth_km in np.linspace(0.5 * (top + base), base, 3).tolist():
        along_y = np.radians(1.0) * (EARTH_RADIUS_KM - depth_km)
        for share in _SHARES:
            x, y = (
                float(edges[0] + share * (edges[-1] - edges[0]))
                for edges in (grid.x_edges, grid.y_edges)
            )
            off_x = radius_km / (along_y * float(np.cos(np.radians(y))))
            off_y = radius_km / along_y
            yield "lower x", (float(grid.x_edges[0]) - off_x, y, depth_km)
            yield "upper x", (float(grid.x_edges[-1]) + off_x, y, depth_km)
            yield "lower y", (x, float(grid.y_edges[0]) - off_y, depth_km)
            yield "upper y", (x, float(grid.y_edges[-1]) + off_y, depth_km)


def _ball(around: Surroundings, centre: tuple[float, float, float], radius_km: float) -> Flags:
    """Blocks outside the inner ones whose middle lies in a ball, (blocks,)."""
    outer = around.model.grid
    points = outer.centres
    near = outer.frame.chord_km(points, np.broadcast_to(centre, points.shape)) <= radius_km
    return np.asarray(near & (around.inner.locate(points) < 0))

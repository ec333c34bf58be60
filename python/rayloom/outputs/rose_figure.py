"""Where each station's rays come from: back-azimuth roses on a map."""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt

from rayloom.model import BlockGrid
from rayloom.outputs.map_view import MapView, draw_scale_bar, map_view, places
from rayloom.outputs.style import INK, PAGE_WIDTH_IN, look

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from rayloom.survey import Stations

Floats = npt.NDArray[np.float64]
SECTORS: Final = 12
_COLOUR: Final = "#0b5d96"
_LEFT, _RIGHT, _TOP, _FOOT = 0.55, 0.12, 0.1, 0.62
_WIDTH_IN: Final = 0.78 * PAGE_WIDTH_IN


def rose_counts(
    station_index: npt.NDArray[np.int64], back_azimuth_deg: Floats, station_count: int
) -> npt.NDArray[np.int64]:
    """Count the picks of each station by sector of back-azimuth.

    Parameters
    ----------
    station_index : (rows,) int array
        Station of each pick.
    back_azimuth_deg : (rows,) array
        Direction from the station to the event, degrees clockwise from north.
    station_count : int
        Number of stations.

    Returns
    -------
    (stations, sectors) int array
        Sectors of equal width, the first beginning at north.
    """
    turn = np.mod(back_azimuth_deg, 360.0)
    sector = np.minimum((turn * SECTORS / 360.0).astype(np.int64), SECTORS - 1)
    counts = np.bincount(
        station_index * SECTORS + sector, minlength=station_count * SECTORS
    ).astype(np.int64)
    return counts.reshape(station_count, SECTORS)


def figure_roses(grid: BlockGrid, stations: Stations, counts: npt.NDArray[np.int64]) -> Figure:
    """Draw a small rose at each station; area is the number of picks.

    Parameters
    ----------
    grid : BlockGrid
        The blocks, on a sphere.
    stations : Stations
        The stations.
    counts : (stations, sectors) int array
        From :func:`rose_counts`.

    Returns
    -------
    Figure
    """
    from matplotlib.collections import PolyCollection
    from matplotlib.figure import Figure

    used = np.flatnonzero(counts.sum(axis=1) > 0)
    x, y = places(grid.frame, stations)[used, :2].T
    view = map_view(_around(grid, x, y))
    where = np.column_stack(view.place(x, y))
    radius = _radius(where * [1.0, view.aspect])
    north = _north(view, grid, stations, used, where)
    tall = (_WIDTH_IN - _LEFT - _RIGHT) * view.height_over_width
    height = tall + _TOP + _FOOT
    with look():
        figure = Figure(figsize=(_WIDTH_IN, height))
        wide = 1.0 - (_LEFT + _RIGHT) / _WIDTH_IN
        axes = figure.add_axes((_LEFT / _WIDTH_IN, _FOOT / height, wide, tall / height))
        view.open(axes, outline=False)
        wedges = _wedges(counts[used], where, north, radius=radius, aspect=view.aspect)
        axes.add_collection(
            PolyCollection(wedges, facecolor=_COLOUR, edgecolor="white", linewidth=0.2, zorder=4),
            autolim=False,
        )
        axes.plot(*where.T, ".", markersize=1.2, color=INK, zorder=5)
        draw_scale_bar(axes, view, avoid=(where[:, 0], where[:, 1]))
        figure.text(
            _LEFT / _WIDTH_IN,
            0.14 / height,
            "Wedges point to where picks come from; their area is the number of picks: "
            f"{int(counts.max(initial=0))} in the largest.",
            fontsize=6.5,
        )
    return figure


def _around(grid: BlockGrid, x: Floats, y: Floats) -> BlockGrid:
    """One block around all stations, with some room."""
    pad = 0.12 * max(float(np.ptp(x)), float(np.ptp(y)), 0.2)
    return BlockGrid(
        grid.frame,
        [x.min() - pad, x.max() + pad],
        [y.min() - pad, y.max() + pad],
        grid.depth_edges_km[[0, -1]],
    )


def _radius(places_on_paper: Floats) -> float:
    """Largest radius: most of the median distance to the nearest other station."""
    if len(places_on_paper) < 2:
        return 0.05
    gaps = np.linalg.norm(places_on_paper[:, None] - places_on_paper, axis=-1)
    np.fill_diagonal(gaps, np.inf)
    return float(0.6 * np.median(gaps.min(axis=1)))


def _north(
    view: MapView,
    grid: BlockGrid,
    stations: Stations,
    used: npt.NDArray[np.int64],
    where: Floats,
) -> Floats:
    """Direction of north at each station on paper, radians clockwise from upwards."""
    step = 0.01
    latitude = np.asarray(stations.latitude_deg, dtype=np.float64)[used]
    ahead = np.where(latitude > 0.0, latitude - step, latitude + step)
    x, y = grid.frame.local_coordinates(np.asarray(stations.longitude_deg)[used], ahead)
    change = (np.column_stack(view.place(x, y)) - where) * np.sign(ahead - latitude)[:, None]
    return np.asarray(np.arctan2(change[:, 0], change[:, 1] * view.aspect))


def _wedges(
    counts: npt.NDArray[np.int64],
    where: Floats,
    north: Floats,
    *,
    radius: float,
    aspect: float,
) -> list[Floats]:
    """Outlines of all wedges in map coordinates."""
    station, sector = np.nonzero(counts)
    size = radius * np.sqrt(counts[station, sector] / counts.max(initial=1))
    width = 2.0 * np.pi / SECTORS
    angle = north[station, None] + width * (sector[:, None] + np.linspace(0.0, 1.0, 9))
    across = where[station, None, 0] + size[:, None] * np.sin(angle)
    up = where[station, None, 1] + size[:, None] * np.cos(angle) / aspect
    arcs = np.stack([across, up], axis=-1)
    return list(np.concatenate([where[station][:, None], arcs], axis=1))

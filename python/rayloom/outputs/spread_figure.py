"""Point-spread: what single blocks become, in a map and two sections each."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt

from rayloom.appraisal import FullWidth, PointSpread
from rayloom.model import BlockGrid
from rayloom.outputs.style import (
    INK,
    NO_DATA_COLOUR,
    PAGE_WIDTH_IN,
    ColourScale,
    draw_colour_bar,
    look,
    slow_red,
)

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

Floats = npt.NDArray[np.float64]
MOST_POINTS: Final = 4
_HALF_WIDTH_KM: Final = 150.0
_LEFT, _RIGHT, _ACROSS, _HEAD, _DOWN, _FOOT = 0.58, 0.12, 0.52, 0.36, 0.52, 0.66


def figure_point_spread(grid: BlockGrid, spreads: Sequence[PointSpread]) -> Figure:
    """Draw columns of the resolution matrix around their blocks.

    Parameters
    ----------
    grid : BlockGrid
        The blocks.
    spreads : sequence of PointSpread
        The first four count.

    Returns
    -------
    Figure
        A row per point: map at its depth, section along x, section along y. Heights
        are shares of the largest value; the square is the block itself.
    """
    from matplotlib.figure import Figure

    spreads = list(spreads)[:MOST_POINTS]
    panel = (PAGE_WIDTH_IN - _LEFT - _RIGHT - 2.0 * _ACROSS) / 3.0
    height = len(spreads) * (panel + _HEAD + _DOWN) + _FOOT
    scale = ColourScale("share of the largest value", -1.0, 1.0, slow_red().reversed())
    with look():
        figure = Figure(figsize=(PAGE_WIDTH_IN, height))
        for row, spread in enumerate(spreads):
            bottom = height - (row + 1) * (panel + _HEAD + _DOWN) + _DOWN
            for column in range(3):
                left = _LEFT + column * (panel + _ACROSS)
                box = (
                    left / PAGE_WIDTH_IN,
                    bottom / height,
                    panel / PAGE_WIDTH_IN,
                    panel / height,
                )
                axes = figure.add_axes(box)
                _draw(axes, grid, spread, column, scale)
                if column == 0:
                    axes.set_title(_title(grid, spread), loc="left", pad=4)
        bar = (_LEFT / PAGE_WIDTH_IN, 0.36 / height, 3.0 / PAGE_WIDTH_IN, 0.1 / height)
        draw_colour_bar(figure.add_axes(bar), scale)
    return figure


def _draw(
    axes: Axes, grid: BlockGrid, spread: PointSpread, column: int, scale: ColourScale
) -> None:
    ix, iy, iz = spread.block
    widths = grid.widths
    x = _edges_about(widths.x_km, ix)
    y = _edges_about(widths.y_km, iy)
    depth = grid.depth_edges_km
    values = spread.column / np.abs(spread.column).max()
    across, down, plane, names = (
        (x, y, values[:, :, iz], ("x (km)", "y (km)")),
        (x, depth, values[:, iy, :], ("x (km)", "depth (km)")),
        (y, depth, values[ix, :, :], ("y (km)", "depth (km)")),
    )[column]
    axes.set_facecolor(NO_DATA_COLOUR)
    axes.pcolormesh(
        across,
        down,
        plane.T,
        cmap=scale.colours,
        vmin=scale.lowest,
        vmax=scale.highest,
        rasterized=True,
    )
    i, j = ((ix, iy), (ix, iz), (iy, iz))[column]
    axes.plot(
        across[[i, i + 1, i + 1, i, i]],
        down[[j, j, j + 1, j + 1, j]],
        color=INK,
        linewidth=0.7,
    )
    axes.set_xlim(-_HALF_WIDTH_KM, _HALF_WIDTH_KM)
    if column == 0:
        axes.set_ylim(-_HALF_WIDTH_KM, _HALF_WIDTH_KM)
    else:
        centre = float(grid.depth_centres_km[iz])
        top = min(max(centre - _HALF_WIDTH_KM, depth[0]), depth[-1] - 2.0 * _HALF_WIDTH_KM)
        top = max(float(top), float(depth[0]))
        axes.set_ylim(top + 2.0 * _HALF_WIDTH_KM, top)
    axes.set_aspect("equal")
    axes.set_xlabel(names[0], labelpad=1)
    axes.set_ylabel(names[1], labelpad=1)


def _edges_about(widths_km: Floats, index: int) -> Floats:
    edges = np.concatenate([[0.0], np.cumsum(widths_km)])
    return np.asarray(edges - 0.5 * (edges[index] + edges[index + 1]))


def _title(grid: BlockGrid, spread: PointSpread) -> str:
    x, y, depth = spread.point
    if grid.frame.is_flat:
        place = f"x {x:.0f} km, y {y:.0f} km"
    else:
        longitude, latitude = grid.frame.geographic_coordinates(x, y)
        place = f"longitude {float(longitude):.2f}°, latitude {float(latitude):.2f}°"
    text = f"{place}, {depth:.0f} km deep: R = {spread.diagonal:.3f}; {_widths(spread)}"
    return text.replace("-", "−")


def _widths(spread: PointSpread) -> str:
    width: FullWidth = spread.column_width
    parts = [
        f"{name} {size:.0f} km" if np.isfinite(size) else f"{name} beyond the box"
        for name, size in (("x", width.x_km), ("y", width.y_km), ("depth", width.depth_km))
    ]
    return "full width " + ", ".join(parts)

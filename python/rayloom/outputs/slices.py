"""Horizontal slices: one map per layer, on one page."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt

from rayloom.errors import InputError
from rayloom.model import BlockGrid, SlownessModel
from rayloom.outputs.map_view import (
    MapView,
    draw_line_ends,
    draw_scale_bar,
    map_view,
    places,
)
from rayloom.outputs.style import (
    COLUMN_WIDTH_IN,
    INK,
    NO_DATA_COLOUR,
    PAGE_WIDTH_IN,
    BlockField,
    draw_colour_bar,
    legend_marks,
    look,
    perturbation_field,
    station_look,
)

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from rayloom.outputs.section_line import SectionLine
    from rayloom.survey import Stations

MOST_SLICES: Final = 9
_LEFT, _RIGHT, _GAP = 0.52, 0.12, 0.12
_TITLE, _TICKS, _FOOT = 0.22, 0.36, 0.6
_TALLEST: Final = 8.6


def choose_layers(
    grid: BlockGrid,
    shown: npt.NDArray[np.bool_],
    depths_km: Sequence[float] | None = None,
) -> list[int]:
    """Choose the layers to draw.

    Parameters
    ----------
    grid : BlockGrid
        The blocks.
    shown : array of bool, shape (nx, ny, nz)
        The blocks that will be coloured.
    depths_km : sequence of float, optional
        Depths wanted; each names the layer that holds it. When None, up to
        `MOST_SLICES` layers, evenly spread over those where at least a tenth
        of the best layer's number of blocks is coloured.

    Returns
    -------
    list of int
        Layer numbers, rising, each once.

    Raises
    ------
    InputError
        A depth lies outside the grid.
    """
    edges = grid.depth_edges_km
    if depths_km is not None:
        for depth in depths_km:
            if not edges[0] <= depth <= edges[-1]:
                raise InputError(
                    f"slice depth {depth:g} km lies outside the model, which reaches from "
                    f"{edges[0]:g} to {edges[-1]:g} km",
                    where="slice_depths_km",
                )
        found = np.searchsorted(edges, np.asarray(depths_km), side="right") - 1
        return sorted({int(layer) for layer in np.minimum(found, len(edges) - 2)})
    per_layer = shown.sum(axis=(0, 1))
    useful = np.flatnonzero(per_layer >= max(1.0, 0.1 * per_layer.max(initial=0)))
    if useful.size == 0:
        useful = np.arange(len(edges) - 1)
    picks = np.linspace(0, useful.size - 1, min(MOST_SLICES, useful.size)).round().astype(int)
    return [int(layer) for layer in useful[np.unique(picks)]]


def figure_depth_slices(
    model: SlownessModel,
    *,
    stations: Stations | npt.ArrayLike | None = None,
    depths_km: Sequence[float] | None = None,
    field: BlockField | None = None,
    colour_limit_percent: float | None = None,
    lines: Sequence[SectionLine] = (),
) -> Figure:
    """Draw maps of a model at several depths on one page.

    Parameters
    ----------
    model : SlownessModel
        The model.
    stations : Stations or array-like, shape (n, 3), optional
        Stations, or points x, y, depth_km in the frame.
    depths_km : sequence of float, optional
        Depths wanted; see :func:`choose_layers`.
    field : BlockField, optional
        What to colour; the velocity perturbation when None.
    colour_limit_percent : float, optional
        End of the symmetric scale of the perturbation.
    lines : sequence of SectionLine
        Lines of sections to mark on the first map.

    Returns
    -------
    Figure
        One QuadMesh per map holds the coloured values, shape (nx, ny), masked
        where the block is greyed.

    Raises
    ------
    InputError
        A depth lies outside the grid.
    """
    if field is None:
        field = perturbation_field(model, colour_limit_percent=colour_limit_percent)
    grid = model.grid
    layers = choose_layers(grid, field.shown, depths_km)
    view = map_view(grid)
    where = None if stations is None else view.place(*places(grid.frame, stations).T[:2])
    with look():
        page = _Page.fitting(len(layers), view.height_over_width)
        figure, panels = page.open(len(layers))
        for number, (axes, layer) in enumerate(zip(panels, layers, strict=True)):
            _open_panel(axes, view, page, number=number, count=len(layers))
            _draw_layer(axes, view, field, layer)
            axes.set_title(_layer_title(grid, layer), pad=3)
            if where is not None:
                axes.plot(*where, "^", zorder=4, **station_look(where[0].size))
        draw_scale_bar(panels[0], view)
        for line in lines:
            _mark_line(panels[0], view, line)
        _draw_foot(figure, page, field, has_stations=where is not None)
    return figure


def _open_panel(axes: Axes, view: MapView, page: _Page, *, number: int, count: int) -> None:
    is_first, is_lowest = number % page.columns == 0, number + page.columns >= count
    view.open(axes, left=is_first, bottom=is_lowest, most_ticks=page.most_ticks)
    axes.set_xlabel(view.axis_titles[0] if is_lowest else "", labelpad=1)
    axes.set_ylabel(view.axis_titles[1] if is_first else "", labelpad=1)
    axes.set_title(f"({chr(97 + number)})", loc="left", pad=3, fontweight="bold")


def _layer_title(grid: BlockGrid, layer: int) -> str:
    top, bottom = grid.depth_edges_km[layer : layer + 2]
    joint = "–" if top >= 0 else " to "
    digits = 0 if bottom - top >= 5.0 else 1
    return f"{top:.{digits}f}{joint}{bottom:.{digits}f} km".replace("-", "−")


def _draw_layer(axes: Axes, view: MapView, field: BlockField, layer: int) -> None:
    from matplotlib.colors import ListedColormap

    shown = field.shown[:, :, layer]
    hidden = np.ma.masked_where(shown, np.zeros(shown.shape))
    axes.pcolormesh(
        *view.corners, hidden, cmap=ListedColormap([NO_DATA_COLOUR]), rasterized=True, zorder=1
    ).set_label("hidden blocks")
    axes.pcolormesh(
        *view.corners,
        np.ma.masked_where(~shown, field.values[:, :, layer]),
        cmap=field.scale.colours,
        vmin=field.scale.lowest,
        vmax=field.scale.highest,
        rasterized=True,
        zorder=2,
    ).set_label(field.scale.label)


def _mark_line(axes: Axes, view: MapView, line: SectionLine) -> None:
    from matplotlib.patheffects import withStroke

    x, y = line.along(101)
    across, up = view.place(x, y)
    halo = [withStroke(linewidth=1.8, foreground="white")]
    axes.plot(across, up, color=INK, linewidth=0.8, path_effects=halo, zorder=5)
    draw_line_ends(axes, view, across, up, line.name)


@dataclass(frozen=True)
class _Page:
    """Sizes of the page in inches."""

    columns: int
    rows: int
    panel_width: float
    panel_height: float

    @classmethod
    def fitting(cls, count: int, height_over_width: float) -> _Page:
        wanted = 3 if 0.55 <= height_over_width <= 1.7 else (2 if height_over_width < 0.55 else 4)
        columns = max(1, min(wanted, count))
        rows = -(-count // columns)
        width = (PAGE_WIDTH_IN - _LEFT - _RIGHT - (wanted - 1) * _GAP) / wanted
        width = min(width, (_TALLEST / rows - _TITLE) / height_over_width)
        return cls(columns, rows, width, width * height_over_width)

    @property
    def most_ticks(self) -> int:
        return 6 if self.panel_width >= 1.9 else max(2, int(self.panel_width / 0.45))

    @property
    def width(self) -> float:
        across = self.columns * self.panel_width + (self.columns - 1) * _GAP
        return max(COLUMN_WIDTH_IN, _LEFT + across + _RIGHT)

    @property
    def height(self) -> float:
        return self.rows * (self.panel_height + _TITLE) + _TICKS + _FOOT

    def open(self, count: int) -> tuple[Figure, list[Axes]]:
        from matplotlib.figure import Figure

        figure = Figure(figsize=(self.width, self.height))
        panels = []
        for number in range(count):
            row, column = divmod(number, self.columns)
            left = _LEFT + column * (self.panel_width + _GAP)
            bottom = self.height - (row + 1) * (self.panel_height + _TITLE)
            box = (left, bottom, self.panel_width, self.panel_height)
            panels.append(figure.add_axes(self.share(*box)))
        return figure, panels

    def share(
        self, left: float, bottom: float, width: float, height: float
    ) -> tuple[float, float, float, float]:
        """Inches to shares of the page."""
        return left / self.width, bottom / self.height, width / self.width, height / self.height


def _draw_foot(figure: Figure, page: _Page, field: BlockField, *, has_stations: bool) -> None:
    bar_width = min(3.4, 0.6 * (page.width - _LEFT - _RIGHT))
    axes = figure.add_axes(page.share(_LEFT, 0.36, bar_width, 0.1))
    draw_colour_bar(axes, field.scale)
    figure.legend(
        handles=legend_marks(has_stations=has_stations, hidden_label=field.hidden_label),
        loc="center left",
        bbox_to_anchor=((_LEFT + bar_width + 0.25) / page.width, 0.38 / page.height),
        ncols=1,
        handlelength=1.2,
        borderpad=0,
        labelspacing=0.4,
    )

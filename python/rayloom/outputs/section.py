"""Vertical sections along a line, at true aspect."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt

from rayloom.model import BlockGrid, SlownessModel
from rayloom.outputs.map_view import draw_line_ends, map_view, places
from rayloom.outputs.section_line import SectionLine
from rayloom.outputs.style import (
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

    from rayloom.earth import ReferenceEarth
    from rayloom.survey import Stations

Floats = npt.NDArray[np.float64]

SAMPLES_PER_BLOCK: Final = 6
_LEFT, _RIGHT, _MAP_WIDTH, _MAP_GAP = 0.58, 0.1, 1.35, 0.72
_HEAD, _STRIP, _STRIP_GAP, _FOOT = 0.27, 0.5, 0.1, 0.98
_TALLEST: Final = 7.0


@dataclass(frozen=True)
class SectionCut:
    """The blocks along a line.

    Attributes
    ----------
    distance_edges_km : array, shape (n + 1,)
        Edges of narrow columns along the line.
    depth_edges_km : array, shape (nz + 1,)
        Edges of the layers.
    column : array of int, shape (n,)
        Number of the block column (ix * ny + iy), or -1 outside the grid.
    """

    distance_edges_km: Floats
    depth_edges_km: Floats
    column: npt.NDArray[np.int64]

    def take(self, values: npt.NDArray[np.generic]) -> npt.NDArray[np.generic]:
        """Pick block values of shape (nx, ny, nz) along the line; shape (nz, n)."""
        return values.reshape(-1, values.shape[2])[np.maximum(self.column, 0)].T

    @property
    def inside(self) -> npt.NDArray[np.bool_]:
        """Whether a column lies in the grid, shape (n,)."""
        return self.column >= 0


def cut_blocks(grid: BlockGrid, line: SectionLine) -> SectionCut:
    """Find the blocks that a line crosses.

    Parameters
    ----------
    grid : BlockGrid
        The blocks.
    line : SectionLine
        The line.

    Returns
    -------
    SectionCut
        Columns a `SAMPLES_PER_BLOCK`-th of the narrowest block wide at most.
    """
    widths = grid.widths
    narrowest = min(widths.x_km.min(), widths.y_km.min())
    count = int(np.ceil(SAMPLES_PER_BLOCK * line.length_km / narrowest))
    edges = np.linspace(0.0, line.length_km, min(max(count, 50), 6000) + 1)
    x, y = line.at(0.5 * (edges[1:] + edges[:-1]))
    middle_km = 0.5 * (grid.depth_edges_km[0] + grid.depth_edges_km[1])
    block = grid.locate(np.column_stack([x, y, np.full_like(x, middle_km)]))
    return SectionCut(edges, grid.depth_edges_km, np.where(block < 0, -1, block // grid.shape[2]))


def figure_section(
    model: SlownessModel,
    line: SectionLine,
    *,
    stations: Stations | npt.ArrayLike | None = None,
    band_km: float = 50.0,
    earth: ReferenceEarth | None = None,
    field: BlockField | None = None,
    colour_limit_percent: float | None = None,
) -> Figure:
    """Draw a vertical section with the stations above it and an index map.

    One kilometre is as long down as along (distances at sea level; the curvature
    of the Earth is not drawn). The strip on top, stretched upwards, shows the
    elevation of the stations within a band around the line.

    Parameters
    ----------
    model : SlownessModel
        The model.
    line : SectionLine
        Where to cut.
    stations : Stations or array-like, shape (n, 3), optional
        Stations, or points x, y, depth_km in the frame.
    band_km : float
        Half-width of the band.
    earth : ReferenceEarth, optional
        Marks its discontinuities.
    field : BlockField, optional
        What to colour; the velocity perturbation when None.
    colour_limit_percent : float, optional
        End of the symmetric scale of the perturbation.

    Returns
    -------
    Figure
        The last QuadMesh of the axes labelled ``section`` holds the coloured
        values, shape (nz, n), masked where greyed or outside the model.
    """
    if field is None:
        field = perturbation_field(model, colour_limit_percent=colour_limit_percent)
    grid = model.grid
    cut = cut_blocks(grid, line)
    where = None if stations is None else places(grid.frame, stations)
    with look():
        sheet = _Sheet.fitting(grid, line, has_strip=where is not None)
        figure = sheet.open()
        axes = sheet.add(figure, *sheet.section_box, label="section")
        _draw_cut(axes, cut, field)
        _dress_section(axes, cut, line)
        if earth is not None:
            _mark_discontinuities(axes, earth, cut, sheet.section_box[3])
        top = axes
        if where is not None:
            top = sheet.add(figure, *sheet.strip_box, label="elevation", sharex=axes)
            _draw_strip(top, line, where, band_km)
        _label_ends(top, line)
        _draw_index_map(sheet.add(figure, *sheet.map_box, label="index map"), grid, line, where)
        _draw_foot(figure, sheet, field, has_stations=where is not None)
    return figure


@dataclass(frozen=True)
class _Sheet:
    """Sizes of the sheet in inches, boxes as left, bottom, width, height."""

    height: float
    section_box: tuple[float, float, float, float]
    strip_box: tuple[float, float, float, float]
    map_box: tuple[float, float, float, float]

    @classmethod
    def fitting(cls, grid: BlockGrid, line: SectionLine, *, has_strip: bool) -> _Sheet:
        room = PAGE_WIDTH_IN - _LEFT - _RIGHT - _MAP_WIDTH - _MAP_GAP
        slope = float(np.ptp(grid.depth_edges_km)) / line.length_km
        width = min(room, _TALLEST / slope)
        deep = width * slope
        strip = _STRIP + _STRIP_GAP if has_strip else 0.0
        map_height = min(2.6, _MAP_WIDTH * map_view(grid).height_over_width)
        tall = max(deep + strip, map_height + 0.3)
        height = _HEAD + tall + _FOOT
        top = height - _HEAD
        left = _LEFT + 0.5 * (room - width)
        return cls(
            height,
            (left, top - strip - deep, width, deep),
            (left, top - _STRIP, width, _STRIP),
            (PAGE_WIDTH_IN - _RIGHT - _MAP_WIDTH, top - map_height, _MAP_WIDTH, map_height),
        )

    def open(self) -> Figure:
        from matplotlib.figure import Figure

        return Figure(figsize=(PAGE_WIDTH_IN, self.height))

    def add(
        self,
        figure: Figure,
        left: float,
        bottom: float,
        width: float,
        height: float,
        *,
        label: str,
        sharex: Axes | None = None,
    ) -> Axes:
        box = (left / PAGE_WIDTH_IN, bottom / self.height)
        size = (width / PAGE_WIDTH_IN, height / self.height)
        return figure.add_axes((*box, *size), label=label, sharex=sharex)


def _draw_cut(axes: Axes, cut: SectionCut, field: BlockField) -> None:
    from matplotlib.colors import ListedColormap

    shown = np.asarray(cut.take(field.shown), dtype=bool) & cut.inside
    hidden = cut.inside & ~shown
    edges = (cut.distance_edges_km, cut.depth_edges_km)
    axes.pcolormesh(
        *edges,
        np.ma.masked_where(~hidden, np.zeros(hidden.shape)),
        cmap=ListedColormap([NO_DATA_COLOUR]),
        rasterized=True,
    )
    axes.pcolormesh(
        *edges,
        np.ma.masked_where(~shown, cut.take(field.values)),
        cmap=field.scale.colours,
        vmin=field.scale.lowest,
        vmax=field.scale.highest,
        rasterized=True,
    )


def _dress_section(axes: Axes, cut: SectionCut, line: SectionLine) -> None:
    axes.set_xlim(0.0, line.length_km)
    axes.set_ylim(cut.depth_edges_km[-1], cut.depth_edges_km[0])
    axes.set_xlabel("Distance (km)", labelpad=2)
    axes.set_ylabel("Depth (km)")
    if cut.depth_edges_km[0] < 0.0 < cut.depth_edges_km[-1]:
        axes.axhline(0.0, color=INK, linewidth=0.4)


def _mark_discontinuities(
    axes: Axes, earth: ReferenceEarth, cut: SectionCut, height_in: float
) -> None:
    top, bottom = cut.depth_edges_km[[0, -1]]
    depths = np.asarray(earth.discontinuities_km)
    least = 0.09 / height_in * (bottom - top)
    labelled = -np.inf
    for depth in depths[(depths > max(top, 0.0)) & (depths < bottom)]:
        axes.axhline(depth, color=INK, linewidth=0.6, linestyle=(0, (5, 3)), label="discontinuity")
        if depth - labelled < least:
            continue
        labelled = depth
        axes.annotate(
            f"{depth:g} km",
            (1.0, depth),
            xycoords=("axes fraction", "data"),
            xytext=(3, 0),
            textcoords="offset points",
            va="center",
            fontsize=6,
        )


def _draw_strip(axes: Axes, line: SectionLine, where: Floats, band_km: float) -> None:
    along, across = line.project(where[:, 0], where[:, 1])
    near = (np.abs(across) <= band_km) & (along >= 0.0) & (along <= line.length_km)
    order = np.argsort(along[near])
    distance, height = along[near][order], -where[near, 2][order]
    axes.axhline(0.0, color=INK, linewidth=0.4)
    axes.plot(distance, height, "^", clip_on=False, zorder=4, **station_look(distance.size))
    low, high = min(0.0, height.min(initial=0.0)), max(0.5, height.max(initial=0.0))
    axes.set_ylim(low - 0.08 * (high - low), high + 0.12 * (high - low))
    axes.set_ylabel("Elev.\n(km)")
    axes.locator_params(axis="y", nbins=3)
    axes.tick_params(labelbottom=False, bottom=False)
    axes.spines[["top", "right", "bottom"]].set_visible(False)


def _label_ends(axes: Axes, line: SectionLine) -> None:
    for share, label, side in ((0.0, line.name, "left"), (1.0, f"{line.name}′", "right")):
        axes.annotate(
            label,
            (share, 1.0),
            xycoords="axes fraction",
            xytext=(0, 6),
            textcoords="offset points",
            ha=side,
            va="bottom",
            fontsize=9,
            fontweight="bold",
        )


def _draw_index_map(axes: Axes, grid: BlockGrid, line: SectionLine, where: Floats | None) -> None:
    view = map_view(grid)
    x, y = line.along(101)
    if where is not None:
        triangles = station_look(len(where), full_size=2.2)
        axes.plot(*view.place(where[:, 0], where[:, 1]), "^", zorder=3, **triangles)
    across, up = view.place(x, y)
    axes.plot(across, up, color="#b2182b", linewidth=1.2, zorder=4)
    view.open(axes, most_ticks=3)
    axes.tick_params(labelsize=6)
    draw_line_ends(axes, view, across, up, line.name)


def _draw_foot(figure: Figure, sheet: _Sheet, field: BlockField, *, has_stations: bool) -> None:
    left, _, width, _ = sheet.section_box
    bar = sheet.add(figure, left, 0.36, max(2.0, 0.75 * width), 0.1, label="colour bar")
    draw_colour_bar(bar, field.scale)
    figure.legend(
        handles=legend_marks(has_stations=has_stations, hidden_label=field.hidden_label),
        loc="center left",
        bbox_to_anchor=(1.0 - (_RIGHT + _MAP_WIDTH) / PAGE_WIDTH_IN, 0.38 / sheet.height),
        handlelength=1.2,
        borderpad=0,
        labelspacing=0.4,
    )

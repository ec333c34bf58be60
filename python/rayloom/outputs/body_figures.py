"""Bodies on paper: a map and two sections each, with outlines and intervals."""

from __future__ import annotations

from collections.abc import Sequence
from copy import copy
from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt

from rayloom.errors import InputError
from rayloom.model import BlockGrid
from rayloom.outputs.map_view import MapView, degree_label, draw_scale_bar, map_view, places
from rayloom.outputs.style import (
    NO_DATA_COLOUR,
    PAGE_WIDTH_IN,
    BlockField,
    draw_colour_bar,
    legend_marks,
    look,
    station_look,
)
from rayloom.units import EARTH_RADIUS_KM

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from rayloom.appraisal.bodies import Body, Interval
    from rayloom.survey import Stations

Floats = npt.NDArray[np.float64]
Flags = npt.NDArray[np.bool_]

MOST_BODIES: Final = 5
_LEFT, _RIGHT, _GAP = 0.5, 0.1, 0.5
_HEAD, _LABELS, _FOOT = 0.5, 0.46, 0.62
_OUTLINE: Final = "#111111"
_SHADE: Final = "#2f9e44"


def figure_bodies(
    grid: BlockGrid,
    field: BlockField,
    bodies: Sequence[Body],
    *,
    stations: Stations | npt.ArrayLike | None = None,
) -> Figure:
    """Draw each body on a map and two sections through its centroid.

    The outline is that of the blocks that reach half of the peak, on the map
    from all depths together. Green bands show the 90 % intervals of top and
    base, the cross that of the centroid.

    Parameters
    ----------
    grid : BlockGrid
        The blocks.
    field : BlockField
        What to colour: the mean model relative to the regional mean.
    bodies : sequence of Body
        The first `MOST_BODIES` are drawn.
    stations : Stations or array-like, shape (n, 3), optional
        Stations, or points x, y, depth_km in the frame.

    Returns
    -------
    Figure
        Axes labelled ``map``, ``along x`` and ``along y``, body by body.

    Raises
    ------
    InputError
        There is no body.
    """
    if not bodies:
        raise InputError("there is no body to draw", where="bodies")
    drawn = bodies[:MOST_BODIES]
    view = _window(grid, drawn, stations)
    where = None if stations is None else view.place(*places(grid.frame, stations).T[:2])
    with look():
        sheet = _Sheet(grid, view, len(drawn))
        figure = sheet.open()
        for row, body in enumerate(drawn):
            centre = _centre(body)
            _draw_map(sheet.axes(figure, row, 0), view, grid, field, body, where, centre)
            for column, axis in ((1, 0), (2, 1)):
                _draw_section(sheet.axes(figure, row, column), grid, field, body, centre, axis)
            figure.text(
                _LEFT / PAGE_WIDTH_IN,
                sheet.caption_height(row),
                _caption(body),
                va="top",
                fontsize=7,
            )
        bar = figure.add_axes(sheet.share(_LEFT, 0.36, 3.0, 0.1), label="colour bar")
        draw_colour_bar(bar, field.scale)
        figure.legend(
            handles=_legend(field, has_stations=where is not None),
            loc="center left",
            bbox_to_anchor=(0.58, 0.36 / sheet.height),
            ncols=2,
            handlelength=1.4,
            borderpad=0,
        )
    return figure


def _window(
    grid: BlockGrid, bodies: Sequence[Body], stations: Stations | npt.ArrayLike | None
) -> MapView:
    """Lay out the map about bodies and stations."""
    view = copy(map_view(grid))
    corners = np.array([*np.meshgrid(grid.x_edges, grid.y_edges, indexing="ij")]).reshape(2, -1).T
    columns = np.logical_or.reduce([body.region.domain.any(axis=2) for body in bodies])
    touched = np.pad(columns, ((0, 1), (0, 1))) | np.pad(columns, ((1, 0), (1, 0)))
    points = corners[touched.ravel()]
    if stations is not None:
        points = np.vstack([points, places(grid.frame, stations)[:, :2]])
    across, up = view.place(*points.T)
    margin = 0.08 * np.ptp(across)
    view.limits = (
        float(max(across.min() - margin, view.limits[0])),
        float(min(across.max() + margin, view.limits[1])),
        float(max(up.min() - margin, view.limits[2])),
        float(min(up.max() + margin, view.limits[3])),
    )
    return view


def _half_length_km(grid: BlockGrid) -> float:
    """Half of a section's length: four fifths of the depth of the blocks, or all there is."""
    widest = min(float(np.ptp(_edges_km(grid, axis))) for axis in (0, 1))
    return min(0.8 * float(np.ptp(grid.depth_edges_km)), 0.5 * widest)


class _Sheet:
    """Sizes of the sheet in inches: a row per body of a map and two sections."""

    def __init__(self, grid: BlockGrid, view: MapView, rows: int) -> None:
        room = PAGE_WIDTH_IN - _LEFT - _RIGHT - 2 * _GAP
        self.width = room / 3.0
        deep_km = float(np.ptp(grid.depth_edges_km))
        slope = deep_km / (2.0 * _half_length_km(grid))
        self.heights = [self.width * ratio for ratio in (view.height_over_width, slope, slope)]
        self.row_height = max(self.heights) + _HEAD + _LABELS
        self.height = rows * self.row_height + _FOOT

    def open(self) -> Figure:
        from matplotlib.figure import Figure

        return Figure(figsize=(PAGE_WIDTH_IN, self.height))

    def share(
        self, left: float, bottom: float, width: float, height: float
    ) -> tuple[float, float, float, float]:
        return (
            left / PAGE_WIDTH_IN,
            bottom / self.height,
            width / PAGE_WIDTH_IN,
            height / self.height,
        )

    def axes(self, figure: Figure, row: int, column: int) -> Axes:
        top = self.height - row * self.row_height - _HEAD
        left = _LEFT + column * (self.width + _GAP)
        tall = self.heights[column]
        label = ("map", "along x", "along y")[column]
        return figure.add_axes(self.share(left, top - tall, self.width, tall), label=label)

    def caption_height(self, row: int) -> float:
        return (self.height - row * self.row_height - 0.04) / self.height


def _centre(body: Body) -> Floats:
    return np.array([body.interval(name).estimate for name in ("x", "y", "depth_km")])


def _caption(body: Body) -> str:
    longitude, latitude = body.longitude_deg.estimate, body.latitude_deg.estimate
    place = f"{degree_label(round(longitude, 2), 'EW')} {degree_label(round(latitude, 2), 'NS')}"
    lines = [
        f"{body.name}: centroid {place}, depth {_spread(body.interval('depth_km'))} km, "
        f"peak {_spread(body.interval('peak_percent'), '+.1f')} %",
        f"top {_spread(body.interval('top_km'))} km, base {_spread(body.interval('base_km'))} km, "
        f"in {100.0 * body.existence_share:.0f} % of samples"
        + ("; may go on in blocks not resolved" if body.touches_edge else ""),
    ]
    if body.smearing.flagged:
        lines[1] += (
            f"; smeared towards {body.smearing.azimuth_deg:.0f}°, "
            f"{body.smearing.plunge_deg:.0f}° down"
        )
    return "\n".join(lines).replace("-", "−")


def _spread(interval: Interval, form: str = ".0f") -> str:
    return f"{interval.estimate:{form}} ({interval.low:{form}} to {interval.high:{form}})"


def _draw_map(
    axes: Axes,
    view: MapView,
    grid: BlockGrid,
    field: BlockField,
    body: Body,
    where: tuple[Floats, Floats] | None,
    centre: Floats,
) -> None:
    layer = int(np.clip(np.searchsorted(grid.depth_edges_km, centre[2]) - 1, 0, grid.shape[2] - 1))
    _colour(axes, *view.corners, field.values[:, :, layer], field.shown[:, :, layer], field)
    segments = _outline(np.asarray(body.core.any(axis=2)), grid.x_edges, grid.y_edges)
    lines = [np.column_stack(view.place(*segment.T)) for segment in segments]
    _draw_lines(axes, lines)
    if where is not None:
        axes.plot(*where, "^", zorder=4, **station_look(where[0].size))
    view.open(axes, most_ticks=3)
    low, high = (
        np.array([getattr(body.interval(name), end) for name in ("x", "y")])
        for end in ("low", "high")
    )
    for start, end in (
        ((low[0], centre[1]), (high[0], centre[1])),
        ((centre[0], low[1]), (centre[0], high[1])),
    ):
        ends = np.array([start, end])
        axes.plot(*view.place(*ends.T), color=_SHADE, linewidth=1.4, zorder=6)
    axes.set_title(f"{grid.depth_centres_km[layer]:.0f} km", pad=3)
    draw_scale_bar(axes, view, avoid=where)


def _draw_section(
    axes: Axes, grid: BlockGrid, field: BlockField, body: Body, centre: Floats, axis: int
) -> None:
    """Cut along x (axis 0) or y (axis 1) through the centroid."""
    other = 1 - axis
    edges = (grid.x_edges, grid.y_edges)[other]
    index = int(np.clip(np.searchsorted(edges, centre[other]) - 1, 0, grid.shape[other] - 1))
    along = _edges_km(grid, axis)
    values, shown = (np.take(array, index, axis=other) for array in (field.values, field.shown))
    _colour(axes, along, grid.depth_edges_km, values.T, shown.T, field)
    core = np.asarray(np.take(body.core, index, axis=other), dtype=bool)
    _draw_lines(axes, _outline(core, along, grid.depth_edges_km))
    for name in ("top_km", "base_km"):
        interval = body.interval(name)
        axes.axhspan(interval.low, interval.high, color=_SHADE, alpha=0.3, linewidth=0, zorder=3)
    name = "xy"[axis]
    here, interval = body.interval(name), body.interval("depth_km")
    across = np.interp([here.low, here.high], (grid.x_edges, grid.y_edges)[axis], along)
    middle = float(np.interp(here.estimate, (grid.x_edges, grid.y_edges)[axis], along))
    axes.plot(across, [interval.estimate] * 2, color=_SHADE, linewidth=1.4, zorder=6)
    axes.plot([middle] * 2, [interval.low, interval.high], color=_SHADE, linewidth=1.4, zorder=6)
    half = _half_length_km(grid)
    low = float(np.clip(middle - half, along[0], along[-1] - 2.0 * half))
    axes.set_xlim(low, low + 2.0 * half)
    axes.set_ylim(grid.depth_edges_km[-1], grid.depth_edges_km[0])
    axes.set_xlabel(f"along {name} (km)", labelpad=1)
    axes.set_ylabel("Depth (km)" if axis == 0 else "", labelpad=1)


def _edges_km(grid: BlockGrid, axis: int) -> Floats:
    """Edges along x or y from the middle of the frame, km at sea level."""
    edges = np.asarray((grid.x_edges, grid.y_edges)[axis])
    return edges if grid.frame.is_flat else np.radians(edges) * EARTH_RADIUS_KM


def _colour(
    axes: Axes, across: Floats, up: Floats, values: Floats, shown: Flags, field: BlockField
) -> None:
    from matplotlib.colors import ListedColormap

    hidden = np.ma.masked_where(shown, np.zeros(shown.shape))
    axes.pcolormesh(across, up, hidden, cmap=ListedColormap([NO_DATA_COLOUR]), rasterized=True)
    axes.pcolormesh(
        across,
        up,
        np.ma.masked_where(~shown, values),
        cmap=field.scale.colours,
        vmin=field.scale.lowest,
        vmax=field.scale.highest,
        rasterized=True,
    )


def _outline(inside: Flags, first: Floats, second: Floats) -> list[Floats]:
    """Edges between blocks inside and outside, each a (2, 2) array of ends."""
    padded = np.pad(inside, 1).astype(np.int8)
    segments = []
    for i, j in np.argwhere(np.diff(padded, axis=0)[:, 1:-1] != 0):
        segments.append(np.array([[first[i], second[j]], [first[i], second[j + 1]]]))
    for i, j in np.argwhere(np.diff(padded, axis=1)[1:-1] != 0):
        segments.append(np.array([[first[i], second[j]], [first[i + 1], second[j]]]))
    return segments


def _draw_lines(axes: Axes, segments: list[Floats]) -> None:
    from matplotlib.collections import LineCollection

    axes.add_collection(
        LineCollection(segments, colors=_OUTLINE, linewidths=0.9, zorder=5, label="outline")
    )


def _legend(field: BlockField, *, has_stations: bool) -> list[object]:
    from matplotlib.lines import Line2D
    from matplotlib.patches import Patch

    return [
        *legend_marks(has_stations=has_stations, hidden_label=field.hidden_label),
        Line2D([], [], color=_OUTLINE, linewidth=0.9, label="half of the peak"),
        Line2D([], [], color=_SHADE, linewidth=1.4, label="centroid, 90 %"),
        Patch(facecolor=_SHADE, alpha=0.3, label="top and base, 90 %"),
    ]

"""Figure of one survey inverted with straight, reference and bent rays."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from rayloom.model import BlockGrid, SlownessModel
from rayloom.outputs.map_view import MapView, map_view, places
from rayloom.outputs.style import (
    NO_DATA_COLOUR,
    PAGE_WIDTH_IN,
    ColourScale,
    draw_colour_bar,
    legend_marks,
    look,
    slow_red,
    station_look,
)

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from rayloom.survey import Stations

Floats = npt.NDArray[np.float64]
_LEFT, _RIGHT, _GAP, _TITLE, _FOOT = 0.62, 0.1, 0.1, 0.2, 0.78
_MOST_LAYERS = 3


def figure_ray_comparison(
    models: dict[str, SlownessModel],
    *,
    layers: Sequence[int],
    stations: Stations | npt.ArrayLike | None = None,
) -> Figure:
    """Draw the models side by side, and how far the others differ from the last.

    Parameters
    ----------
    models : dict of SlownessModel
        Models by the name of their rays, on the same blocks; the last is the one that the
        others are compared with.
    layers : sequence of int
        Layers to draw, at most three; one row each.
    stations : Stations or array-like, shape (n, 3), optional
        Stations, or points x, y, depth_km in the frame.

    Returns
    -------
    Figure
        A column for each model and one for each difference from the last.
    """
    from matplotlib.figure import Figure

    names = list(models)
    last = models[names[-1]]
    grid = last.grid
    fields = {name: model.perturbation_percent for name, model in models.items()}
    columns = [(f"{name} rays", fields[name]) for name in names]
    columns += [(f"{name} − {names[-1]}", fields[name] - fields[names[-1]]) for name in names[:-1]]
    shown = np.all([model.fields["hits"] > 0 for model in models.values()], axis=0)
    scale = _scale(last, [fields[name][shown] for name in names])
    view = map_view(grid)
    rows = list(layers)[:_MOST_LAYERS]
    width = (PAGE_WIDTH_IN - _LEFT - _RIGHT - (len(columns) - 1) * _GAP) / len(columns)
    height = width * view.height_over_width
    page = (PAGE_WIDTH_IN, len(rows) * (height + _GAP) + _TITLE + _FOOT)
    with look():
        figure = Figure(figsize=page)
        for row, layer in enumerate(rows):
            for column, (title, values) in enumerate(columns):
                box = (
                    (_LEFT + column * (width + _GAP)) / page[0],
                    1.0 - (_TITLE + (row + 1) * height + row * _GAP) / page[1],
                    width / page[0],
                    height / page[1],
                )
                axes = figure.add_axes(box)
                view.open(axes, left=column == 0, bottom=row == len(rows) - 1, most_ticks=3)
                axes.set_xlabel("")
                axes.set_ylabel(_depths(grid, layer) if column == 0 else "")
                if row == 0:
                    axes.set_title(title, pad=3)
                _draw(axes, view, values[:, :, layer], shown[:, :, layer], scale)
                _mark_stations(axes, view, grid, stations)
        _foot(figure, page, scale, has_stations=stations is not None)
    return figure


def _scale(model: SlownessModel, shown: Sequence[Floats]) -> ColourScale:
    values = np.abs(np.concatenate(list(shown)))
    typical = float(np.quantile(values, 0.997)) if values.size else 0.0
    limit = max(0.5, float(np.ceil(2.0 * typical) / 2.0))
    return ColourScale(
        label=f"dV{model.wave.lower()} relative to the regional mean, and its differences (%)",
        lowest=-limit,
        highest=limit,
        colours=slow_red(),
        ends=("slow", "fast"),
    )


def _depths(grid: BlockGrid, layer: int) -> str:
    top, bottom = grid.depth_edges_km[layer : layer + 2]
    return f"{top:.0f}–{bottom:.0f} km".replace("-", "−")


def _draw(
    axes: Axes,
    view: MapView,
    values: Floats,
    shown: npt.NDArray[np.bool_],
    scale: ColourScale,
) -> None:
    axes.set_facecolor(NO_DATA_COLOUR)
    axes.pcolormesh(
        *view.corners,
        np.ma.masked_where(~shown, values),
        cmap=scale.colours,
        vmin=scale.lowest,
        vmax=scale.highest,
        rasterized=True,
        zorder=2,
    )


def _mark_stations(
    axes: Axes, view: MapView, grid: BlockGrid, stations: Stations | npt.ArrayLike | None
) -> None:
    if stations is None:
        return
    across, up = view.place(*places(grid.frame, stations).T[:2])
    axes.plot(across, up, "^", zorder=4, **station_look(2 * across.size, full_size=2.0))


def _foot(
    figure: Figure, page: tuple[float, float], scale: ColourScale, *, has_stations: bool
) -> None:
    bar = figure.add_axes((_LEFT / page[0], 0.34 / page[1], 3.0 / page[0], 0.1 / page[1]))
    draw_colour_bar(bar, scale)
    figure.legend(
        handles=legend_marks(has_stations=has_stations, hidden_label="no rays of some kind"),
        loc="center left",
        bbox_to_anchor=((_LEFT + 3.4) / page[0], 0.36 / page[1]),
        handlelength=1.2,
    )

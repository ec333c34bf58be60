"""What was put into a restoration and what came back, side by side."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt

from rayloom.appraisal import Restoration
from rayloom.model import SlownessModel
from rayloom.outputs.map_view import MapView, draw_scale_bar, map_view
from rayloom.outputs.slices import choose_layers
from rayloom.outputs.style import (
    NO_DATA_COLOUR,
    PAGE_WIDTH_IN,
    ColourScale,
    draw_colour_bar,
    legend_marks,
    look,
    slow_red,
)

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

Floats = npt.NDArray[np.float64]
MOST_LAYERS: Final = 4
_LEFT, _RIGHT, _GAP, _TITLE, _FOOT = 0.62, 0.1, 0.1, 0.24, 0.92


@dataclass(frozen=True)
class _Sheet:
    """Sizes of the page in inches."""

    columns: int
    ratio: float

    @property
    def panel(self) -> float:
        return (PAGE_WIDTH_IN - _LEFT - _RIGHT - (MOST_LAYERS - 1) * _GAP) / MOST_LAYERS

    @property
    def height(self) -> float:
        return 2.0 * (self.panel * self.ratio + _TITLE) + _FOOT

    def box(self, row: int, column: int) -> tuple[float, float, float, float]:
        tall = self.panel * self.ratio
        left = _LEFT + column * (self.panel + _GAP)
        bottom = self.height - (row + 1) * (tall + _TITLE)
        return (
            left / PAGE_WIDTH_IN,
            bottom / self.height,
            self.panel / PAGE_WIDTH_IN,
            tall / self.height,
        )


def figure_restoration(
    restoration: Restoration,
    model: SlownessModel,
    *,
    depths_km: Sequence[float] | None = None,
) -> Figure:
    """Draw a structure and its restoration in up to four layers, on one scale.

    Parameters
    ----------
    restoration : Restoration
        What was put in and what came back.
    model : SlownessModel
        The model; blocks without rays are greyed in what came back.
    depths_km : sequence of float, optional
        Depths wanted; the first four count.

    Returns
    -------
    Figure
        Upper row: put in; lower row: found.
    """
    from matplotlib.figure import Figure

    grid = model.grid
    hits = model.fields.get("hits")
    shown = np.ones(grid.shape, dtype=bool) if hits is None else np.asarray(hits) > 0
    layers = _layers(restoration, model, shown, depths_km)
    view = map_view(grid)
    limit = max(0.5, float(np.ceil(np.max(np.abs(restoration.truth_percent)) - 1e-6)))
    scale = ColourScale(
        f"dV{model.wave.lower()} (%)", -limit, limit, slow_red(), ends=("slow", "fast")
    )
    sheet = _Sheet(len(layers), view.height_over_width)
    with look():
        figure = Figure(figsize=(PAGE_WIDTH_IN, sheet.height))
        for row, (values, seen) in enumerate(
            (
                (restoration.truth_percent, np.ones_like(shown)),
                (restoration.restored_percent, shown),
            )
        ):
            for column, layer in enumerate(layers):
                axes = figure.add_axes(sheet.box(row, column))
                view.open(axes, left=column == 0, bottom=row == 1, most_ticks=3)
                _draw(axes, view, values[:, :, layer], seen[:, :, layer], scale)
                if row == 0:
                    top, bottom = grid.depth_edges_km[layer : layer + 2]
                    axes.set_title(f"{top:.0f} to {bottom:.0f} km".replace("-", "−"), pad=3)
                if column == 0:
                    axes.set_ylabel(("put in", "came back")[row], labelpad=4)
                if row == 0 and column == 0:
                    draw_scale_bar(axes, view)
        _foot(figure, sheet, scale)
    return figure


def _layers(
    restoration: Restoration,
    model: SlownessModel,
    shown: npt.NDArray[np.bool_],
    depths_km: Sequence[float] | None,
) -> list[int]:
    """Layers with structure, evenly spread, unless depths are named."""
    if depths_km is not None:
        return choose_layers(model.grid, shown, depths_km)[:MOST_LAYERS]
    power = np.sum(restoration.truth_percent**2 * shown, axis=(0, 1))
    full = np.flatnonzero(power >= 0.2 * power.max(initial=0.0))
    picks = np.linspace(0, full.size - 1, min(MOST_LAYERS, full.size)).round().astype(int)
    return [int(layer) for layer in full[np.unique(picks)]]


def _draw(
    axes: Axes,
    view: MapView,
    values: Floats,
    seen: npt.NDArray[np.bool_],
    scale: ColourScale,
) -> None:
    axes.set_facecolor(NO_DATA_COLOUR)
    axes.pcolormesh(
        *view.corners,
        np.ma.masked_where(~seen, values),
        cmap=scale.colours,
        vmin=scale.lowest,
        vmax=scale.highest,
        rasterized=True,
        zorder=2,
    )


def _foot(figure: Figure, sheet: _Sheet, scale: ColourScale) -> None:
    box = (_LEFT / PAGE_WIDTH_IN, 0.36 / sheet.height, 3.0 / PAGE_WIDTH_IN, 0.1 / sheet.height)
    draw_colour_bar(figure.add_axes(box), scale)
    figure.legend(
        handles=legend_marks(has_stations=False, hidden_label="no rays"),
        loc="lower right",
        bbox_to_anchor=(1.0 - _RIGHT / PAGE_WIDTH_IN, 0.2 / sheet.height),
    )

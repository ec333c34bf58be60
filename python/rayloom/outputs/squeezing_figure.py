"""Squeezing on paper: what p-values say of the depth extent of each body."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Final

from rayloom.errors import InputError
from rayloom.outputs.style import INK, PAGE_WIDTH_IN, look

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from rayloom.appraisal.bodies import BodyExtent

_COLOURS: Final = {"below": "#b2182b", "above": "#2166ac"}
_MOST_COLUMNS: Final = 3
_LEVEL: Final = 0.01


def figure_squeezing(extents: Mapping[str, BodyExtent]) -> Figure:
    """Draw p-values of every cut against its depth, one panel per body.

    Parameters
    ----------
    extents : mapping of str to BodyExtent
        Squeezing by the name of the body.

    Returns
    -------
    Figure
        Axes labelled with the names of the bodies.

    Raises
    ------
    InputError
        There is no body.
    """
    if not extents:
        raise InputError("no body was squeezed", where="extents")
    from matplotlib.figure import Figure

    columns = min(_MOST_COLUMNS, len(extents))
    rows = -(-len(extents) // columns)
    with look():
        figure = Figure(
            figsize=(PAGE_WIDTH_IN * max(columns, 2) / _MOST_COLUMNS, 2.9 * rows + 0.4),
            layout="constrained",
        )
        panels = figure.subplots(rows, columns, squeeze=False)
        for axes in panels.ravel()[len(extents) :]:
            axes.set_visible(False)
        for axes, (name, extent) in zip(panels.ravel(), extents.items(), strict=False):
            axes.set_label(name)
            _draw_extent(axes, name, extent)
        handles, labels = panels[0, 0].get_legend_handles_labels()
        figure.legend(handles, labels, loc="outside lower center", ncols=2)
    return figure


def _draw_extent(axes: Axes, name: str, extent: BodyExtent) -> None:
    for scan in (extent.below, extent.above):
        axes.plot(
            scan.p_value,
            scan.depth_km,
            marker="o",
            markersize=2.5,
            linewidth=1.0,
            color=_COLOURS[scan.side],
            label=f"nothing {scan.side} this depth",
        )
    axes.axvline(_LEVEL, color=INK, linewidth=0.6, linestyle=(0, (4, 3)), label="p = 0.01")
    axes.axhspan(
        extent.top_km, extent.base_km, color=INK, alpha=0.1, linewidth=0, label="body (median)"
    )
    axes.set_xscale("log")
    axes.set_xlim(2e-3, 1.3)
    axes.invert_yaxis()
    axes.set_title(name, pad=3)
    axes.set_xlabel("p-value (low: the data object)", labelpad=2)
    axes.set_ylabel("Depth of the cut (km)", labelpad=2)

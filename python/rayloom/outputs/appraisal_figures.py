"""Maps of an appraisal: standard errors, coverage, and the model where data bear on it."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from rayloom.model import SlownessModel
from rayloom.outputs.appraisal_fields import directional_field, error_field
from rayloom.outputs.map_view import MapView, map_view
from rayloom.outputs.slices import choose_layers, figure_depth_slices
from rayloom.outputs.style import INK, look, perturbation_field

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from rayloom.survey import Stations

Floats = npt.NDArray[np.float64]


def figure_standard_errors(
    model: SlownessModel,
    sigma_percent: Floats,
    *,
    stations: Stations | npt.ArrayLike | None = None,
    depths_km: Sequence[float] | None = None,
) -> Figure:
    """Draw maps of the standard error of the perturbation.

    Parameters
    ----------
    model : SlownessModel
        The model.
    sigma_percent : (nx, ny, nz) array
        Standard errors, percent.
    stations, depths_km
        As for :func:`rayloom.outputs.figure_depth_slices`.
    """
    field = error_field(model, sigma_percent)
    return figure_depth_slices(model, stations=stations, depths_km=depths_km, field=field)


def figure_directional_coverage(
    model: SlownessModel,
    directional: Floats,
    *,
    stations: Stations | npt.ArrayLike | None = None,
    depths_km: Sequence[float] | None = None,
) -> Figure:
    """Draw maps of the directional coverage.

    Parameters
    ----------
    model : SlownessModel
        The model.
    directional : (nx, ny, nz) array
        Smallest over largest eigenvalue, NaN without rays.
    stations, depths_km
        As for :func:`rayloom.outputs.figure_depth_slices`.
    """
    field = directional_field(model, directional)
    return figure_depth_slices(model, stations=stations, depths_km=depths_km, field=field)


def figure_resolved(
    model: SlownessModel,
    resolution: Floats,
    *,
    resolved_from: float,
    stations: Stations | npt.ArrayLike | None = None,
    depths_km: Sequence[float] | None = None,
    colour_limit_percent: float | None = None,
) -> Figure:
    """Draw the depth slices with all faded that the data hardly bear on.

    Parameters
    ----------
    model : SlownessModel
        The model.
    resolution : (nx, ny, nz) array
        1 − (σ_posterior/σ_prior)².
    resolved_from : float
        Blocks under this are faded and hatched.
    stations, depths_km, colour_limit_percent
        As for :func:`rayloom.outputs.figure_depth_slices`.
    """
    field = perturbation_field(model, colour_limit_percent=colour_limit_percent)
    figure = figure_depth_slices(model, stations=stations, depths_km=depths_km, field=field)
    layers = choose_layers(model.grid, field.shown, depths_km)
    view = map_view(model.grid)
    with look():
        for axes, layer in zip(figure.axes, layers, strict=False):
            veil = field.shown[:, :, layer] & (resolution[:, :, layer] < resolved_from)
            fade(axes, view, veil)
        _explain_veil(figure, resolved_from)
    return figure


def fade(axes: Axes, view: MapView, veil: npt.NDArray[np.bool_]) -> None:
    """Draw a white veil with fine hatching over some blocks of a map.

    Parameters
    ----------
    axes : Axes
        The map.
    view : MapView
        Its plane.
    veil : (nx, ny) bool array
        The blocks.
    """
    from matplotlib.collections import PolyCollection

    across, up = view.corners
    corners = np.stack([across, up], axis=-1)
    outlines = np.stack(
        [corners[:-1, :-1], corners[1:, :-1], corners[1:, 1:], corners[:-1, 1:]], axis=2
    )
    axes.add_collection(
        PolyCollection(
            list(outlines[veil]),
            facecolors=(1.0, 1.0, 1.0, 0.72),
            edgecolors="none",
            zorder=2.2,
        ),
        autolim=False,
    )
    axes.add_collection(
        PolyCollection(
            list(outlines[veil]),
            facecolors="none",
            edgecolors=(0.45, 0.45, 0.45, 0.55),
            hatch="//////",
            linewidths=0.0,
            zorder=2.3,
        ),
        autolim=False,
    )


def _explain_veil(figure: Figure, resolved_from: float) -> None:
    from matplotlib.patches import Patch

    mark = Patch(
        facecolor="white",
        edgecolor=(0.45, 0.45, 0.45, 0.8),
        hatch="//////",
        linewidth=0.4,
        label=f"data take away less than {100.0 * resolved_from:g} % of the prior variance",
    )
    legend = figure.legend(
        handles=[mark], loc="lower right", bbox_to_anchor=(0.99, 0.0), fontsize=6.5
    )
    for text in legend.get_texts():
        text.set_color(INK)

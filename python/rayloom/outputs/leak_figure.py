"""Leak tests on paper: what anomalies outside would look like inside."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt

from rayloom.errors import InputError
from rayloom.model import BlockGrid
from rayloom.outputs.style import COLUMN_WIDTH_IN, INK, PAGE_WIDTH_IN, look, slow_red
from rayloom.units import EARTH_RADIUS_KM

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.collections import QuadMesh
    from matplotlib.figure import Figure

    from rayloom.appraisal.leaks import Leak

Floats = npt.NDArray[np.float64]

_ROW_IN: Final = 1.45


def figure_leaks(grid: BlockGrid, leaks: Sequence[Leak], *, crust_km: float = 35.0) -> Figure:
    """Draw each inversion of each anomaly as seen from the side.

    Every panel shows, along x and depth, the strongest perturbation of all
    blocks along y; all panels share one scale.

    Parameters
    ----------
    grid : BlockGrid
        The blocks.
    leaks : sequence of Leak
        The tests: as many of each anomaly.
    crust_km : float, optional
        Base of the crust, marked by a line, km.

    Returns
    -------
    Figure
        A row of axes per anomaly.

    Raises
    ------
    InputError
        There is no test.
    """
    if not leaks:
        raise InputError("there is no leak test to draw", where="leaks")
    from matplotlib.figure import Figure

    names = list(dict.fromkeys(leak.source.name for leak in leaks))
    columns = len(leaks) // len(names)
    limit = max(0.1, float(np.max([np.abs(_from_the_side(leak)).max() for leak in leaks])))
    with look():
        figure = Figure(
            figsize=(max(COLUMN_WIDTH_IN, PAGE_WIDTH_IN), _ROW_IN * len(names) + 0.9),
            layout="constrained",
        )
        panels = figure.subplots(len(names), columns, squeeze=False, sharex=True, sharey=True)
        for axes, leak in zip(panels.ravel(), leaks, strict=True):
            mesh = _draw_leak(axes, grid, leak, limit, crust_km)
        for axes in panels[:, 0]:
            axes.set_ylabel("Depth (km)", labelpad=1)
        for axes in panels[-1]:
            axes.set_xlabel("along x (km)", labelpad=1)
        bar = figure.colorbar(mesh, ax=panels, location="bottom", shrink=0.5, aspect=40)
        bar.set_label("strongest dV along y, relative to the regional mean (%)", labelpad=1)
    return figure


def _from_the_side(leak: Leak) -> Floats:
    """Strongest perturbation along y with its sign, (nx, nz)."""
    values = leak.inside_percent
    strongest = np.argmax(np.abs(values), axis=1)
    return np.asarray(np.take_along_axis(values, strongest[:, None, :], axis=1)[:, 0])


def _draw_leak(axes: Axes, grid: BlockGrid, leak: Leak, limit: float, crust_km: float) -> QuadMesh:
    x_km = grid.x_edges if grid.frame.is_flat else np.radians(grid.x_edges) * EARTH_RADIUS_KM
    mesh = axes.pcolormesh(
        x_km,
        grid.depth_edges_km,
        _from_the_side(leak).T,
        cmap=slow_red(),
        vmin=-limit,
        vmax=limit,
        rasterized=True,
    )
    axes.axhline(crust_km, color=INK, linewidth=0.5, linestyle=(0, (4, 3)))
    axes.set_ylim(grid.depth_edges_km[-1], grid.depth_edges_km[0])
    terms = "terms" if leak.station_terms else "no terms"
    crust = "free crust" if leak.crust_free else "fixed crust"
    axes.set_title(
        f"{leak.source.name}: {terms}, {crust}\n"
        f"peak below crust {leak.peak_percent:+.2f} %".replace("-", "−"),
        fontsize=6.0,
        pad=2,
    )
    return mesh

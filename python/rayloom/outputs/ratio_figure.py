"""Maps of how S velocity changes where P velocity does: :func:`figure_wave_ratio`."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Final

from rayloom.model.wave_ratio import WaveRatio
from rayloom.outputs.slices import figure_depth_slices
from rayloom.outputs.style import BlockField, ColourScale

if TYPE_CHECKING:
    import numpy.typing as npt
    from matplotlib.figure import Figure

    from rayloom.survey import Stations

SCALE_ENDS: Final = (0.0, 3.0)
"""Ends of the colour scale: what elastic effects of temperature and composition make
lies between 1 and 2.5 (common practice), so values at the ends ask for a second look."""


def ratio_field(ratio: WaveRatio) -> BlockField:
    """Prepare the ratio for drawing; blocks outside its mask are grey.

    Parameters
    ----------
    ratio : WaveRatio
        P and S side by side.

    Returns
    -------
    BlockField
    """
    from cmcrameri import cm

    scale = ColourScale(
        label="d ln Vs / d ln Vp",
        lowest=SCALE_ENDS[0],
        highest=SCALE_ENDS[1],
        colours=cm.batlow,
    )
    return BlockField(
        values=ratio.dlnvs_dlnvp,
        shown=ratio.resolved,
        scale=scale,
        hidden_label=f"fewer than {ratio.min_hits} rays of P or S, or "
        f"|dVp| below {ratio.min_percent:g} %",
    )


def figure_wave_ratio(
    ratio: WaveRatio,
    *,
    stations: Stations | npt.ArrayLike | None = None,
    depths_km: Sequence[float] | None = None,
) -> Figure:
    """Draw maps of d ln Vs / d ln Vp at several depths on one page.

    Parameters
    ----------
    ratio : WaveRatio
        P and S side by side.
    stations : Stations or array-like, shape (n, 3), optional
        Stations, or points x, y, depth_km in the frame.
    depths_km : sequence of float, optional
        Depths wanted; see :func:`rayloom.outputs.slices.choose_layers`.

    Returns
    -------
    Figure

    Raises
    ------
    InputError
        A depth lies outside the grid.
    """
    return figure_depth_slices(
        ratio.p_model, stations=stations, depths_km=depths_km, field=ratio_field(ratio)
    )

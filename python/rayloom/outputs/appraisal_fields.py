"""What an appraisal colours: errors, resolution and coverage on their scales."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from rayloom.model import SlownessModel
from rayloom.outputs.style import BlockField, ColourScale

if TYPE_CHECKING:
    from matplotlib.colors import Colormap

Floats = npt.NDArray[np.float64]


def error_field(model: SlownessModel, sigma_percent: Floats) -> BlockField:
    """Prepare standard errors for drawing, from the smallest to the largest.

    Parameters
    ----------
    model : SlownessModel
        The model; blocks without rays are greyed.
    sigma_percent : (nx, ny, nz) array
        Standard errors of the velocity perturbation, percent.
    """
    shown = _with_rays(model)
    ends = np.quantile(sigma_percent[shown], (0.003, 0.997)) if shown.any() else (0.0, 1.0)
    lowest = float(np.floor(10.0 * ends[0]) / 10.0)
    scale = ColourScale(
        label=f"standard error of dV{model.wave.lower()} (%)",
        lowest=lowest,
        highest=max(lowest + 0.1, float(np.ceil(10.0 * ends[1]) / 10.0)),
        colours=_pale_to_dark(),
        ends=("certain", "uncertain"),
    )
    return BlockField(values=sigma_percent, shown=shown, scale=scale)


def directional_field(model: SlownessModel, directional: Floats) -> BlockField:
    """Prepare the directional coverage for drawing on a scale of powers of ten.

    Parameters
    ----------
    model : SlownessModel
        The model; blocks without rays are greyed.
    directional : (nx, ny, nz) array
        Smallest over largest eigenvalue of the direction tensor, NaN without rays.
    """
    shown = _with_rays(model) & np.isfinite(directional)
    with np.errstate(divide="ignore", invalid="ignore"):
        powers = np.log10(np.where(shown, directional, np.nan))
    scale = ColourScale(
        label="directional coverage, log10 of smallest over largest eigenvalue",
        lowest=-4.0,
        highest=0.0,
        colours=_dark_to_pale(),
        ends=("one plane", "all directions"),
    )
    return BlockField(np.maximum(powers, -9.0), shown, scale)


def _with_rays(model: SlownessModel) -> npt.NDArray[np.bool_]:
    hits = model.fields.get("hits")
    return np.ones(model.grid.shape, dtype=bool) if hits is None else np.asarray(hits) > 0


def _pale_to_dark() -> Colormap:
    """Crameri's `lapaz`, reversed: small values pale."""
    from cmcrameri import cm

    colours: Colormap = cm.lapaz_r
    return colours


def _dark_to_pale() -> Colormap:
    from cmcrameri import cm

    colours: Colormap = cm.lapaz
    return colours

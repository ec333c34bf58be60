"""A grid suggested from the stations, the rays and the reference Earth."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np

from rayloom.model.box import DEGREE_DIGITS, Box
from rayloom.model.grid import BlockGrid
from rayloom.model.network import NetworkExtent, network_extent
from rayloom.model.ray_offset import ray_offset_deg
from rayloom.model.settings import GridSettings, SuggestionSettings
from rayloom.units import KM_PER_DEGREE

if TYPE_CHECKING:
    from rayloom.earth import ReferenceEarth
    from rayloom.survey import Survey

DEPTH_PER_APERTURE: Final = 0.8
SHALLOWEST_BASE_KM: Final = 150.0
DEEPEST_BASE_KM: Final = 660.0
BASE_ROUNDING_KM: Final = 10.0

FINEST_KM: Final = 10.0
COARSEST_KM: Final = 60.0

SHALLOW_RAY_PERCENTILE: Final = 90.0
LEAST_PADDING_DEG: Final = 1.5
MOST_PADDING_DEG: Final = 8.0

CLEARANCE_KM: Final = 0.05
"""Least height of the top edge above the highest sensor."""


@dataclass(frozen=True)
class GridSuggestion:
    """A suggested grid and why it is so.

    Attributes
    ----------
    grid : BlockGrid
        The grid.
    settings : GridSettings
        The same grid in writing.
    reasons : tuple of str
        One line per choice, in words.
    """

    grid: BlockGrid
    settings: GridSettings
    reasons: tuple[str, ...]


@dataclass(frozen=True)
class _Choice:
    """A number and the reason for it."""

    value: float
    reason: str


def suggest_grid(
    survey: Survey, earth: ReferenceEarth, settings: SuggestionSettings | None = None
) -> GridSuggestion:
    """Suggest a block grid on the sphere for a survey of distant earthquakes.

    Parameters
    ----------
    survey : Survey
        Stations, events and picks; only stations with picks count.
    earth : ReferenceEarth
        The one-dimensional model, whose discontinuities become block edges.
    settings : SuggestionSettings, optional
        Wishes; whatever is not given follows from the survey.

    Returns
    -------
    GridSuggestion
        Grid, the same grid as settings, and the reasons.

    Raises
    ------
    InputError
        If fewer than three sites have picks, they span more than 90°, or no pick tells
        how shallow the rays are.

    Notes
    -----
    The numbers are common practice in teleseismic work, not laws:

    - base at 0.8 of the aperture, since crossing rays reach about 0.7 to 1 apertures
      deep, kept within 150 and 660 km;
    - inner blocks half the median station spacing wide, within 10 and 60 km, or wider
      where the budget of blocks asks for it;
    - blocks as thick as wide, within 10 and 20 km, with an edge on every discontinuity;
    - padding as wide as the shallowest tenth of the rays needs at the base, at least
      1.5° beyond the outermost stations, in blocks that widen outward.
    """
    wishes = settings or SuggestionSettings()
    network = network_extent(survey, azimuth_deg=wishes.azimuth_deg)
    top = _top(network)
    base = _base(network, wishes)
    padding = _padding(survey, earth, base.value, wishes)
    box = Box(
        network=network,
        earth=earth,
        top_km=top.value,
        base_km=base.value,
        padding_deg=padding.value,
        padding_growth=wishes.padding_growth,
        thickness_km=wishes.block_thickness_km,
    )
    spec, spacing = _spacing(network, box, wishes)
    grid = BlockGrid.from_spec(spec)
    reasons = (_place(network), top.reason, base.reason, padding.reason, spacing, _size(grid))
    return GridSuggestion(grid=grid, settings=spec, reasons=reasons)


def _place(network: NetworkExtent) -> str:
    frame = network.frame
    return (
        f"Centre {frame.longitude_deg:g}° E, {frame.latitude_deg:g}° N: middle of "
        f"{network.site_count} sites with picks, which span "
        f"{2 * network.half_x_deg * KM_PER_DEGREE:.0f} × "
        f"{2 * network.half_y_deg * KM_PER_DEGREE:.0f} km."
    )


def _top(network: NetworkExtent) -> _Choice:
    height = max(np.ceil(network.highest_km + CLEARANCE_KM), 0.0)
    return _Choice(
        0.0 - height,
        f"Top {height:g} km above sea level: the highest sensor is at "
        f"{network.highest_km:.2f} km.",
    )


def _base(network: NetworkExtent, wishes: SuggestionSettings) -> _Choice:
    if wishes.depth_km is not None:
        return _Choice(wishes.depth_km, f"Base at {wishes.depth_km:g} km: as wished.")
    wanted = DEPTH_PER_APERTURE * network.aperture_km
    rounded = BASE_ROUNDING_KM * round(wanted / BASE_ROUNDING_KM)
    base = float(np.clip(rounded, SHALLOWEST_BASE_KM, DEEPEST_BASE_KM))
    return _Choice(
        base,
        f"Base at {base:g} km: {DEPTH_PER_APERTURE:g} of the aperture of "
        f"{network.aperture_km:.0f} km, within {SHALLOWEST_BASE_KM:g} and {DEEPEST_BASE_KM:g} km "
        "(common practice: rays cross down to 0.7 to 1 apertures).",
    )


def _padding(
    survey: Survey, earth: ReferenceEarth, base_km: float, wishes: SuggestionSettings
) -> _Choice:
    if wishes.padding_km is not None:
        degrees = wishes.padding_km / KM_PER_DEGREE
        return _Choice(degrees, f"Padding {wishes.padding_km:g} km: as wished.")
    offset = ray_offset_deg(survey, earth, depth_km=base_km, percentile=SHALLOW_RAY_PERCENTILE)
    padding = float(np.clip(offset, LEAST_PADDING_DEG, MOST_PADDING_DEG))
    rays = (
        f"{SHALLOW_RAY_PERCENTILE:g} % of the rays cross the base within {offset:.1f}° of "
        "their station"
        if np.isfinite(offset)
        else "the shallowest rays turn above the base and come in through the sides"
    )
    return _Choice(
        padding,
        f"Padding {padding:.1f}° ({padding * KM_PER_DEGREE:.0f} km) beyond the outermost "
        f"stations: {rays}; kept within {LEAST_PADDING_DEG:g}° and {MOST_PADDING_DEG:g}°.",
    )


def _spacing(
    network: NetworkExtent, box: Box, wishes: SuggestionSettings
) -> tuple[GridSettings, str]:
    """Choose the width of the inner blocks; return the grid in writing and the reason."""
    half_km = float(np.clip(0.5 * network.spacing_km, FINEST_KM, COARSEST_KM))
    wanted_km = half_km if wishes.spacing_km is None else wishes.spacing_km
    least = 10.0**-DEGREE_DIGITS
    wanted = max(round(wanted_km / KM_PER_DEGREE, DEGREE_DIGITS), least)
    step, spec = wanted, box.settings(wanted)
    if wishes.spacing_km is not None:
        return spec, f"Inner blocks {_width(step)} wide: as wished."
    while BlockGrid.from_spec(spec).block_count > wishes.block_budget:
        step = round(step + least, DEGREE_DIGITS)
        spec = box.settings(step)
    reason = (
        f"Inner blocks {_width(step)} wide: half the median station spacing of "
        f"{network.spacing_km:.0f} km, within {FINEST_KM:g} and {COARSEST_KM:g} km"
    )
    if step > wanted:
        reason += (
            f", would be {_width(wanted)}; widened to stay within {wishes.block_budget} blocks"
        )
    return spec, f"{reason}."


def _width(step_deg: float) -> str:
    return f"{step_deg:g}° ({step_deg * KM_PER_DEGREE:.0f} km)"


def _size(grid: BlockGrid) -> str:
    nx, ny, nz = grid.shape
    return (
        f"{nx} × {ny} × {nz} = {grid.block_count} blocks, at most "
        f"{grid.widths.depth_km.max():g} km thick, with edges on the discontinuities of the "
        "reference Earth."
    )

"""Test structures: what is put into a restoration.

:func:`pattern_percent` turns settings of one pattern into a velocity
perturbation at any points, so that one pattern fills blocks of any size.
"""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, Literal

import numpy as np
from numpy.typing import NDArray
from pydantic import BaseModel, ConfigDict, Field, model_validator

from rayloom.appraisal.rowspace import Floats
from rayloom.errors import InputError
from rayloom.model import BlockGrid, SlownessModel
from rayloom.units import EARTH_RADIUS_KM

Positive = Annotated[float, Field(gt=0.0, allow_inf_nan=False)]
NotNegative = Annotated[float, Field(ge=0.0, allow_inf_nan=False)]
Finite = Annotated[float, Field(allow_inf_nan=False)]
Name = Annotated[str, Field(min_length=1, max_length=40, pattern=r"^[A-Za-z0-9 _-]+$")]

LARGEST_PERCENT = 30.0
"""Perturbations beyond this are no test of a linearised inversion."""

_Percent = Annotated[float, Field(ge=-LARGEST_PERCENT, le=LARGEST_PERCENT)]


class ColumnSettings(BaseModel):
    """An upright round column."""

    model_config = ConfigDict(extra="forbid", frozen=True)

    centre: tuple[Finite, Finite] = Field(
        description="Longitude and latitude, degrees; x and y in km with a flat frame."
    )
    radius_km: Positive = Field(description="Radius, km.")
    depth_km: tuple[Finite, Finite] = Field(description="Top and bottom, km.")
    amplitude_percent: _Percent = Field(description="Velocity perturbation, percent.")

    @model_validator(mode="after")
    def _top_first(self) -> ColumnSettings:
        _require_rising(self.depth_km)
        return self


class SlabSettings(BaseModel):
    """A dipping sheet of constant thickness."""

    model_config = ConfigDict(extra="forbid", frozen=True)

    centre: tuple[Finite, Finite] = Field(
        description="Longitude and latitude of the middle of its upper edge, degrees; x and y "
        "in km with a flat frame."
    )
    strike_deg: Finite = Field(
        description="Azimuth of the upper edge, degrees clockwise from north (from y with a flat "
        "frame); the sheet dips to the right of it."
    )
    dip_deg: Annotated[float, Field(gt=0.0, le=90.0)] = Field(description="Dip, degrees.")
    length_km: Positive = Field(description="Length along strike, km.")
    thickness_km: Positive = Field(description="Thickness at right angles to the sheet, km.")
    depth_km: tuple[Finite, Finite] = Field(description="Top and bottom, km.")
    amplitude_percent: _Percent = Field(description="Velocity perturbation, percent.")

    @model_validator(mode="after")
    def _top_first(self) -> SlabSettings:
        _require_rising(self.depth_km)
        return self


class PatternSettings(BaseModel):
    """One structure whose restoration is tried.

    ``checkerboard`` and ``spikes`` fill the box; ``bodies`` are columns and slabs
    placed at will; ``model`` is the perturbation of a netCDF model.
    """

    model_config = ConfigDict(extra="forbid", frozen=True)

    name: Name = Field(description="Name in figures and tables.")
    kind: Literal["checkerboard", "spikes", "bodies", "model"] = Field(
        description='"checkerboard", "spikes", "bodies" or "model".'
    )
    amplitude_percent: _Percent = Field(
        default=3.0, description="Perturbation of checkerboards and spikes, percent."
    )
    size_km: tuple[Positive, Positive] | None = Field(
        default=None,
        description="Width and height of a cell, km; four blocks each if not given.",
    )
    gap_km: tuple[NotNegative, NotNegative] | None = Field(
        default=None,
        description="Empty space between cells across and downwards, km; none in a checkerboard "
        "and the size of a cell between spikes if not given.",
    )
    columns: tuple[ColumnSettings, ...] = Field(default=(), description="Columns of bodies.")
    slabs: tuple[SlabSettings, ...] = Field(default=(), description="Slabs of bodies.")
    file: Path | None = Field(default=None, description="netCDF model of kind model.")

    @model_validator(mode="after")
    def _kind_has_what_it_needs(self) -> PatternSettings:
        if self.kind == "bodies" and not (self.columns or self.slabs):
            raise ValueError('a pattern of kind "bodies" needs columns or slabs')
        if (self.kind == "model") != (self.file is not None):
            raise ValueError('file belongs to a pattern of kind "model", which needs it')
        return self


def pattern_percent(
    pattern: PatternSettings,
    grid: BlockGrid,
    points: Floats,
    *,
    model: SlownessModel | None = None,
) -> Floats:
    """Work out the velocity perturbation of a pattern at points.

    Parameters
    ----------
    pattern : PatternSettings
        The pattern.
    grid : BlockGrid
        Blocks of the inversion: the frame, and the default size of cells.
    points : (n, 3) array
        x, y in the frame and depth_km.
    model : SlownessModel, optional
        The model of a pattern of kind ``model``.

    Returns
    -------
    (n,) array
        Percent.

    Raises
    ------
    InputError
        If a pattern of kind ``model`` comes without its model.
    """
    if pattern.kind == "model":
        if model is None:
            raise InputError(f"the pattern {pattern.name!r} needs its model")
        return _of_model(grid, model, points)
    east, north, depth = _kilometres(grid, points)
    if pattern.kind == "bodies":
        return _of_bodies(pattern, grid, points)
    across, down = cell_size_km(pattern, grid)
    gap_across, gap_down = _gaps(pattern, across, down)
    top = grid.depth_edges_km[0]
    cells = [
        _cells(values, size, gap)
        for values, size, gap in (
            (east, across, gap_across),
            (north, across, gap_across),
            (depth - top - 0.5 * gap_down, down, gap_down),
        )
    ]
    inside = np.logical_and.reduce([cell[1] for cell in cells])
    number = sum(cell[0] for cell in cells)
    sign = np.where(np.asarray(number) % 2 == 0, 1.0, -1.0)
    return np.where(inside, pattern.amplitude_percent * sign, 0.0)


def cell_size_km(pattern: PatternSettings, grid: BlockGrid) -> tuple[float, float]:
    """Width and height of a cell, km."""
    if pattern.size_km is not None:
        return pattern.size_km
    widths = grid.widths
    across = 0.5 * (np.median(widths.x_km) + np.median(widths.y_km))
    return 4.0 * float(across), 4.0 * float(np.median(widths.depth_km))


def _gaps(pattern: PatternSettings, across: float, down: float) -> tuple[float, float]:
    if pattern.gap_km is not None:
        return pattern.gap_km
    return (across, down) if pattern.kind == "spikes" else (0.0, 0.0)


def _cells(values: Floats, size: float, gap: float) -> tuple[Floats, NDArray[np.bool_]]:
    """Give the number of the cell that holds each value, and whether it is not in a gap."""
    number = np.floor(values / (size + gap))
    return number, values - number * (size + gap) < size


def _kilometres(grid: BlockGrid, points: Floats) -> tuple[Floats, Floats, Floats]:
    """Kilometres at mid-depth along x and y from the block corner in the middle, and depth."""
    edges = (grid.x_edges, grid.y_edges)
    middle = np.array([axis[np.argmin(np.abs(axis - axis.mean()))] for axis in edges])
    x, y = (points[:, :2] - middle).T
    if grid.frame.is_flat:
        return x, y, points[:, 2]
    radius = EARTH_RADIUS_KM - 0.5 * (grid.depth_edges_km[0] + grid.depth_edges_km[-1])
    scale = radius * np.radians(1.0)
    return x * scale * np.cos(np.radians(middle[1])), y * scale, points[:, 2]


def _of_model(grid: BlockGrid, model: SlownessModel, points: Floats) -> Floats:
    places = points
    if model.grid.frame != grid.frame:
        longitude, latitude = grid.frame.geographic_coordinates(points[:, 0], points[:, 1])
        x, y = model.grid.frame.local_coordinates(longitude, latitude)
        places = np.column_stack([x, y, points[:, 2]])
    block = model.grid.locate(places)
    values = np.asarray(model.perturbation_percent).ravel()
    return np.where(block >= 0, values[np.maximum(block, 0)], 0.0)


def _of_bodies(pattern: PatternSettings, grid: BlockGrid, points: Floats) -> Floats:
    total = np.zeros(len(points))
    depth = points[:, 2]
    for column in pattern.columns:
        along, across = _from_centre_km(grid, column.centre, 0.0, points)
        inside = np.hypot(along, across) <= column.radius_km
        inside &= _between(depth, column.depth_km)
        total = np.where(inside, column.amplitude_percent, total)
    for slab in pattern.slabs:
        along, right = _from_centre_km(grid, slab.centre, slab.strike_deg, points)
        dip = np.radians(slab.dip_deg)
        off = right * np.sin(dip) - (depth - slab.depth_km[0]) * np.cos(dip)
        inside = (np.abs(along) <= 0.5 * slab.length_km) & (np.abs(off) <= 0.5 * slab.thickness_km)
        inside &= _between(depth, slab.depth_km)
        total = np.where(inside, slab.amplitude_percent, total)
    return total


def _from_centre_km(
    grid: BlockGrid, centre: tuple[float, float], azimuth_deg: float, points: Floats
) -> tuple[Floats, Floats]:
    """Horizontal distances along an azimuth at a centre and to the right of it, km."""
    frame, turn = grid.frame, np.radians(azimuth_deg)
    if frame.is_flat:
        east, north = (points[:, :2] - centre).T
    else:
        here = frame.local_coordinates(*centre)
        radius = EARTH_RADIUS_KM - points[:, 2]
        offset = frame.unit_vectors(points[:, 0], points[:, 1]) - frame.unit_vectors(*here)
        ahead = frame.local_coordinates(centre[0], centre[1] + 1e-3)
        to_north = frame.unit_vectors(*ahead) - frame.unit_vectors(*here)
        to_north /= np.linalg.norm(to_north)
        to_east = np.cross(to_north, frame.unit_vectors(*here))
        east, north = radius * (offset @ to_east.ravel()), radius * (offset @ to_north.ravel())
    return (
        north * np.cos(turn) + east * np.sin(turn),
        east * np.cos(turn) - north * np.sin(turn),
    )


def _between(depth: Floats, limits: tuple[float, float]) -> NDArray[np.bool_]:
    return np.asarray((depth >= limits[0]) & (depth <= limits[1]))


def _require_rising(depth_km: tuple[float, float]) -> None:
    if not depth_km[0] < depth_km[1]:
        raise ValueError(f"depth_km is {list(depth_km)}; the top comes first and is less deep")

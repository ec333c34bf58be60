"""Settings of the grid: the grid itself in writing, and wishes for a suggested one."""

from __future__ import annotations

from typing import Annotated, Final, Literal, Self

import numpy as np
from numpy.typing import NDArray
from pydantic import BaseModel, ConfigDict, Field, model_validator

from rayloom.model.frame import Frame
from rayloom.model.grid import BlockGrid

Floats = NDArray[np.float64]

WHOLE_STEPS: Final = 1e-6
"""How far a segment may miss a whole number of steps, in steps."""

Kilometres = Annotated[float, Field(gt=0.0, allow_inf_nan=False)]


class EdgeSegment(BaseModel):
    """Equally spaced edges, both ends included.

    Attributes
    ----------
    start, stop : float
        First and last edge, in the unit of the axis.
    step : float
        Spacing; it divides the segment into whole blocks.
    """

    model_config = ConfigDict(extra="forbid", frozen=True, allow_inf_nan=False)

    start: float
    stop: float
    step: float = Field(gt=0.0)

    @model_validator(mode="after")
    def _whole_blocks(self) -> Self:
        steps = (self.stop - self.start) / self.step
        if round(steps) < 1 or abs(steps - round(steps)) > WHOLE_STEPS:
            raise ValueError(
                f"a step of {self.step:g} does not divide {self.start:g} … {self.stop:g} into "
                f"whole blocks ({steps:g} of them)"
            )
        return self

    def edges(self) -> Floats:
        """Return the edges, shape (blocks + 1,), in the unit of the axis."""
        count = round((self.stop - self.start) / self.step)
        return np.linspace(self.start, self.stop, count + 1)


Edges = Annotated[list[float | EdgeSegment], Field(min_length=1)]


class GridSettings(BaseModel):
    """A block grid in writing; the same text always builds the same grid.

    Edges are numbers, segments ``{start, stop, step}``, or a mixture in rising order;
    a segment may begin at the edge that ends what comes before it.

    Attributes
    ----------
    frame : {"sphere", "flat"}
        Whether x and y are degrees of arc on the Earth or km in a flat box.
    longitude_deg, latitude_deg : float, optional
        Centre of the frame, degrees, latitude geographic; wanted on the sphere.
    azimuth_deg : float
        Azimuth of the y axis at the centre, degrees clockwise from north.
    x_edges, y_edges : list of float or EdgeSegment
        Block edges, degrees of arc on the sphere, km in a flat frame.
    depth_edges_km : list of float or EdgeSegment
        Block edges, km below sea level; negative above it.
    """

    model_config = ConfigDict(extra="forbid", frozen=True, allow_inf_nan=False)

    frame: Literal["sphere", "flat"] = "sphere"
    longitude_deg: float | None = None
    latitude_deg: float | None = Field(default=None, ge=-90.0, le=90.0)
    azimuth_deg: float = 0.0
    x_edges: Edges
    y_edges: Edges
    depth_edges_km: Edges

    @model_validator(mode="after")
    def _placed(self) -> Self:
        placed = self.longitude_deg is not None and self.latitude_deg is not None
        if self.frame == "sphere" and not placed:
            raise ValueError("a grid on the sphere needs longitude_deg and latitude_deg")
        return self

    @classmethod
    def of(cls, grid: BlockGrid) -> Self:
        """Write down a grid, every edge as a number.

        Parameters
        ----------
        grid : BlockGrid
            Any grid.

        Returns
        -------
        GridSettings
            Settings from which :meth:`BlockGrid.from_spec` makes the same grid.
        """
        frame = grid.frame
        place = (
            {"frame": "flat"}
            if frame.is_flat
            else {
                "longitude_deg": frame.longitude_deg,
                "latitude_deg": frame.latitude_deg,
                "azimuth_deg": frame.azimuth_deg,
            }
        )
        edges = {
            "x_edges": grid.x_edges.tolist(),
            "y_edges": grid.y_edges.tolist(),
            "depth_edges_km": grid.depth_edges_km.tolist(),
        }
        return cls.model_validate({**place, **edges})

    def place(self) -> Frame:
        """Return the frame of the grid."""
        if self.longitude_deg is None or self.latitude_deg is None or self.frame == "flat":
            return Frame.flat()
        return Frame(
            longitude=self.longitude_deg,
            latitude=self.latitude_deg,
            azimuth_deg=self.azimuth_deg,
        )

    def edges(self) -> tuple[Floats, Floats, Floats]:
        """Return the edges along x, y (degrees or km) and depth (km), segments written out."""
        return (
            _expanded(self.x_edges),
            _expanded(self.y_edges),
            _expanded(self.depth_edges_km),
        )


class SuggestionSettings(BaseModel):
    """Wishes for a suggested grid; whatever is not given follows from the survey.

    Attributes
    ----------
    spacing_km : float, optional
        Horizontal width of the inner blocks; given, it is kept whatever the number
        of blocks.
    depth_km : float, optional
        Base of the grid, km below sea level.
    padding_km : float, optional
        Blocks beyond the outermost stations.
    block_thickness_km : float, optional
        Greatest thickness of a block.
    block_budget : int
        Number of blocks not to exceed by choice of the spacing.
    padding_growth : float
        Greatest width of padding blocks, in widths of inner blocks.
    azimuth_deg : float
        Azimuth of the y axis at the centre, degrees clockwise from north.
    """

    model_config = ConfigDict(extra="forbid", frozen=True, allow_inf_nan=False)

    spacing_km: Kilometres | None = None
    depth_km: Kilometres | None = None
    padding_km: Kilometres | None = None
    block_thickness_km: Kilometres | None = None
    block_budget: int = Field(default=60_000, ge=1_000)
    padding_growth: float = Field(default=2.5, ge=1.0)
    azimuth_deg: float = 0.0


def _expanded(items: list[float | EdgeSegment]) -> Floats:
    edges: list[float] = []
    for item in items:
        more = item.edges().tolist() if isinstance(item, EdgeSegment) else [item]
        joins = bool(edges) and isinstance(item, EdgeSegment) and edges[-1] == more[0]
        edges.extend(more[1:] if joins else more)
    return np.array(edges)

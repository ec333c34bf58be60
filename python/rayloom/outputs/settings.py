"""What a person may choose about figures and files."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import BaseModel, ConfigDict, Field, model_validator

Point = tuple[float, float]


class SectionSettings(BaseModel):
    """One vertical section: two end points, or a centre, an azimuth and a length.

    Points are (longitude, latitude) in degrees, or (x, y) in km with a flat frame.

    Attributes
    ----------
    name : str
        Letter or short word at the ends of the line.
    start, end : pair of float, optional
        End points.
    centre : pair of float, optional
        Middle of the line.
    azimuth_deg : float, optional
        Azimuth of the line at the centre, clockwise from north.
    length_km : float, optional
        Length along the surface.
    """

    model_config = ConfigDict(extra="forbid", frozen=True)

    name: str = Field("A", min_length=1, max_length=12)
    start: Point | None = None
    end: Point | None = None
    centre: Point | None = None
    azimuth_deg: float | None = Field(None, allow_inf_nan=False)
    length_km: Annotated[float, Field(gt=0, allow_inf_nan=False)] | None = None

    @model_validator(mode="after")
    def _one_way(self) -> SectionSettings:
        ends = [self.start, self.end]
        middle = [self.centre, self.azimuth_deg, self.length_km]
        by_ends = None not in ends and not any(value is not None for value in middle)
        by_middle = None not in middle and not any(value is not None for value in ends)
        if not (by_ends or by_middle):
            raise ValueError(
                "give either start and end, or centre, azimuth_deg and length_km, all of them"
            )
        return self


class OutputSettings(BaseModel):
    """Figures and their looks.

    Attributes
    ----------
    slice_depths_km : tuple of float, optional
        Depths of the horizontal slices; chosen from the layers that rays cross
        when left out.
    sections : tuple of SectionSettings
        Vertical sections; when empty, two cross the middle of the model.
    section_band_km : float
        Stations nearer to a section than this are drawn above it.
    colour_limit_percent : float, optional
        Perturbation at the ends of the colour scale; chosen from the model
        when left out.
    figure_formats : tuple of {"png", "pdf", "svg"}
        Formats of every figure.
    dpi : int
        Dots per inch of pixel figures.
    """

    model_config = ConfigDict(extra="forbid", frozen=True)

    slice_depths_km: Annotated[tuple[float, ...], Field(min_length=1, max_length=12)] | None = None
    sections: tuple[SectionSettings, ...] = ()
    section_band_km: float = Field(50.0, gt=0, allow_inf_nan=False)
    colour_limit_percent: Annotated[float, Field(gt=0, allow_inf_nan=False)] | None = None
    figure_formats: Annotated[tuple[Literal["png", "pdf", "svg"], ...], Field(min_length=1)] = (
        "png",
    )
    dpi: int = Field(200, ge=50, le=1200)

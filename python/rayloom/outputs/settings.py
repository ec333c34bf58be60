"""What a person may choose about figures and files."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import BaseModel, ConfigDict, Field, model_validator

Point = tuple[float, float]


class SectionSettings(BaseModel):
    """One vertical section: two end points, or a centre, an azimuth and a length.

    Points are (longitude, latitude) in degrees, or (x, y) in km with a flat frame.
    """

    model_config = ConfigDict(extra="forbid", frozen=True)

    name: str = Field(
        "A",
        min_length=1,
        max_length=12,
        description="Letter or short word at the start of the line; the end carries a prime.",
    )
    start: Point | None = Field(None, description="Start of the line.")
    end: Point | None = Field(None, description="End of the line.")
    centre: Point | None = Field(None, description="Middle of the line.")
    azimuth_deg: float | None = Field(
        None,
        allow_inf_nan=False,
        description="Direction of the line at the centre, degrees clockwise from north.",
    )
    length_km: Annotated[float, Field(gt=0, allow_inf_nan=False)] | None = Field(
        None, description="Length of the line along the surface, km."
    )

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
    """What figures show and how they look."""

    model_config = ConfigDict(extra="forbid", frozen=True)

    slice_depths_km: Annotated[tuple[float, ...], Field(min_length=1, max_length=12)] | None = (
        Field(
            None,
            description="Depths of the horizontal slices, km; chosen from the layers that rays "
            "cross if not given.",
        )
    )
    sections: tuple[SectionSettings, ...] = Field(
        (),
        description="Vertical sections, each with start and end (longitude, latitude) or centre, "
        "azimuth_deg and length_km; two through the middle of the model if none is given.",
    )
    section_band_km: float = Field(
        50.0,
        gt=0,
        allow_inf_nan=False,
        description="Stations nearer to a section than this are drawn above it, km.",
    )
    colour_limit_percent: Annotated[float, Field(gt=0, allow_inf_nan=False)] | None = Field(
        None,
        description="Perturbation at both ends of the colour scale, percent; chosen from the "
        "model if not given.",
    )
    figure_formats: Annotated[tuple[Literal["png", "pdf", "svg"], ...], Field(min_length=1)] = (
        Field(("png",), description="Formats of every figure: png, pdf, svg.")
    )
    ratio_min_hits: int = Field(
        5,
        ge=1,
        description="Rays of P and of S that a block must have for d ln Vs / d ln Vp, where a "
        "run inverts both waves.",
    )
    ratio_min_percent: float = Field(
        0.5,
        gt=0,
        allow_inf_nan=False,
        description="Size of dVp, percent, that a block must have for it.",
    )
    dpi: int = Field(200, ge=50, le=1200, description="Dots per inch of png figures.")

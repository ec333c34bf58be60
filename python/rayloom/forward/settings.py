"""How rays are traced."""

from __future__ import annotations

from typing import Literal

from pydantic import BaseModel, ConfigDict, Field

DistantMethod = Literal["bent", "reference", "straight"]
LocalMethod = Literal["bent", "graph", "straight"]
Quality = Literal["standard", "thorough"]
LengthsType = Literal["float64", "float32"]


class ForwardSettings(BaseModel):
    """Settings of the ray tracing.

    Attributes
    ----------
    method : {"bent", "reference", "straight"}
        Rays bent by the model, rays of the reference model, or chords.
    quality : {"standard", "thorough"}
        How close to the true first arrival a bent ray must come; "thorough" costs
        about twice as much and leaves about a third of the error.
    threads : int, optional
        Number of threads; all cores by default.
    """

    model_config = ConfigDict(extra="forbid", frozen=True)

    method: DistantMethod = Field(
        default="bent", description="bent, reference (rays of the 1-D model) or straight (chords)"
    )
    quality: Quality = Field(
        default="standard",
        description="standard or thorough: a third of the error, twice the time",
    )
    threads: int | None = Field(default=None, ge=1, description="all cores if left out")

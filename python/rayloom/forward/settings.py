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
        two to three times as much. On rays of 80 s through models of ±5 %, 30 in each
        of six models, they are 1.7 to 6.2 ms and 0.4 to 2.5 ms off in the mean
        (measured against wider and finer searches).
    threads : int, optional
        Number of threads; all cores by default.
    """

    model_config = ConfigDict(extra="forbid", frozen=True)

    method: DistantMethod = Field(
        default="bent", description="bent, reference (rays of the 1-D model) or straight (chords)"
    )
    quality: Quality = Field(
        default="standard",
        description="standard or thorough: less than half of the error, over twice the time",
    )
    threads: int | None = Field(default=None, ge=1, description="all cores if left out")

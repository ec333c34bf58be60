"""What a person may choose about bodies, squeezing and leak tests."""

from __future__ import annotations

from typing import Annotated

from pydantic import BaseModel, ConfigDict, Field

Positive = Annotated[float, Field(gt=0.0, allow_inf_nan=False)]
Finite = Annotated[float, Field(allow_inf_nan=False)]


class BodySettings(BaseModel):
    """What counts as a body, how its depth extent is tested, which leaks are tried."""

    model_config = ConfigDict(extra="forbid", frozen=True)

    threshold_percent: Positive | None = Field(
        default=None,
        description="Smallest |dV| of a body's blocks, relative to the median of their layer, "
        "percent; 1.5 times the prior's standard deviation if not given.",
    )
    min_resolution: float = Field(
        default=0.2,
        ge=0.0,
        le=1.0,
        description="Share of the prior variance that data must take away for a block to belong "
        "to a body.",
    )
    min_volume_km3: Positive = Field(
        default=200_000.0,
        description="Smallest volume of a body, km³; about a cube of the correlation lengths.",
    )
    top_km: Finite = Field(
        default=35.0,
        description="Base of the crust, km: blocks above it belong to no body, since station "
        "terms and blocks cannot be told apart there, and leak tests fix or free them.",
    )
    squeezing_size: int = Field(
        default=800,
        ge=50,
        le=5000,
        description="Combinations of the data that squeezing works on; more see more and cost "
        "time and memory (blocks × combinations numbers).",
    )
    simulations: int = Field(
        default=200, ge=100, le=10000, description="Simulated data sets of each squeezing test."
    )
    most_cuts: int = Field(
        default=10, ge=2, le=100, description="Most depths that squeezing tries from each side."
    )
    leak_tests: bool = Field(
        default=True,
        description="Whether anomalies beside, below and in the crust are put in to see what "
        "shows up inside; traces the survey once more through larger blocks.",
    )
    leak_contrast_percent: Finite = Field(
        default=-3.0, lt=0.0, ge=-20.0, description="Velocity perturbation of these, percent."
    )
    leak_radius_km: Positive = Field(default=75.0, description="Their radius, km.")
    seed: int = Field(default=41, ge=0, description="Seed of all random numbers.")

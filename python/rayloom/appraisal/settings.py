"""What a person may choose about the appraisal."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import BaseModel, ConfigDict, Field, model_validator

from rayloom.appraisal.patterns import PatternSettings

Positive = Annotated[float, Field(gt=0.0, allow_inf_nan=False)]
Finite = Annotated[float, Field(allow_inf_nan=False)]

DEFAULT_PATTERNS = (
    PatternSettings(name="checkerboard", kind="checkerboard"),
    PatternSettings(name="spikes", kind="spikes"),
)


class AppraisalSettings(BaseModel):
    """Which tests tell what the model is worth, and how many of each."""

    model_config = ConfigDict(extra="forbid", frozen=True)

    probes: int = Field(
        default=64, ge=2, le=10000, description="Random probes of the resolution matrix."
    )
    samples: int = Field(
        default=64, ge=2, le=10000, description="Samples of the posterior, for standard errors."
    )
    bootstrap: int = Field(
        default=24,
        ge=0,
        le=10000,
        description="Inversions with events weighted at random, to check the standard errors; 0 "
        "leaves them out.",
    )
    jackknife: bool = Field(
        default=False, description="Whether each event is left out in turn as well; slow."
    )
    seed: int = Field(default=31, ge=0, description="Seed of all random numbers.")
    period_s: Positive = Field(
        default=1.0, description="Dominant period of the waves, s, for their Fresnel zones."
    )
    patterns: tuple[PatternSettings, ...] = Field(
        default=DEFAULT_PATTERNS,
        description='Structures to restore: kind "checkerboard", "spikes", "bodies" (with columns '
        'and slabs) or "model" (with file), each with a name.',
    )
    restoration_times: Literal["same_rays", "finer_blocks"] = Field(
        default="same_rays",
        description="Where the times of a restoration come from: the rays of the inversion, or "
        "rays traced through the structure in blocks half as wide and inverted anew (slow).",
    )
    noise: Literal["uncertainties", "none"] = Field(
        default="uncertainties", description="Errors added to the times of a restoration."
    )
    regions_km: tuple[tuple[Finite, Finite], ...] = Field(
        default=(),
        description="Depth ranges in which restorations are judged, km; thirds of the box if "
        "not given.",
    )
    min_hits: int = Field(
        default=5, ge=1, description="Rays that a block needs to count as covered."
    )
    points: tuple[tuple[Finite, Finite, Finite], ...] = Field(
        default=(),
        description="Points whose point-spread is worked out: longitude, latitude (x, y in km "
        "with a flat frame) and depth in km; three below the middle of the network if not given.",
    )
    resolved_from: float = Field(
        default=0.3,
        ge=0.0,
        le=1.0,
        description="Share of the prior variance that data must take away for a block to be "
        "drawn as resolved.",
    )

    @model_validator(mode="after")
    def _in_order(self) -> AppraisalSettings:
        for top, bottom in self.regions_km:
            if not top < bottom:
                raise ValueError(f"regions_km: [{top:g}, {bottom:g}] does not go downwards")
        names = [pattern.name for pattern in self.patterns]
        twice = sorted({name for name in names if names.count(name) > 1})
        if twice:
            raise ValueError(f"two patterns are called {twice[0]!r}; names must differ")
        return self

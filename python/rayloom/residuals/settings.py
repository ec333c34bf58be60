"""Settings of the residuals."""

from __future__ import annotations

from typing import Annotated, Final, Self

from pydantic import BaseModel, ConfigDict, Field, field_validator, model_validator

Degrees = Annotated[float, Field(ge=0.0, le=180.0, allow_inf_nan=False)]

USUAL_MIN_DEG: Final[dict[str, float]] = {"P": 28.0, "S": 28.0}
USUAL_MAX_DEG: Final[dict[str, float]] = {"P": 95.0, "S": 80.0}


class ResidualSettings(BaseModel):
    """Which picks become residuals, and what their predictions contain.

    Parameters
    ----------
    distance_min_deg, distance_max_deg : dict of str to float
        Window of epicentral distance of each phase, in degrees. A phase not
        named keeps its usual window: P 28 to 95, S 28 to 80 degrees, away from
        the triplications of the upper mantle and from the core.
    min_picks_per_event : int
        Groups (event, phase) with fewer picks are left out.
    ellipticity : bool
        Whether predictions contain the ellipticity of the Earth.
    elevation : bool
        Whether predictions contain the elevation and burial of the station.
    max_residual_s : float
        Picks further than this from the median of their group, in s, are left
        out as gross errors.
    """

    model_config = ConfigDict(extra="forbid", frozen=True)

    distance_min_deg: dict[str, Degrees] = Field(
        default=USUAL_MIN_DEG, description="least distance of each phase, in degrees"
    )
    distance_max_deg: dict[str, Degrees] = Field(
        default=USUAL_MAX_DEG, description="largest distance of each phase, in degrees"
    )
    min_picks_per_event: int = Field(
        default=5, ge=2, description="groups (event, phase) with fewer picks are left out"
    )
    ellipticity: bool = Field(default=True, description="correct for the Earth's ellipticity")
    elevation: bool = Field(default=True, description="correct for elevation and burial")
    max_residual_s: float = Field(
        default=5.0,
        gt=0.0,
        description="picks further than this from their group's median are left out, in s",
    )

    @field_validator("distance_min_deg")
    @classmethod
    def _fill_min(cls, given: dict[str, float]) -> dict[str, float]:
        return {**USUAL_MIN_DEG, **_known(given)}

    @field_validator("distance_max_deg")
    @classmethod
    def _fill_max(cls, given: dict[str, float]) -> dict[str, float]:
        return {**USUAL_MAX_DEG, **_known(given)}

    @model_validator(mode="after")
    def _windows_open(self) -> Self:
        for phase, low in self.distance_min_deg.items():
            high = self.distance_max_deg[phase]
            if low >= high:
                raise ValueError(
                    f"the distance window of {phase} is empty: {low:g} to {high:g} degrees; "
                    "expected distance_min_deg below distance_max_deg"
                )
        return self


def _known(given: dict[str, float]) -> dict[str, float]:
    for phase in given:
        if phase not in USUAL_MIN_DEG:
            raise ValueError(f"phase {phase!r} is not known; expected {', '.join(USUAL_MIN_DEG)}")
    return given

"""Settings of the trade-off."""

from __future__ import annotations

from typing import Annotated

from pydantic import BaseModel, ConfigDict, Field

Positive = Annotated[float, Field(gt=0.0, allow_inf_nan=False)]


class TradeoffSettings(BaseModel):
    """Which priors the trade-off compares, and how."""

    model_config = ConfigDict(extra="forbid", frozen=True)

    prior_std_percent: Annotated[tuple[Positive, ...], Field(min_length=3)] = Field(
        default=(0.25, 0.32, 0.4, 0.5, 0.63, 0.8, 1.0, 1.25, 1.6, 2.0, 2.5, 3.2, 4.0),
        description="Standard deviations of the perturbations to try, percent.",
    )
    correlation_km: (
        Annotated[tuple[tuple[Positive, Positive], ...], Field(min_length=1)] | None
    ) = Field(
        default=None,
        description="Pairs of correlation lengths to try, horizontal and vertical, km; "
        "0.5, 0.75, 1, 1.5 and 2 times those of [inversion] if not given.",
    )
    folds: int = Field(
        default=5,
        ge=0,
        le=50,
        description="Parts that the events are dealt into for cross-validation, each left out "
        "in turn; 0 leaves cross-validation out, and the evidence alone recommends.",
    )
    probes: int = Field(
        default=6, ge=1, le=1000, description="Random probes for the traces of GCV and evidence."
    )
    seed: int = Field(default=21, ge=0, description="Seed of the probes and of the dealing.")

    def lengths_km(self, base_km: tuple[float, float]) -> tuple[tuple[float, float], ...]:
        """Return the pairs of correlation lengths to try, km.

        Parameters
        ----------
        base_km : pair
            Those of the inversion.
        """
        if self.correlation_km is not None:
            return self.correlation_km
        horizontal, vertical = base_km
        return tuple((share * horizontal, share * vertical) for share in _SHARES)


_SHARES = (0.5, 0.75, 1.0, 1.5, 2.0)

"""Settings of the survey readers."""

from __future__ import annotations

from typing import Annotated

from pydantic import BaseModel, ConfigDict, Field

Seconds = Annotated[float, Field(gt=0.0, le=60.0, allow_inf_nan=False)]


class SurveySettings(BaseModel):
    """How the tables of a survey are read.

    Parameters
    ----------
    default_uncertainty_s : float
        Uncertainty of a pick that has neither uncertainty nor quality class, in s.
    quality_uncertainty_s : dict of str to float
        Uncertainty of each quality class, in s.
    """

    model_config = ConfigDict(extra="forbid", frozen=True)

    default_uncertainty_s: Seconds = Field(
        default=0.1, description="uncertainty of a pick that states none, in s"
    )
    quality_uncertainty_s: dict[str, Seconds] = Field(
        default_factory=dict, description="uncertainty of each quality class, in s"
    )

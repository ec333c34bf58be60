"""Settings of the screens."""

from __future__ import annotations

from typing import Annotated, Final

from pydantic import BaseModel, ConfigDict, Field

Positive = Annotated[float, Field(gt=0.0, allow_inf_nan=False)]

USUAL_PERIOD_S: Final = {"P": 1.0, "S": 4.0}
"""Dominant period of distant arrivals by wave type (common practice)."""


class CheckSettings(BaseModel):
    """From what size on 'check' reports what looks wrong.

    Parameters
    ----------
    period_s : dict of str to float
        Dominant period of the waves picked, by wave type, in s. A wave not named keeps the
        usual one: P 1, S 4 s.
    step_s : float
        Steps and drifts of a station in time from this size on, in s.
    offset_s : float
        Stations that stand this far off their neighbours, in s.
    station_shift_km : float
        Stations whose picks place them this far from their coordinates, in km.
    event_shift_s : float
        Events whose mean residual is this far from that of the others, in s.
    event_shift_km : float
        Events that the picks place this far to the side of their coordinates, in km.
    mean_shift_s : float
        Events whose mean moves this much because of which stations recorded them, in s.
    uncertainty_ratio : float
        Uncertainties that are this many times too small or too large.
    sectors : int
        Number of sectors that back-azimuths are counted in.
    sector_events : int
        Sectors with fewer events are thin.
    cluster_km : float
        Radius of a cluster of events, in km.
    cluster_share : float
        Share of all events from which on a cluster is reported.
    """

    model_config = ConfigDict(extra="forbid", frozen=True)

    period_s: dict[str, Positive] = Field(
        default={}, description="dominant period of the waves picked, by wave type, in s"
    )
    step_s: Positive = Field(
        default=0.3, description="steps and drifts of a station in time, from this size, in s"
    )
    offset_s: Positive = Field(
        default=1.0, description="stations that stand this far off their neighbours, in s"
    )
    station_shift_km: Positive = Field(
        default=15.0,
        description="stations that their picks place this far from their coordinates, in km",
    )
    event_shift_s: Positive = Field(
        default=4.0,
        description="events whose mean residual is this far from that of the others, in s",
    )
    event_shift_km: Positive = Field(
        default=50.0,
        description="events that the picks place this far beside their coordinates, in km",
    )
    mean_shift_s: Positive = Field(
        default=0.3,
        description="events whose mean depends this much on which stations recorded, in s",
    )
    uncertainty_ratio: float = Field(
        default=3.0,
        gt=1.0,
        allow_inf_nan=False,
        description="uncertainties this many times too small or too large",
    )
    sectors: int = Field(
        default=8, ge=3, le=72, description="sectors that back-azimuths are counted in"
    )
    sector_events: int = Field(
        default=3, ge=1, description="sectors with fewer events than this are thin"
    )
    cluster_km: Positive = Field(default=100.0, description="radius of a cluster of events, in km")
    cluster_share: float = Field(
        default=0.2,
        gt=0.0,
        le=1.0,
        description="share of all events from which on a cluster is reported",
    )

    def wave_period_s(self, wave: str) -> float:
        """Return the dominant period of a wave type, in s."""
        return self.period_s.get(wave, USUAL_PERIOD_S[wave])

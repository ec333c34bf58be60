"""Settings of the residuals."""

from __future__ import annotations

from typing import Annotated, Final, Self

from pydantic import BaseModel, ConfigDict, Field, field_validator, model_validator

from rayloom.earth import standard_phase

Degrees = Annotated[float, Field(ge=0.0, le=180.0, allow_inf_nan=False)]

USUAL_WINDOWS_DEG: Final = {
    "P": (28.0, 95.0),
    "Pdiff": (100.0, 120.0),
    "PcP": (28.0, 70.0),
    "PKPdf": (120.0, 180.0),
    "pP": (28.0, 95.0),
    "sP": (28.0, 95.0),
    "S": (28.0, 80.0),
    "ScS": (28.0, 70.0),
    "SKS": (85.0, 140.0),
}
"""Least and largest distance of each phase (common practice)."""


class ResidualSettings(BaseModel):
    """Which picks become residuals, and what their predictions contain.

    Parameters
    ----------
    distance_min_deg, distance_max_deg : dict of str to float
        Ends of the window of epicentral distance, by phase, in degrees. A phase not
        named keeps its usual window: P, pP and sP 28 to 95 and S 28 to 80
        degrees, away from the triplications of the upper mantle and from the
        core; PcP and ScS 28 to 70, before they close up on P and S; SKS 85 to
        140, after S; Pdiff 100 to 120; PKPdf 120 to 180.
    min_picks_per_event : int
        Groups (event, phase) with fewer picks are left out.
    ellipticity : bool
        Whether predictions contain the ellipticity of the Earth.
    elevation : bool
        Whether predictions contain the elevation and burial of the station.
    crust : bool
        Whether predictions contain the local crust, where a table of it is given.
    max_residual_s : float
        Picks further than this from the median of their group, in s, are left
        out as gross errors.
    drop_stations, drop_events, drop_picks : tuple of str
        What is left out by name: stations ``NET.STA``, events, picks
        ``EVENT NET.STA PHASE``.
    keep : tuple of str
        Events, stations or picks that count although they lie outside the distance window or
        are gross errors by ``max_residual_s``.
    summary_distance_km : float, optional
        Events whose hypocentres all lie within this of each other, in km, enter the
        inversion as one, with one summary residual per station and phase
        (:func:`rayloom.residuals.summarise_rays`); each by itself if not given.
    summary_systematic_s : float
        What the picks of such events at one station have in common, in s.
    """

    model_config = ConfigDict(extra="forbid", frozen=True)

    distance_min_deg: dict[str, Degrees] = Field(
        default={}, description="least distance of phases, in degrees"
    )
    distance_max_deg: dict[str, Degrees] = Field(
        default={}, description="largest distance of phases, in degrees"
    )
    min_picks_per_event: int = Field(
        default=5, ge=2, description="groups (event, phase) with fewer picks are left out"
    )
    ellipticity: bool = Field(default=True, description="correct for the Earth's ellipticity")
    elevation: bool = Field(default=True, description="correct for elevation and burial")
    crust: bool = Field(
        default=True, description="correct for local crust where inputs.crust tells of it"
    )
    max_residual_s: float = Field(
        default=5.0,
        gt=0.0,
        description="picks further than this from their group's median are left out, in s",
    )
    drop_stations: tuple[str, ...] = Field(
        default=(), description="stations to leave out, as NET.STA"
    )
    drop_events: tuple[str, ...] = Field(default=(), description="events to leave out")
    drop_picks: tuple[str, ...] = Field(
        default=(), description="picks to leave out, as 'EVENT NET.STA PHASE'"
    )
    keep: tuple[str, ...] = Field(
        default=(),
        description="events, stations or picks that count although they lie outside the window "
        "or beyond max_residual_s",
    )

    summary_distance_km: float | None = Field(
        default=None,
        gt=0.0,
        le=1000.0,
        description="events whose hypocentres all lie within this of each other, in km, enter the "
        "inversion as one; each by itself if not given",
    )
    summary_systematic_s: float = Field(
        default=0.05,
        ge=0.0,
        le=10.0,
        description="error that the picks of such events at one station have in common, in s",
    )

    @field_validator("distance_min_deg", "distance_max_deg")
    @classmethod
    def _by_usual_name(cls, given: dict[str, float]) -> dict[str, float]:
        for phase in given:
            if standard_phase(phase) not in USUAL_WINDOWS_DEG:
                expected = ", ".join(USUAL_WINDOWS_DEG)
                raise ValueError(f"phase {phase!r} is not known; expected {expected}")
        return {standard_phase(phase): value for phase, value in given.items()}

    @model_validator(mode="after")
    def _windows_open(self) -> Self:
        for phase, (low, high) in self.windows_deg.items():
            if low >= high:
                raise ValueError(
                    f"the distance window of {phase} is empty: {low:g} to {high:g} degrees; "
                    "expected distance_min_deg below distance_max_deg"
                )
        return self

    @property
    def chosen_names(self) -> tuple[str, ...]:
        """All names in the lists of what to drop and keep."""
        return self.drop_stations + self.drop_events + self.drop_picks + self.keep

    @property
    def windows_deg(self) -> dict[str, tuple[float, float]]:
        """Least and largest distance of every phase, in degrees."""
        return {
            phase: (
                self.distance_min_deg.get(phase, low),
                self.distance_max_deg.get(phase, high),
            )
            for phase, (low, high) in USUAL_WINDOWS_DEG.items()
        }

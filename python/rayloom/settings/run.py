"""Everything a person may choose about one run.

The main type is :class:`RunSettings`.
"""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, Final, Literal, Self

from pydantic import (
    BaseModel,
    BeforeValidator,
    ConfigDict,
    Field,
    field_validator,
    model_validator,
)

from rayloom.appraisal.bodies.settings import BodySettings
from rayloom.appraisal.settings import AppraisalSettings
from rayloom.forward import ForwardSettings
from rayloom.inversion import InversionSettings
from rayloom.inversion.tradeoff import TradeoffSettings
from rayloom.model import BlockGrid, GridSettings
from rayloom.outputs import OutputSettings
from rayloom.residuals import ResidualSettings
from rayloom.residuals.screens import CheckSettings
from rayloom.survey import SurveySettings

TRACING_KEYS: Final = ("method", "quality", "threads")
"""Keys of ``forward`` that the inversion takes over."""


_KINDS_OF_DATA: Final = 3
"""Picks, residuals, delays."""


def _name_or_names(given: object) -> object:
    """Take the name of a file, or a list of names."""
    names = given if isinstance(given, list | tuple) else [given]
    if not names or not all(isinstance(name, str | Path) for name in names):
        raise ValueError(
            f"got {given!r}, expected the name of a file in quotes, or a list of such names"
        )
    return given


FileNames = Annotated[Path | tuple[Path, ...], BeforeValidator(_name_or_names)]
"""A file, or several that are read as one table; a folder stands for all files in it."""


class InputSettings(BaseModel):
    """Tables to read, relative to this folder. Give picks, or delays, or residuals if ready.

    Each is a file, a folder of files, or a list of either, as in picks = ["a.csv", "b.csv"].

    Attributes
    ----------
    stations : path or list of paths
        CSV with network, station, latitude, longitude, elevation_m; StationXML; FDSN text.
    events : path or list of paths
        CSV with event, time, latitude, longitude, depth_km; QuakeML; FDSN text.
    picks : path or list of paths, optional
        CSV with event, network, station, phase, time, uncertainty_s; QuakeML.
    residuals : path or list of paths, optional
        event, network, station, phase, residual_s, uncertainty_s.
    delays : path, optional
        Differences of arrival times between stations: CSV with event, network_a, station_a,
        network_b, station_b, delay_s (arrival at a minus arrival at b), uncertainty_s and, where
        it is not P, phase.
    crust : path, optional
        Local crust below stations, replacing that of the Earth: CSV with network, station, and
        crust_thickness_km (with vp_km_s, vs_km_s if known) or column, the name of a CSV file
        with depth_km, vp_km_s, vs_km_s.
    """

    model_config = ConfigDict(extra="forbid", frozen=True)

    stations: FileNames
    events: FileNames
    picks: FileNames | None = None
    residuals: FileNames | None = None
    delays: Path | None = None
    crust: Path | None = None

    @model_validator(mode="after")
    def _one_kind_of_data(self) -> InputSettings:
        if [self.picks, self.residuals, self.delays].count(None) != _KINDS_OF_DATA - 1:
            raise ValueError("give either picks or residuals or delays, one of them")
        return self


class EarthSettings(BaseModel):
    """The one-dimensional Earth that predicts arrival times and fills the blocks.

    Attributes
    ----------
    model : str
        "ak135", "iasp91", or a CSV file with depth_km, vp_km_s, vs_km_s and density (g/cm³).
    """

    model_config = ConfigDict(extra="forbid", frozen=True)

    model: str = Field(default="ak135", min_length=1)


class RunInversionSettings(InversionSettings):
    """How the model is found.

    Attributes
    ----------
    wave : {"auto", "P", "S"}
        Which arrivals are inverted: "P" for those that arrive as P waves, "S" for those that
        arrive as S waves; "auto" makes one model of each wave that has residuals, with two in
        the sub-folders P and S.
    starting_model : path or one per wave, optional
        netCDF file whose perturbation the iterations start from: a model file, or dvp (percent)
        or vp (km/s) on longitude, latitude and depth (dvs or vs for S). Where its blocks differ,
        block means are taken. Such as { P = "p.nc", S = "s.nc" } for two waves. It
        bears on the course of the iterations alone: what is believed beforehand, and where
        data are silent found again, is the prior.
    """

    wave: Literal["auto", "P", "S"] = "auto"
    starting_model: Path | dict[Literal["P", "S"], Path] | None = None

    def starting_model_of(self, wave: str) -> Path | None:
        """Return the file of the starting model of one wave, None if there is none."""
        chosen = self.starting_model
        if not isinstance(chosen, dict):
            return chosen
        return {str(key): path for key, path in chosen.items()}.get(wave)


class RunOutputSettings(OutputSettings):
    """Figures and files.

    Attributes
    ----------
    linear_system : bool
        Whether the inversion also writes linear_system/: path lengths G in km, data, rows
        and blocks of its last iteration.
    """

    linear_system: bool = False


class RunSettings(BaseModel):
    """Settings of one run, a section for each room of the work.

    How rays are traced is chosen in ``forward`` alone; the keys of the same names in the
    settings of the inversion are filled from there (:meth:`inversion_settings`).

    Attributes
    ----------
    inputs, earth, survey, residuals, check, grid, forward, inversion : settings
    tradeoff, appraisal, bodies, outputs : settings
        In the order of the work.
    """

    model_config = ConfigDict(extra="forbid", frozen=True)

    inputs: InputSettings
    earth: EarthSettings = Field(default_factory=EarthSettings)
    survey: SurveySettings = Field(default_factory=SurveySettings)
    residuals: ResidualSettings = Field(default_factory=ResidualSettings)
    check: CheckSettings = Field(default_factory=CheckSettings)
    grid: GridSettings
    forward: ForwardSettings = Field(default_factory=ForwardSettings)
    inversion: RunInversionSettings = Field(
        default_factory=lambda: RunInversionSettings.model_validate({})
    )
    tradeoff: TradeoffSettings = Field(default_factory=TradeoffSettings)
    appraisal: AppraisalSettings = Field(default_factory=AppraisalSettings)
    bodies: BodySettings = Field(default_factory=BodySettings)
    outputs: RunOutputSettings = Field(
        default_factory=lambda: RunOutputSettings.model_validate({})
    )

    @field_validator("grid")
    @classmethod
    def _grid_can_be_built(cls, given: GridSettings) -> GridSettings:
        BlockGrid.from_spec(given)
        return given

    @field_validator("inversion", mode="before")
    @classmethod
    def _tracing_is_chosen_once(cls, given: object) -> object:
        misplaced = [key for key in TRACING_KEYS if isinstance(given, dict) and key in given]
        if misplaced:
            verb = "belongs" if len(misplaced) == 1 else "belong"
            raise ValueError(f"{' and '.join(misplaced)} {verb} to [forward]")
        return given

    def for_wave(self, wave: str) -> Self:
        """Return the same settings with one wave chosen.

        Parameters
        ----------
        wave : {"P", "S"}
            The wave to invert.

        Returns
        -------
        RunSettings
        """
        return self.model_copy(
            update={"inversion": self.inversion.model_copy(update={"wave": wave})}
        )

    def inversion_settings(self) -> InversionSettings:
        """Return the settings of the inversion with the tracing chosen in ``forward``.

        Returns
        -------
        InversionSettings
        """
        chosen = {key: getattr(self.forward, key) for key in TRACING_KEYS}
        return self.inversion.model_copy(update=chosen)

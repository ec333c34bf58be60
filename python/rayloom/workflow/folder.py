"""The folder that holds everything of one run, and the names in it.

The main type is :class:`RunFolder`.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

from rayloom.errors import InputError
from rayloom.settings import RunSettings, read_run_settings


@dataclass(frozen=True)
class RunFolder:
    """A run folder.

    Parameters
    ----------
    path : pathlib.Path
        The folder. Files named in its settings are found relative to it.
    """

    path: Path

    @property
    def settings_file(self) -> Path:
        """What the person edits."""
        return self.path / "rayloom.toml"

    @property
    def settings_used(self) -> Path:
        """Every setting as the last run took it, defaults included."""
        return self.path / "settings_used.toml"

    @property
    def provenance(self) -> Path:
        """Versions, hashes, seeds and machine of every step."""
        return self.path / "provenance.json"

    @property
    def residuals(self) -> Path:
        """Residuals to use; may be edited."""
        return self.path / "residuals.csv"

    @property
    def exclusions(self) -> Path:
        """What was left out, with reasons."""
        return self.path / "exclusions.csv"

    @property
    def checkpoints(self) -> Path:
        """Where an interrupted inversion is picked up again."""
        return self.path / "checkpoints"

    @property
    def figures(self) -> Path:
        """Pictures."""
        return self.path / "figures"

    @property
    def linear_system(self) -> Path:
        """Path lengths and data of the last iteration, on request."""
        return self.path / "linear_system"

    def file(self, name: str) -> Path:
        """Return the path of a file of the folder."""
        return self.path / name

    def resolve(self, named: Path) -> Path:
        """Return where a file named in the settings is."""
        return named if named.is_absolute() else (self.path / named).resolve()

    def read_settings(self) -> RunSettings:
        """Read ``rayloom.toml``.

        Raises
        ------
        InputError
            If the folder holds none, or if anything in it is wrong.
        """
        if not self.settings_file.is_file():
            raise InputError(
                f"{self.path} is no run folder: it holds no rayloom.toml. Make one with: "
                f"rayloom init {self.path} --stations FILE --events FILE --picks FILE"
            )
        return read_run_settings(self.settings_file)

"""The folder that holds everything of one run, and the names in it.

The main type is :class:`RunFolder`.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Final

from rayloom.errors import InputError
from rayloom.settings import RunSettings, read_run_settings

SETTINGS_FILE: Final = "rayloom.toml"

WAVES: Final = ("P", "S")
"""Wave types, and the names of their sub-folders where a run inverts both."""


@dataclass(frozen=True)
class RunFolder:
    """A run folder, or the part of one that holds the results of one wave.

    A run that inverts P and S keeps the results of each in a sub-folder of its own,
    ``DIR/P`` and ``DIR/S``. Such a part has the same names in it as a whole run folder
    (``model.nc``, ``figures``, …) and its own record of steps; settings, tables,
    residuals and exclusions remain those of the run.

    Parameters
    ----------
    path : pathlib.Path
        Where results are.
    wave : {"P", "S"}, optional
        The wave whose results these are, if the folder is part of a run folder.
    """

    path: Path
    wave: str | None = None

    @classmethod
    def at(cls, path: str | Path) -> RunFolder:
        """Return the run folder at a path, or the part of one that lies there."""
        path = Path(path)
        is_part = path.name in WAVES and (path.parent / SETTINGS_FILE).is_file()
        return cls(path, path.name if is_part else None)

    @property
    def run(self) -> RunFolder:
        """The whole run folder."""
        return self if self.wave is None else RunFolder(self.path.parent)

    def part(self, wave: str) -> RunFolder:
        """Return the part of the run folder that holds the results of one wave."""
        return RunFolder(self.run.path / wave, wave)

    @property
    def settings_file(self) -> Path:
        """What the person edits."""
        return self.run.path / SETTINGS_FILE

    @property
    def settings_used(self) -> Path:
        """Every setting as the last run took it, defaults included."""
        return self.run.path / "settings_used.toml"

    @property
    def provenance(self) -> Path:
        """Versions, hashes, seeds and machine of every step whose results are here."""
        return self.path / "provenance.json"

    @property
    def residuals(self) -> Path:
        """Residuals to use, of all waves; may be edited."""
        return self.run.path / "residuals.csv"

    @property
    def exclusions(self) -> Path:
        """What was left out before the inversion, with reasons."""
        return self.run.path / "exclusions.csv"

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
        return named if named.is_absolute() else (self.run.path / named).resolve()

    def resolve_each(self, named: Path | tuple[Path, ...]) -> Path | tuple[Path, ...]:
        """Return where a file, or several, named in the settings are."""
        if isinstance(named, tuple):
            return tuple(self.resolve(name) for name in named)
        return self.resolve(named)

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

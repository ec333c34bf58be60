"""Making a run folder: tables read, a grid suggested, settings written.

The main function is :func:`initialise`.
"""

from __future__ import annotations

import os
import shutil
import time
from pathlib import Path
from typing import Any, Final

import numpy as np

from rayloom.earth import ReferenceEarth
from rayloom.errors import InputError
from rayloom.model import suggest_grid
from rayloom.residuals import Residuals, ResidualSettings
from rayloom.settings import (
    EarthSettings,
    InputSettings,
    RunSettings,
    run_settings_text,
)
from rayloom.survey import Picks, Survey, SurveySettings
from rayloom.workflow.data import Tables, is_table, residuals_from_tables
from rayloom.workflow.folder import RunFolder
from rayloom.workflow.reporting import Reporter
from rayloom.writing import replacing, write_text

INPUTS: Final = "inputs"
"""Folder inside the run folder that holds copied tables."""

_HEADING = """\
Settings of one run of rayloom. Edit, then: rayloom run {folder}
Keys left out take their defaults; files are named relative to this folder.
Depths are km below sea level, times s, angles degrees, perturbations percent of velocity.
"""


def initialise(
    path: Path,
    tables: Tables,
    *,
    earth: str = "ak135",
    copy: bool = False,
    force: bool = False,
    reporter: Reporter | None = None,
) -> RunFolder:
    """Make a run folder.

    Parameters
    ----------
    path : pathlib.Path
        The folder; made if it is not there.
    tables : Tables
        The person's files.
    earth : str
        Name of the one-dimensional model, or a CSV file.
    copy : bool
        Copy the tables into the folder instead of naming them where they are.
    force : bool
        Overwrite settings that are there already.
    reporter : Reporter, optional
        Hears what was read and why the grid is as it is.

    Returns
    -------
    RunFolder
        The folder with its ``rayloom.toml``.

    Raises
    ------
    InputError
        If settings are there already, or anything is wrong with the tables.
    FileAccessError
        If the folder cannot be written.
    """
    reporter = reporter or Reporter()
    folder = RunFolder(path)
    if folder.settings_file.exists() and not force:
        raise InputError(
            f"{folder.settings_file} is there already; run it with: rayloom run {path}, "
            "or overwrite it with --force"
        )
    given = [tables.picks, tables.residuals, tables.delays]
    if given.count(None) != len(given) - 1:
        raise InputError("give either --picks or --residuals or --delays, one of them")
    if path.exists() and not path.is_dir():
        raise InputError(f"{path} is a file; expected the name of a folder")
    started = time.monotonic()
    reporter.begin("init", "reading the tables")
    settings = _suggested_settings(folder, tables, earth, copy, reporter)
    if copy:
        _copy(tables, folder)
    write_text(
        folder.settings_file, run_settings_text(settings, heading=_HEADING.format(folder=path))
    )
    reporter.finish("init", time.monotonic() - started)
    return folder


def _suggested_settings(
    folder: RunFolder, tables: Tables, earth: str, copy: bool, reporter: Reporter
) -> RunSettings:
    model = ReferenceEarth.from_csv(earth) if is_table(earth) else ReferenceEarth(earth)
    data = residuals_from_tables(
        tables, model, survey=SurveySettings(), residuals=ResidualSettings(), reporter=reporter
    )
    suggestion = suggest_grid(_usable_part(data), model)
    for reason in suggestion.reasons:
        reporter.note(reason)
    named: dict[str, Any] = {
        name: _each_named_in(folder, files, copied_to=INPUTS if copy else None)
        for name, files in tables.by_content().items()
    }
    return RunSettings(
        inputs=InputSettings(**named),
        earth=EarthSettings(model=_earth_named(folder, earth)),
        grid=suggestion.settings,
    )


def _usable_part(data: Residuals) -> Survey:
    """Give the picks behind the residuals to use, so that others do not shape the grid."""
    travel_s = data.predicted_s + data.residual_s
    origin = data.events.time[data.event_index]
    picks = Picks(
        data.event_index,
        data.station_index,
        data.phase,
        origin + np.round(travel_s * 1e9).astype("timedelta64[ns]"),
        data.uncertainty_s,
    )
    return Survey(data.stations, data.events, picks)


def _each_named_in(
    folder: RunFolder, files: Path | tuple[Path, ...], *, copied_to: str | None
) -> Path | tuple[Path, ...]:
    if isinstance(files, tuple):
        return tuple(_named_in(folder, file, copied_to=copied_to) for file in files)
    return _named_in(folder, files, copied_to=copied_to)


def _named_in(folder: RunFolder, file: Path, *, copied_to: str | None) -> Path:
    """Name a file relative to the folder, or absolutely where no relative path exists."""
    if copied_to is not None:
        return Path(copied_to) / file.name
    try:
        return Path(os.path.relpath(file.resolve(), folder.path.resolve()))
    except ValueError:
        return file.resolve()


def _earth_named(folder: RunFolder, earth: str) -> str:
    if not is_table(earth):
        return earth
    return _named_in(folder, Path(earth), copied_to=None).as_posix()


def _copy(tables: Tables, folder: RunFolder) -> None:
    kept = {path.resolve(): path.name for path in tables.files().values()}
    if tables.crust is not None:
        base = tables.crust.resolve().parent
        kept |= {
            path.resolve(): os.path.relpath(path.resolve(), base)
            for path in tables.files("crust").values()
        }
    if any(name.startswith("..") for name in kept.values()):
        raise InputError(
            "the table of crust names column files outside its own folder; move them there, or "
            "leave out --copy"
        )
    if len({*kept.values()}) < len(kept):
        raise InputError("two tables have the same name; rename one, or leave out --copy")
    for path, name in kept.items():
        target = folder.path / INPUTS / name
        if target.exists() and target.samefile(path):
            continue
        with replacing(target) as temporary:
            if path.is_dir():
                shutil.copytree(path, temporary, dirs_exist_ok=True)
            else:
                shutil.copyfile(path, temporary)

"""The person's tables of a run folder, read and turned into residuals.

The main function is :func:`residuals_from_tables`.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, fields, replace
from pathlib import Path
from typing import Any

import numpy as np

from rayloom.earth import PHASES, ReferenceEarth, phase_wave, standard_phase
from rayloom.errors import FileAccessError, InputError
from rayloom.outputs.tables import LEFT_OUT_OF_INVERSION
from rayloom.residuals import (
    Exclusions,
    Residuals,
    ResidualSettings,
    StationCrust,
    SummaryRays,
    compute_residuals,
    crust_files,
    read_crust,
    read_residuals,
    summarise_rays,
)
from rayloom.residuals.delays import compute_delay_residuals
from rayloom.settings import RunSettings
from rayloom.survey import (
    Notice,
    Stations,
    SurveySettings,
    read_events,
    read_stations,
    read_survey,
)
from rayloom.workflow.folder import RunFolder
from rayloom.workflow.reporting import Reporter

_SHOWN_PER_KIND = 3
_BYTES_PER_KB = 1000

TableFiles = Path | tuple[Path, ...]
"""A file or folder, or several that make one table."""


@dataclass(frozen=True)
class Tables:
    """Where the person's tables are.

    Parameters
    ----------
    stations, events : pathlib.Path or tuple of pathlib.Path
        Tables of stations and events; several files or folders make one table.
    picks, residuals : pathlib.Path or tuple of pathlib.Path, optional
        Picks, or residuals where these are ready.
    delays : pathlib.Path, optional
        Delays between stations, in place of picks and residuals.
    crust : pathlib.Path, optional
        Local crust below stations.
    """

    stations: TableFiles
    events: TableFiles
    picks: TableFiles | None = None
    residuals: TableFiles | None = None
    delays: Path | None = None
    crust: Path | None = None

    @classmethod
    def given(cls, **named: Sequence[Path]) -> Tables:
        """Return the tables that lists of files make, one file standing for itself."""
        tables: dict[str, Any] = {
            name: paths[0] if len(paths) == 1 else tuple(paths)
            for name, paths in named.items()
            if paths
        }
        return cls(**tables)

    @classmethod
    def of(cls, folder: RunFolder, settings: RunSettings) -> Tables:
        """Return the tables that the settings of a run folder name.

        A table of crust that is switched off does not count.
        """
        named = settings.inputs
        if not settings.residuals.crust:
            named = named.model_copy(update={"crust": None})
        tables: dict[str, Any] = {
            field.name: folder.resolve_each(getattr(named, field.name))
            for field in fields(cls)
            if getattr(named, field.name) is not None
        }
        return cls(**tables)

    def by_content(self) -> dict[str, TableFiles]:
        """Return the tables that are given by what they hold."""
        named = {field.name: getattr(self, field.name) for field in fields(self)}
        return {name: paths for name, paths in named.items() if paths is not None}

    def files(self, *contents: str) -> dict[str, Path]:
        """Return every file or folder by what it holds, numbered where there are several.

        Parameters
        ----------
        *contents : str
            Only tables that hold these; all if none is named.

        Returns
        -------
        dict of pathlib.Path
            ``{"stations": …, "picks 1": …, "picks 2": …}``. The files that a table of
            crust names stand beside it.
        """
        found: dict[str, Path] = {}
        for name, paths in self.by_content().items():
            if contents and name not in contents:
                continue
            several = paths if isinstance(paths, tuple) else (paths,)
            for number, path in enumerate(several, start=1):
                found[name if len(several) == 1 else f"{name} {number}"] = path
        return found | (crust_files(found["crust"]) if "crust" in found else {})


def read_earth(folder: RunFolder, model: str) -> ReferenceEarth:
    """Return the one-dimensional Earth of that name, or of that CSV file."""
    if is_table(model):
        return ReferenceEarth.from_csv(folder.resolve(Path(model)))
    return ReferenceEarth(model)


def is_table(model: str) -> bool:
    """Tell whether a one-dimensional model is named by its file."""
    return model.lower().endswith(".csv")


def residuals_from_tables(
    tables: Tables,
    earth: ReferenceEarth,
    *,
    survey: SurveySettings,
    residuals: ResidualSettings,
    reporter: Reporter,
) -> Residuals:
    """Read the person's tables and compute residuals, or take those that are ready.

    Parameters
    ----------
    tables : Tables
        The files.
    earth : ReferenceEarth
        Predicts the arrival times.
    survey : SurveySettings
        How tables are read.
    residuals : ResidualSettings
        Which picks count.
    reporter : Reporter
        Hears what was read and the notices.

    Returns
    -------
    Residuals
        What can be used, and with reasons what cannot.

    Raises
    ------
    InputError
        If anything is wrong with a table, or nothing is left to use.
    """
    if tables.residuals is not None:
        data, notices = _ready(tables, tables.residuals, earth, survey, residuals)
    elif tables.delays is not None:
        data, notices = _of_delays(tables, tables.delays, earth, survey, residuals)
    else:
        data, notices = _computed(tables, earth, survey, residuals, reporter)
    reporter.note(
        f"{len(data.stations)} stations, {len(data.events)} events, "
        f"{len(data.residual_s)} residuals to use"
    )
    for line in exclusion_lines(data):
        reporter.note(line)
    for line in notice_lines([*notices, *data.notices]):
        reporter.note(line)
    return data


def station_crust(
    tables: Tables, stations: Stations, notices: list[Notice] | None = None
) -> StationCrust | None:
    """Read the crust below stations, if a table of it is given."""
    if tables.crust is None:
        return None
    return read_crust(tables.crust, stations, notices=notices)


def read_back_residuals(
    folder: RunFolder, earth: ReferenceEarth, settings: RunSettings
) -> Residuals:
    """Read ``residuals.csv`` of a run folder as the inversion takes it.

    They are those of :func:`read_back_picks`, summed up over nearby events where the
    settings say so.
    """
    picks = read_back_picks(folder, earth, settings)
    summary = summary_of(picks, settings)
    return picks if summary is None else summary.data


def summary_of(data: Residuals, settings: RunSettings) -> SummaryRays | None:
    """Sum up residuals of nearby events, or return None where the settings do not ask for it."""
    distance_km = settings.residuals.summary_distance_km
    if distance_km is None:
        return None
    return summarise_rays(
        data, distance_km=distance_km, systematic_s=settings.residuals.summary_systematic_s
    )


def read_back_picks(folder: RunFolder, earth: ReferenceEarth, settings: RunSettings) -> Residuals:
    """Read ``residuals.csv`` of a run folder, as computed or as edited since.

    Its list of exclusions is that of ``exclusions.csv``. The part of a run folder that
    belongs to one wave has the rows of that wave only.

    Raises
    ------
    InputError
        If anything is wrong with the table.
    FileAccessError
        If the list of exclusions cannot be read.
    """
    tables = Tables.of(folder, settings)
    stations = read_stations(tables.stations)
    data = read_residuals(
        folder.residuals,
        stations,
        read_events(tables.events),
        earth,
        settings.residuals,
        survey_settings=settings.survey,
        crust=station_crust(tables, stations),
    )
    excluded = _earlier_exclusions(folder.exclusions)
    if folder.wave is None:
        return replace(data, excluded=excluded)
    of_wave = data.wave == folder.wave
    if not of_wave.any():
        raise InputError(
            f"holds no {folder.wave} residual, while inversion.wave asks for "
            f"{settings.inversion.wave}",
            where=str(folder.residuals),
        )
    return replace(data.select(of_wave), excluded=_of_wave(excluded, folder.wave))


def _of_wave(excluded: Exclusions, wave: str) -> Exclusions:
    """Leave out exclusions of the other wave; phases of neither are told for both."""
    usual = [standard_phase(name) for name in excluded.phase.tolist()]
    other = [name in PHASES and phase_wave(name) != wave for name in usual]
    return excluded.select(~np.array(other, dtype=bool))


def _earlier_exclusions(path: Path) -> Exclusions:
    """Read what was left out before the inversion."""
    import pandas as pd

    if not path.exists():
        return Exclusions()
    try:
        table = pd.read_csv(path, dtype=str, keep_default_na=False)
        table = table[table["reason"] != LEFT_OUT_OF_INVERSION]
        return Exclusions(**{name: table[name].to_numpy(dtype=np.str_) for name in table.columns})
    except (OSError, ValueError, KeyError, TypeError) as error:
        raise FileAccessError(
            f"{path}: cannot be read as the list of what was left out ({error}); "
            f"write it again with: rayloom residuals {path.parent} --again"
        ) from error


def notice_lines(notices: Iterable[Notice]) -> list[str]:
    """Tell notices in few lines: three of a kind, warnings first."""
    by_kind: dict[tuple[str, str], list[Notice]] = {}
    for notice in notices:
        by_kind.setdefault((notice.severity, notice.what), []).append(notice)
    lines = []
    for (severity, _), same in sorted(by_kind.items(), key=lambda item: item[0][0] != "warning"):
        mark = "warning: " if severity == "warning" else ""
        lines += [f"{mark}{notice.detail}" for notice in same[:_SHOWN_PER_KIND]]
        if len(same) > _SHOWN_PER_KIND:
            lines.append(f"{mark}… and {len(same) - _SHOWN_PER_KIND} more of the kind")
    return lines


def exclusion_lines(data: Residuals) -> list[str]:
    """Tell how many picks were left out, by reason."""
    counts = data.excluded.counts()
    total = sum(counts.values())
    if not total:
        return []
    parts = [f"{count} {reason.replace('_', ' ')}" for reason, count in counts.items()]
    return [f"left out {total} picks: {', '.join(parts)}"]


def _computed(
    tables: Tables,
    earth: ReferenceEarth,
    survey: SurveySettings,
    residuals: ResidualSettings,
    reporter: Reporter,
) -> tuple[Residuals, list[Notice]]:
    if tables.picks is None:
        raise InputError("neither picks nor residuals nor delays are named", where="inputs")
    read = read_survey(
        stations=tables.stations,
        events=tables.events,
        picks=tables.picks,
        settings=survey,
        progress=lambda done, total: reporter.progress(
            "reading tables, kB", done // _BYTES_PER_KB, total // _BYTES_PER_KB
        ),
    )
    notices = list(read.notices)
    crust = station_crust(tables, read.stations, notices)
    return compute_residuals(read, earth, residuals, crust=crust), notices


def _of_delays(
    tables: Tables,
    table: Path,
    earth: ReferenceEarth,
    survey: SurveySettings,
    residuals: ResidualSettings,
) -> tuple[Residuals, list[Notice]]:
    notices: list[Notice] = []
    stations = read_stations(tables.stations, notices=notices)
    events = read_events(tables.events, notices=notices)
    crust = station_crust(tables, stations, notices)
    data = compute_delay_residuals(
        table, stations, events, earth, residuals, survey_settings=survey, crust=crust
    )
    return data, notices


def _ready(
    tables: Tables,
    table: TableFiles,
    earth: ReferenceEarth,
    survey: SurveySettings,
    residuals: ResidualSettings,
) -> tuple[Residuals, list[Notice]]:
    notices: list[Notice] = []
    stations = read_stations(tables.stations, notices=notices)
    events = read_events(tables.events, notices=notices)
    crust = station_crust(tables, stations, notices)
    if crust is not None:
        detail = (
            "residuals that are ready are taken as they are; inputs.crust bears on their "
            "predicted times only"
        )
        notices.append(Notice("warning", "crust_not_applied", "inputs.crust", detail))
    data = read_residuals(
        table, stations, events, earth, residuals, survey_settings=survey, crust=crust
    )
    return data, notices

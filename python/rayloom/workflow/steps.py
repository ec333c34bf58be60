"""The steps of a run: residuals, invert, export, and ratio where it inverts two waves.

Each says which files it reads, which settings bear on its result, and does its work
by calling the rooms. :data:`STEPS` lists them in order.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any, Final

from rayloom.outputs import write_exclusions_csv, write_residuals_csv, write_table
from rayloom.residuals import crust_frame
from rayloom.settings import RunSettings
from rayloom.workflow.appraising import APPRAISE
from rayloom.workflow.bodies import BODIES
from rayloom.workflow.compare import COMPARE
from rayloom.workflow.comparing_waves import ratio_inputs, write_ratio
from rayloom.workflow.data import (
    Tables,
    is_table,
    read_earth,
    residuals_from_tables,
    station_crust,
)
from rayloom.workflow.exporting import export_results, report_sections
from rayloom.workflow.folder import RunFolder
from rayloom.workflow.inverting import run_inversion, starting_model_files
from rayloom.workflow.plan import Files, Outcome, Step
from rayloom.workflow.record import content_hashes, fingerprint
from rayloom.workflow.relative_times import write_relative_times
from rayloom.workflow.reporting import Reporter
from rayloom.workflow.tradeoff import TRADEOFF

SUMMARY_KEYS: Final = ("summary_distance_km", "summary_systematic_s")
"""Keys of ``residuals`` that bear on the inversion, not on residuals of single events."""

STEPS: Final = (
    Step(
        name="residuals",
        inputs=lambda folder, settings: {
            **Tables.of(folder, settings).files(),
            **_earth_table(folder, settings),
        },
        settings=lambda settings: _residual_settings(settings),
        work=lambda folder, settings, reporter: _residuals(folder, settings, reporter),
        scope="run",
    ),
    Step(
        name="invert",
        inputs=lambda folder, settings: _inversion_inputs(folder, settings),
        settings=lambda settings: _inversion_settings(settings),
        work=lambda folder, settings, reporter: run_inversion(
            folder, settings, reporter, fingerprint=_inversion_fingerprint(folder, settings)
        ),
        builds_on=("residuals",),
    ),
    TRADEOFF,
    COMPARE,
    APPRAISE,
    BODIES,
    Step(
        name="export",
        inputs=lambda folder, _: {
            **{name: folder.file(name) for name in ("model.nc", "inversion.npz")},
            **report_sections(folder),
        },
        settings=lambda settings: _sections(settings, "outputs"),
        work=export_results,
        builds_on=("invert",),
    ),
    Step(
        name="ratio",
        inputs=lambda folder, settings: {
            **ratio_inputs(folder),
            **Tables.of(folder, settings).files("stations"),
        },
        settings=lambda settings: _sections(settings, "outputs"),
        work=write_ratio,
        builds_on=("invert",),
        scope="waves",
    ),
)
"""The steps in the order of the work."""


def _residuals(folder: RunFolder, settings: RunSettings, reporter: Reporter) -> Outcome:
    tables = Tables.of(folder, settings)
    data = residuals_from_tables(
        tables,
        read_earth(folder, settings.earth.model),
        survey=settings.survey,
        residuals=settings.residuals,
        reporter=reporter,
    )
    write_residuals_csv(folder.residuals, data)
    write_exclusions_csv(folder.exclusions, data)
    files = [folder.residuals, folder.exclusions]
    files += write_relative_times(folder, tables, settings.survey)
    crust = station_crust(tables, data.stations)
    if crust is not None:
        files.append(folder.file("station_crust.csv"))
        write_table(files[-1], crust_frame(data, crust))
    return Outcome(files={path.name: path for path in files})


def _residual_settings(settings: RunSettings) -> dict[str, Any]:
    """Give all that bears on residuals of single events."""
    chosen = _sections(settings, "earth", "survey", "residuals")
    for key in SUMMARY_KEYS:
        del chosen["residuals"][key]
    return chosen


def _earth_table(folder: RunFolder, settings: RunSettings) -> Files:
    model = settings.earth.model
    return {"earth": folder.resolve(Path(model))} if is_table(model) else {}


def _inversion_inputs(folder: RunFolder, settings: RunSettings) -> Files:
    return {
        **Tables.of(folder, settings).files("stations", "events", "crust"),
        "residuals.csv": folder.residuals,
        **starting_model_files(folder, settings),
        **_earth_table(folder, settings),
    }


def _inversion_fingerprint(folder: RunFolder, settings: RunSettings) -> str:
    """Name what a checkpoint belongs to; how long to iterate may change in between."""
    chosen = _inversion_settings(settings)
    chosen["inversion"].pop("max_iterations")
    chosen.pop("outputs")
    return fingerprint(content_hashes(_inversion_inputs(folder, settings)), chosen)


def _inversion_settings(settings: RunSettings) -> dict[str, Any]:
    """Give all that bears on a model; the number of threads does not."""
    chosen = _sections(settings, "earth", "grid", "forward", "inversion")
    for section in ("forward", "inversion"):
        chosen[section].pop("threads", None)
    chosen["residuals"] = {key: getattr(settings.residuals, key) for key in SUMMARY_KEYS}
    chosen["outputs"] = {"linear_system": settings.outputs.linear_system}
    return chosen


def _sections(settings: RunSettings, *names: str) -> dict[str, Any]:
    whole = settings.model_dump(mode="json", include=set(names))
    return {name: whole[name] for name in names}

"""The step ``tradeoff``: many priors on the rays of the inversion, and one recommended.

:data:`TRADEOFF` is the step, :func:`apply_recommendation` takes its word.
"""

from __future__ import annotations

from typing import Any, Final

from rayloom.errors import InputError
from rayloom.inversion import linearise
from rayloom.inversion.tradeoff import Tradeoff, explain, prior_settings, sweep
from rayloom.outputs import write_table
from rayloom.outputs.report_section import ReportSection, SectionFigure
from rayloom.outputs.style import save_figure
from rayloom.outputs.tradeoff_figures import figure_agreement, figure_tradeoff
from rayloom.settings import RunSettings, change_run_settings
from rayloom.workflow.finished import finished_inversion
from rayloom.workflow.folder import RunFolder
from rayloom.workflow.plan import Files, Outcome, Step
from rayloom.workflow.record import Provenance
from rayloom.workflow.reporting import Reporter

_TABLE: Final = "tradeoff.csv"
_SECTION: Final = "tradeoff_report.json"
_PRIOR_KEYS: Final = ("prior_std_percent", "correlation_km", "damping", "smoothing_km")


def run_tradeoff(folder: RunFolder, settings: RunSettings, reporter: Reporter) -> Outcome:
    """Compare priors and write the table, the figures and what all good models share."""
    result = finished_inversion(folder, settings)
    inversion = settings.inversion_settings()
    found = sweep(
        linearise(result, inversion), inversion, settings.tradeoff, progress=reporter.progress
    )
    said = explain(found)
    for line in said:
        reporter.note(line)
    files = _write(folder, settings, found, result.data.stations)
    files[_SECTION] = folder.file(_SECTION)
    _section(found, said, files).write(files[_SECTION])
    return Outcome(
        files=files,
        seeds={"probes": settings.tradeoff.seed},
        remarks={f"finding_{number}": line for number, line in enumerate(said, start=1)},
    )


def _write(folder: RunFolder, settings: RunSettings, found: Tradeoff, stations: Any) -> Files:
    chosen = settings.outputs
    files = {name: folder.file(name) for name in (_TABLE, "tradeoff.nc")}
    write_table(files[_TABLE], found.frame())
    found.model.write_netcdf(files["tradeoff.nc"])
    figures = {
        "tradeoff": figure_tradeoff(found),
        "tradeoff_sign": figure_agreement(
            found, stations=stations, depths_km=chosen.slice_depths_km
        ),
    }
    for name, figure in figures.items():
        for path in save_figure(
            figure, folder.figures / name, formats=chosen.figure_formats, dpi=chosen.dpi
        ):
            files[path.relative_to(folder.path).as_posix()] = path
    return files


def _section(found: Tradeoff, said: list[str], files: Files) -> ReportSection:
    return ReportSection(
        title="The choice of the prior",
        sentences=tuple(f"{line[:1].upper()}{line[1:]}." for line in said),
        figures=(
            SectionFigure(
                _drawn(files, "tradeoff"),
                "Priors tried: the L-curve, and by standard deviation the mean square of events "
                "left out, GCV and the evidence. Dots are priors as good as the best within one "
                "standard error (shaded), the star is the one recommended.",
            ),
            SectionFigure(
                _drawn(files, "tradeoff_sign"),
                f"What keeps its sign in all {len(found.equally_good)} models of priors that are "
                "as good: the weakest of their perturbations, relative to the regional mean.",
            ),
        ),
    )


def _drawn(files: Files, name: str) -> tuple[str, ...]:
    """Name the files of a figure, one per format."""
    return tuple(file for file in files if file.startswith(f"figures/{name}."))


TRADEOFF: Final = Step(
    name="tradeoff",
    inputs=lambda folder, _: {name: folder.file(name) for name in ("model.nc", "inversion.npz")},
    settings=lambda settings: settings.model_dump(
        mode="json", include={"inversion", "tradeoff", "outputs"}
    ),
    work=run_tradeoff,
    builds_on=("invert",),
    on_request=True,
)
"""The step."""


def tell_tradeoff(folder: RunFolder) -> list[str]:
    """Return what the last trade-off in a folder found, sentence by sentence."""
    record = Provenance(folder.provenance).steps.get(TRADEOFF.name)
    return [] if record is None else list(record.remarks.values())


def apply_recommendation(folder: RunFolder) -> str:
    """Write the prior recommended into ``rayloom.toml``; the inversion is then to do again.

    Parameters
    ----------
    folder : RunFolder
        The folder of the trade-off: a run of one wave, or the part of one wave.

    Returns
    -------
    str
        What was written.

    Raises
    ------
    InputError
        If there is no trade-off yet, or the settings file is not in order.
    """
    import pandas as pd

    path = folder.file(_TABLE)
    if not path.exists():
        raise InputError(
            f"{folder.path} holds no trade-off to apply; make it with: "
            f"rayloom tradeoff {folder.path}"
        )
    table = pd.read_csv(path)
    best: Any = table[table["recommended"]].iloc[0]
    lengths = (
        float(best["correlation_horizontal_km"]),
        float(best["correlation_vertical_km"]),
    )
    inversion = folder.read_settings().inversion
    changed = prior_settings(inversion, float(best["prior_std_percent"]), lengths)
    values = {
        key: getattr(changed, key)
        for key in _PRIOR_KEYS
        if getattr(changed, key) != getattr(inversion, key)
    }
    if not values:
        return "rayloom.toml has this prior already"
    change_run_settings(folder.settings_file, "inversion", values)
    return "wrote to rayloom.toml [inversion]: " + ", ".join(
        f"{key} = {list(value) if isinstance(value, tuple) else value}"
        for key, value in values.items()
    )

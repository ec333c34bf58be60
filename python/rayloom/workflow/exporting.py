"""The step ``export``: files for viewers, figures and the report."""

from __future__ import annotations

from pathlib import Path

from rayloom.model import SlownessModel
from rayloom.outputs.report import write_report
from rayloom.outputs.report_section import ReportSection
from rayloom.outputs.results import write_figures, write_model_files
from rayloom.settings import RunSettings, run_settings_text
from rayloom.workflow.data import read_back_residuals, read_earth
from rayloom.workflow.folder import RunFolder
from rayloom.workflow.plan import Files, Outcome
from rayloom.workflow.record import Provenance, StepRecord
from rayloom.workflow.reporting import Reporter
from rayloom.workflow.result_file import load_result


def export_results(folder: RunFolder, settings: RunSettings, reporter: Reporter) -> Outcome:
    """Write viewer files, figures and the report of the inversion in a run folder."""
    earth = read_earth(folder, settings.earth.model)
    data = read_back_residuals(folder, earth, settings)
    model = SlownessModel.read_netcdf(folder.file("model.nc"))
    result = load_result(folder.file("inversion.npz"), data, model)
    reporter.progress("export", 0, 3)
    written: list[Path] = write_model_files(folder.path, result)
    reporter.progress("export", 1, 3)
    figures = write_figures(folder.figures, result, settings.outputs)
    reporter.progress("export", 2, 3)
    report = folder.file("report.html")
    write_report(
        report,
        result,
        figures=figures,
        settings_text=run_settings_text(settings, heading="", comments=False),
        provenance=_provenance(folder),
        sections=[ReportSection.read(path) for path in report_sections(folder).values()],
    )
    drawn = [path for figure in figures for path in figure.paths]
    files = [*written, *drawn, report]
    return Outcome(files={str(path.relative_to(folder.path).as_posix()): path for path in files})


def report_sections(folder: RunFolder) -> Files:
    """Name the parts of the report that steps done on request have left."""
    return {path.name: path for path in sorted(folder.path.glob("*_report.json"))}


def _provenance(folder: RunFolder) -> dict[str, str]:
    """Tell what made the model: versions, hashes of the tables, seeds, machine."""
    steps = {**Provenance(folder.run.provenance).steps, **Provenance(folder.provenance).steps}
    told: dict[str, str] = {}
    if "invert" in steps:
        invert = steps["invert"]
        told |= {f"version of {name}": version for name, version in invert.versions.items()}
        told |= {f"seed of {use}": str(seed) for use, seed in invert.seeds.items()}
        told["processor"] = " ".join([invert.machine.get("processor", ""), *_features(invert)])
        told["inverted"] = f"{invert.finished}, in {invert.seconds:.0f} s"
    if "residuals" in steps:
        tables = steps["residuals"].inputs
        told |= {f"SHA-256 of {name}": digest for name, digest in tables.items()}
    return told


def _features(record: StepRecord) -> list[str]:
    return [str(feature) for feature in record.machine.get("cpu_features", [])]

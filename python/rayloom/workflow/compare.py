"""The step ``compare``: straight, reference and bent rays at the same misfit.

:data:`COMPARE` is the step, :func:`tell_comparison` what it found.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np

from rayloom.appraisal.ray_comparison import BodyInModel, compare_bodies, main_bodies
from rayloom.inversion.comparison import RayInversion, compare_rays
from rayloom.outputs import write_table
from rayloom.outputs.comparison_figures import figure_ray_comparison
from rayloom.outputs.report_section import ReportSection, SectionFigure
from rayloom.outputs.slices import choose_layers
from rayloom.outputs.style import save_figure
from rayloom.settings import RunSettings
from rayloom.workflow.finished import finished_inversion
from rayloom.workflow.folder import RunFolder
from rayloom.workflow.plan import Files, Outcome, Step
from rayloom.workflow.record import Provenance
from rayloom.workflow.reporting import Reporter

if TYPE_CHECKING:
    import pandas as pd

_TABLE: Final = "ray_comparison.csv"
_SECTION: Final = "ray_comparison_report.json"
_LEAST_HITS: Final = 10
_BELOW_KM: Final = 35.0
"""Above it station terms and blocks cannot be told apart (base of the crust of ak135)."""


def run_comparison(folder: RunFolder, settings: RunSettings, reporter: Reporter) -> Outcome:
    """Invert with each kind of rays at equal χ² and write table, models and figure."""
    result = finished_inversion(folder, settings)
    entries = compare_rays(result, settings.inversion_settings(), progress=reporter.progress)
    grid = result.model.grid
    bent = entries[-1].model
    usable = (bent.fields["hits"] >= _LEAST_HITS) & (grid.depth_edges_km[:-1] >= _BELOW_KM - 0.01)
    regions = main_bodies(bent, usable)
    bodies = compare_bodies([bent, *(entry.model for entry in entries)], regions, usable)[1:]
    table = _table(entries, bodies)
    said = _sentences(entries, bodies)
    for line in said:
        reporter.note(line)
    files: Files = {_TABLE: folder.file(_TABLE)}
    write_table(files[_TABLE], table)
    for entry in entries:
        name = f"model_{entry.method}_rays.nc"
        files[name] = folder.file(name)
        entry.model.write_netcdf(files[name])
    layers = choose_layers(grid, usable if usable.any() else bent.fields["hits"] > 0)
    figure = figure_ray_comparison(
        {entry.method: entry.model for entry in entries},
        layers=[layers[i] for i in np.unique(np.linspace(0, len(layers) - 1, 3).astype(int))],
        stations=result.data.stations,
    )
    for path in save_figure(
        figure,
        folder.figures / "ray_comparison",
        formats=settings.outputs.figure_formats,
        dpi=settings.outputs.dpi,
    ):
        files[path.relative_to(folder.path).as_posix()] = path
    files[_SECTION] = folder.file(_SECTION)
    _section(said, files).write(files[_SECTION])
    remarks = {f"finding_{number}": line for number, line in enumerate(said, start=1)}
    return Outcome(files=files, remarks=remarks)


def _section(said: list[str], files: Files) -> ReportSection:
    return ReportSection(
        title="Straight, reference and bent rays",
        sentences=(
            "The same data and weights inverted with each kind of rays to the same χ².",
            *(f"{line[:1].upper()}{line[1:]}." for line in said),
        ),
        figures=(
            SectionFigure(
                tuple(name for name in files if name.startswith("figures/")),
                "Models by each kind of rays at the same χ², and how far straight and reference "
                "rays differ from bent ones; relative to the regional mean.",
            ),
        ),
    )


COMPARE: Final = Step(
    name="compare",
    inputs=lambda folder, _: {name: folder.file(name) for name in ("model.nc", "inversion.npz")},
    settings=lambda settings: settings.model_dump(
        mode="json", include={"forward", "inversion", "outputs"}
    ),
    work=run_comparison,
    builds_on=("invert",),
    on_request=True,
)
"""The step."""


def tell_comparison(folder: RunFolder) -> list[str]:
    """Return what the last comparison in a folder found, line by line."""
    record = Provenance(folder.provenance).steps.get(COMPARE.name)
    return [] if record is None else list(record.remarks.values())


def _table(
    entries: tuple[RayInversion, ...], bodies: tuple[tuple[BodyInModel, ...], ...]
) -> pd.DataFrame:
    import pandas as pd

    rows = []
    for entry, found in zip(entries, bodies, strict=True):
        row: dict[str, object] = {
            "rays": entry.method,
            "prior_std_percent": entry.prior_std_percent,
            "chi2": entry.chi2,
            "data_count": entry.data_count,
            "equal_chi2": entry.equal,
            "rms_s": entry.rms_s,
            "variance_reduction_percent": entry.variance_reduction_percent,
            "seconds": entry.seconds,
            "seconds_tracing": entry.seconds_tracing,
        }
        for body in found:
            name = body.body.split()[0]
            row |= {
                f"{name}_peak_percent": body.peak_percent,
                f"{name}_mean_percent": body.mean_percent,
                f"{name}_share_of_bent": body.share_of_amplitude,
                f"{name}_shift_km": body.shift_km,
                f"{name}_deeper_km": body.deeper_km,
            }
        rows.append(row)
    return pd.DataFrame(rows)


def _sentences(
    entries: tuple[RayInversion, ...], bodies: tuple[tuple[BodyInModel, ...], ...]
) -> list[str]:
    lines = []
    for entry, found in zip(entries, bodies, strict=True):
        parts = [
            f"{body.body.split()[0]} body {body.mean_percent:+.2f} % "
            f"({body.share_of_amplitude:.2f} of bent), {body.shift_km:.0f} km off, "
            f"{body.deeper_km:+.0f} km in depth"
            for body in found
        ]
        unequal = "" if entry.equal else " (not the same χ²)"
        lines.append(
            f"{entry.method}: rms {entry.rms_s:.3f} s, χ² {entry.chi2:.0f}{unequal}, variance "
            f"reduction {entry.variance_reduction_percent:.1f} %, prior "
            f"{entry.prior_std_percent:.2f} %, {entry.seconds:.0f} s"
            + "".join(f"; {part}" for part in parts)
        )
    return lines

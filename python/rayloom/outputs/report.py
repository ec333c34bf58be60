"""The report of a run: one HTML file that carries its figures inside."""

from __future__ import annotations

import base64
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

import numpy as np

from rayloom import __version__
from rayloom.outputs.report_section import ReportSection
from rayloom.outputs.results import WrittenFigure
from rayloom.outputs.tables import exclusion_table
from rayloom.writing import write_text

if TYPE_CHECKING:
    import pandas as pd

    from rayloom.inversion.result import InversionResult

MOST_OUTLIERS: Final = 20

CAUTION: Final = (
    "Models of this kind support research. They are not a hazard assessment: for any question "
    "of hazard or of ground engineering defer to the responsible observatory and to licensed "
    "practice."
)

READING: Final = (
    "Perturbations are relative to the mean of the region at each depth. Residuals relative to "
    "an event say nothing of a uniform change of a layer or of the whole region.",
    "Size and extent depend on the prior as well as on the data: where rays are few or run in "
    "one direction, the model falls back to its reference and anomalies smear along the rays.",
    "A block that rays cross is not yet a block that is resolved. Restoration and resolution "
    "tests tell the two apart.",
    "This is ray theory: structure narrower than the Fresnel zone (several tens of kilometres "
    "at mantle depths for waves of about 1 Hz) is not seen as it is.",
    "Low velocity is not temperature: melt, water and composition are alternatives.",
)

_HISTORY: Final = {
    "iteration": ("iteration", "{:d}"),
    "rms_s": ("RMS, all picks (s)", "{:.4f}"),
    "rms_kept_s": ("RMS, without suspected outliers (s)", "{:.4f}"),
    "variance_reduction_percent": ("variance reduction (%)", "{:.1f}"),
    "chi2": ("χ²", "{:.0f}"),
    "chi2_expected": ("χ² expected", "{:.0f}"),
    "model_rms_percent": ("model RMS (%)", "{:.2f}"),
    "basin_jumps": ("rays on another course", "{:d}"),
    "seconds": ("time (s)", "{:.1f}"),
}

_MEDIA: Final = {".png": "image/png", ".svg": "image/svg+xml"}


@dataclass(frozen=True)
class ReportTable:
    """A table of the report.

    Attributes
    ----------
    names : tuple of str
        Column names.
    rows : tuple of tuple of str
        Cells.
    numbers : tuple of int
        Columns to align on the right.
    """

    names: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]
    numbers: tuple[int, ...] = ()


def write_report(
    path: str | Path,
    result: InversionResult,
    *,
    figures: Sequence[WrittenFigure] = (),
    settings_text: str = "",
    provenance: Mapping[str, str] | None = None,
    sections: Sequence[ReportSection] = (),
    title: str = "Velocity model from distant earthquakes",
) -> None:
    """Write the report of an inversion.

    Parameters
    ----------
    path : str or Path
        The file, ``report.html``.
    result : InversionResult
        The inversion.
    figures : sequence of WrittenFigure
        Shown when they were written as PNG or SVG.
    settings_text : str
        The settings used, as in their file.
    provenance : mapping of str to str, optional
        Versions, hashes of inputs, seeds.
    sections : sequence of ReportSection
        What steps done on request found; their figures lie beside the report.
    title : str
        Title of the page.

    Raises
    ------
    FileAccessError
        A figure cannot be read or the report cannot be written.
    """
    write_text(
        path,
        render_report(
            result,
            figures=figures,
            settings_text=settings_text,
            provenance=provenance,
            sections=sections,
            folder=Path(path).parent,
            title=title,
        ),
    )


def render_report(
    result: InversionResult,
    *,
    figures: Sequence[WrittenFigure] = (),
    settings_text: str = "",
    provenance: Mapping[str, str] | None = None,
    sections: Sequence[ReportSection] = (),
    folder: Path = Path(),
    title: str = "Velocity model from distant earthquakes",
) -> str:
    """Return the text of the report; see :func:`write_report`.

    Figures of ``sections`` are looked for in ``folder``.
    """
    from jinja2 import Environment, PackageLoader, StrictUndefined

    environment = Environment(
        loader=PackageLoader("rayloom.outputs"),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
    )
    return environment.get_template("report.html.j2").render(
        title=title,
        lead=_lead(result),
        caution=CAUTION,
        outcome=_outcome(result),
        remarks=_remarks(result),
        figures=_embedded(figures),
        sections=[_section(section, folder) for section in sections],
        data_rows=_data_rows(result),
        exclusions=_exclusions(result),
        outliers=_outliers(result),
        outlier_remark=_outlier_remark(result),
        history=_history(result.history_frame()),
        reading=READING,
        settings_text=settings_text,
        provenance=list((provenance or {}).items()),
        version=__version__,
    )


def _lead(result: InversionResult) -> str:
    grid = result.model.grid
    nx, ny, nz = grid.shape
    top, bottom = grid.depth_edges_km[[0, -1]]
    where = ""
    if not grid.frame.is_flat:
        where = (
            f" around longitude {grid.frame.longitude_deg:.2f}°, "
            f"latitude {grid.frame.latitude_deg:.2f}°"
        )
    return (
        f"{result.model.wave}-wave velocity in {nx} × {ny} × {nz} blocks{where}, "
        f"from {top:g} to {bottom:g} km depth."
    ).replace("-wave", "\N{NON-BREAKING HYPHEN}wave")


def _outcome(result: InversionResult) -> list[tuple[str, str]]:
    first, last = result.history[0], result.history[-1]
    percent = result.model.perturbation_percent
    hits = result.model.fields.get("hits")
    seen = percent[hits > 0] if hits is not None and np.any(hits > 0) else percent.ravel()
    return [
        ("Iterations", f"{last.iteration}; stopped: {result.stopped_because}"),
        ("RMS residual", f"{first.rms_s:.3f} s → {last.rms_s:.3f} s, all picks"),
        (
            "RMS without suspected outliers",
            f"{first.rms_kept_s:.3f} s → {last.rms_kept_s:.3f} s"
            f"{_expected(last.rms_kept_expected_s, '{:.3f} s')}",
        ),
        ("Variance reduction", f"{last.variance_reduction_percent:.1f} % (robustly weighted)"),
        ("χ², robustly weighted", f"{last.chi2:.0f}{_expected(last.chi2_expected)}"),
        (
            "χ² without suspected outliers",
            f"{last.chi2_kept:.0f}{_expected(last.chi2_kept_expected)}",
        ),
        ("Prior", result.prior_sentence() or "damping and smoothing, as given"),
        (
            "Perturbation in blocks crossed by rays",
            f"RMS {last.model_rms_percent:.2f} %, from {seen.min():.1f} % to "
            f"{seen.max():+.1f} %".replace("-", "−"),
        ),
    ]


def _expected(value: float, form: str = "{:.0f}") -> str:
    return f" (expected {form.format(value)})" if np.isfinite(value) else ""


def _remarks(result: InversionResult) -> list[str]:
    last = result.history[-1]
    remarks = []
    if result.structure is not None:
        sentence = result.structure.sentence()
        remarks.append(f"{sentence[0].upper()}{sentence[1:]}.")
    if np.isfinite(last.chi2_expected) and last.chi2_expected > 0:
        ratio = last.chi2 / last.chi2_expected
        if ratio > 1.3:
            remarks.append(
                f"The misfit is {ratio:.1f} times what the uncertainties promise: they are too "
                "small, or the model cannot explain the data."
            )
        elif ratio < 0.7:
            remarks.append(
                f"The misfit is only {ratio:.2f} times what the uncertainties promise: they may "
                "be too large."
            )
    if not last.solver_converged:
        remarks.append("The last least-squares solution did not reach the accuracy asked for.")
    if last.variance_reduction_percent <= 0.0:
        remarks.append("The model explains no more of the data than its reference does.")
    return remarks


def _data_rows(result: InversionResult) -> list[tuple[str, str]]:
    data, used = result.data, result.used
    stations = np.unique(np.asarray(data.stations.labels)[data.station_index[used]])
    phases, picks = np.unique(np.asarray(data.phase)[used], return_counts=True)
    listed = ", ".join(
        f"{count} {name}" for name, count in zip(phases.tolist(), picks.tolist(), strict=True)
    )
    rows = [
        ("Picks used", f"{result.counts.data} ({listed})"),
        ("Events", f"{np.unique(data.event_index[used]).size}"),
        ("Stations", f"{stations.size}"),
        ("Event means removed", f"{result.counts.groups}"),
        ("Reference Earth", str(data.earth.name)),
    ]
    return [*rows, ("Picks left out", f"{len(exclusion_table(data, result))}")]


def _exclusions(result: InversionResult) -> ReportTable:
    table = exclusion_table(result.data, result)
    counts = table["reason"].value_counts()
    examples = dict(zip(table["reason"][::-1], table["detail"][::-1], strict=True))
    rows = tuple(
        (str(reason).replace("_", " "), str(count), str(examples[reason]))
        for reason, count in counts.to_dict().items()
    )
    return ReportTable(("reason", "picks", "for instance"), rows, (1,))


def _outliers(result: InversionResult) -> ReportTable:
    frame = result.outlier_frame().head(MOST_OUTLIERS)
    rows = tuple(
        (
            str(row["event"]),
            f"{row['network']}.{row['station']}",
            str(row["phase"]),
            _signed(row["residual_after_s"], 2),
            _signed(row["standardised"], 1),
        )
        for row in frame.to_dict("records")
    )
    names = ("event", "station", "phase", "residual after (s)", "in uncertainties")
    return ReportTable(names, rows, (3, 4))


def _outlier_remark(result: InversionResult) -> str:
    weights = result.weights[result.suspected_outlier]
    count, silent = weights.size, int(np.count_nonzero(weights == 0.0))
    if silent == count:
        bearing = "without weight in the last model"
    elif silent == 0:
        bearing = "with the weight that the robust loss leaves"
    else:
        bearing = f"{silent} of them without weight in the last model"
    shown = f"; the {MOST_OUTLIERS} largest are shown here" if count > MOST_OUTLIERS else ""
    picks = "1 pick is" if count == 1 else f"{count} picks are"
    return (
        f"{picks} suspected, {bearing}. They deserve a second look{shown}. All are listed in "
        "suspected_outliers.csv."
    )


def _signed(value: float, digits: int) -> str:
    return f"{value:+.{digits}f}".replace("-", "−")


def _history(frame: pd.DataFrame) -> ReportTable:
    columns = [name for name in _HISTORY if name in frame]
    rows = tuple(
        tuple(_cell(_HISTORY[name][1], record[name]) for name in columns)
        for record in frame.to_dict("records")
    )
    return ReportTable(
        tuple(_HISTORY[name][0] for name in columns), rows, tuple(range(len(columns)))
    )


def _cell(form: str, value: Any) -> str:
    if not np.isfinite(value):
        return "–"
    return form.format(int(value) if form == "{:d}" else float(value))


def _section(section: ReportSection, folder: Path) -> dict[str, Any]:
    figures = [
        WrittenFigure(tuple(folder / path for path in figure.paths), figure.caption)
        for figure in section.figures
    ]
    return {
        "title": section.title,
        "sentences": section.sentences,
        "tables": [table for table in section.tables if table.rows],
        "figures": _embedded(figures),
    }


def _embedded(figures: Sequence[WrittenFigure]) -> list[dict[str, str]]:
    found = []
    for figure in figures:
        path = next((path for path in figure.paths if path.suffix in _MEDIA), None)
        if path is not None:
            content = base64.b64encode(path.read_bytes()).decode("ascii")
            source = f"data:{_MEDIA[path.suffix]};base64,{content}"
            name = path.stem.replace("_", " ")
            found.append({"source": source, "name": name, "caption": figure.caption})
    return found

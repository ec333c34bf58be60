"""What an appraisal leaves in the run folder: fields, tables, figures, its part of the report."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING, Final

import numpy as np
from numpy.typing import NDArray

from rayloom.outputs import save_figure, write_table
from rayloom.outputs.appraisal_figures import (
    figure_directional_coverage,
    figure_resolved,
    figure_standard_errors,
)
from rayloom.outputs.report_section import ReportSection, SectionFigure, SectionTable
from rayloom.outputs.restoration_figure import figure_restoration
from rayloom.outputs.rose_figure import figure_roses, rose_counts
from rayloom.outputs.spread_figure import figure_point_spread
from rayloom.settings import RunSettings
from rayloom.workflow.folder import RunFolder
from rayloom.workflow.sample_file import save_samples
from rayloom.workflow.written import Written

if TYPE_CHECKING:
    import pandas as pd
    from matplotlib.figure import Figure

    from rayloom.inversion import InversionResult
    from rayloom.workflow.appraising import Appraisal

Floats = NDArray[np.float64]
SECTION_FILE: Final = "appraisal_report.json"


def write_appraisal(folder: RunFolder, settings: RunSettings, found: Appraisal) -> Written:
    """Write everything of an appraisal.

    Parameters
    ----------
    folder : RunFolder
        The run folder, or its part of one wave.
    settings : RunSettings
        The settings.
    found : Appraisal
        What the step worked out.

    Returns
    -------
    Written

    Raises
    ------
    FileAccessError
        If a file cannot be written.
    """
    fields = folder.file("appraisal.nc")
    found.result.model.with_fields(**_fields(found)).write_netcdf(fields)
    samples = folder.file("posterior_samples.npz")
    save_samples(samples, found.samples)
    restoration, spread = restoration_frame(found), spread_frame(found)
    tables = {"restoration.csv": restoration, "point_spread.csv": spread}
    for name, table in tables.items():
        write_table(folder.file(name), table)
    figures = _write_figures(folder, settings, found)
    section = ReportSection(
        title="What the model is worth",
        sentences=tuple(sentences(found, settings.appraisal.min_hits)),
        tables=(_restoration_table(restoration), _spread_table(spread)),
        figures=tuple(figures),
    )
    section.write(folder.file(SECTION_FILE))
    names = [fields.name, samples.name, *tables, SECTION_FILE]
    drawn = [path for figure in figures for path in figure.paths]
    return Written({name: folder.file(name) for name in (*names, *drawn)}, section)


def _fields(found: Appraisal) -> dict[str, Floats]:
    wave = found.result.model.wave.lower()
    probing, coverage = found.probing, found.coverage
    fields: dict[str, Floats] = {
        f"sigma_dv{wave}": found.samples.sigma_percent(),
        "data_share": found.samples.resolution_mask(),
        "error_of_data_percent": found.repeats.sigma_percent(),
        "resolution": probing.diagonal,
        "resolution_error": probing.diagonal_error,
        "smearing_x_km": _finite(probing.width_x_km),
        "smearing_y_km": _finite(probing.width_y_km),
        "smearing_depth_km": _finite(probing.width_depth_km),
        "directional_coverage": coverage.directional,
        "fresnel_width_km": coverage.fresnel_width_km,
    }
    for name, resampled in (("bootstrap", found.bootstrap), ("jackknife", found.jackknife)):
        if resampled is not None:
            fields[f"{name}_error_percent"] = resampled.sigma_percent()
    for restoration in found.restorations:
        word = _word(restoration.name)
        fields[f"put_in_{word}_percent"] = restoration.truth_percent
        fields[f"came_back_{word}_percent"] = restoration.restored_percent
    return fields


def sentences(found: Appraisal, min_hits: int) -> list[str]:
    """Say in words what the appraisal found in blocks with enough rays.

    Parameters
    ----------
    found : Appraisal
        What the step worked out.
    min_hits : int
        Rays that a block needs to count.
    """
    covered = np.asarray(found.result.model.fields["hits"]) >= min_hits
    if not np.any(covered):
        return [f"No block is crossed by {min_hits} rays: nothing can be said of this model."]
    sigma, share = found.samples.sigma_percent()[covered], found.samples.resolution_mask()[covered]
    wave = found.result.model.wave.lower()
    said = [
        f"In the {int(covered.sum())} blocks with at least {min_hits} rays the standard error of "
        f"dV{wave} is {np.median(sigma):.2f} % (median; {np.quantile(sigma, 0.05):.2f} to "
        f"{np.quantile(sigma, 0.95):.2f} % in nine of ten), from {found.samples.count} posterior "
        f"samples; the data take away {100.0 * np.median(share):.0f} % of the prior variance "
        "(median)."
    ]
    if found.samples.approximate:
        said.append(
            "The weights are robust ones, so these errors are approximate; the event bootstrap "
            "stands beside them."
        )
    if found.bootstrap is not None:
        ratio = found.bootstrap.sigma_percent()[covered] / np.maximum(
            found.repeats.sigma_percent()[covered], 1e-12
        )
        said.append(
            f"Events weighted at random ({found.bootstrap.count} times) scatter the model by "
            f"{np.median(ratio):.2f} times (median) what the uncertainties of the picks promise"
            f"{_expected_scatter(found.result)}; both leave out how far the prior pulls the model."
        )
    return [*said, *_width_sentences(found, covered)]


def _expected_scatter(result: InversionResult) -> str:
    """Tell what right uncertainties would give: the model takes up part of the errors."""
    free = result.counts.data - result.counts.groups
    taken = result.history[-1].resolved / max(free, 1)
    if not 0.0 <= taken < 1.0:
        return ""
    return f" (right ones give {0.85 * np.sqrt(1.0 - taken):.2f} to {np.sqrt(1.0 - taken):.2f})"


def _width_sentences(found: Appraisal, covered: NDArray[np.bool_]) -> list[str]:
    probing, coverage = found.probing, found.coverage
    widths = [
        float(np.median(values[covered & np.isfinite(values)]))
        for values in (probing.width_x_km, probing.width_y_km, probing.width_depth_km)
        if np.any(covered & np.isfinite(values))
    ]
    said = []
    if len(widths) == 3:
        said.append(
            f"A point smears to a full width of about {widths[0]:.0f} km along x, "
            f"{widths[1]:.0f} km along y and {widths[2]:.0f} km in depth (medians, "
            f"{probing.probes} random probes)."
        )
    fresnel = np.nanmedian(np.where(covered, coverage.fresnel_width_km, np.nan))
    block = np.median(coverage.block_width_km[covered])
    said.append(
        f"This is ray theory: the first Fresnel zone is {fresnel:.0f} km wide (median) where "
        f"blocks are {block:.0f} km wide."
    )
    return said


def restoration_frame(found: Appraisal) -> pd.DataFrame:
    """List how well each pattern came back in each region."""
    import pandas as pd

    rows = [
        {
            "pattern": restoration.name,
            "region": judged.region,
            "blocks": judged.blocks,
            "rms_put_in_percent": judged.amplitude_percent,
            "restored_share": judged.restored_share,
            "similarity": judged.similarity,
        }
        for restoration in found.restorations
        for judged in restoration.judgements
    ]
    return pd.DataFrame(rows, columns=[*_RESTORATION_COLUMNS])


_RESTORATION_COLUMNS: Final = {
    "pattern": "pattern",
    "region": "region",
    "blocks": "blocks",
    "rms_put_in_percent": "RMS put in (%)",
    "restored_share": "amplitude restored",
    "similarity": "similarity",
}


def spread_frame(found: Appraisal) -> pd.DataFrame:
    """List the point-spread of the chosen blocks."""
    import pandas as pd

    frame = found.result.model.grid.frame
    rows = []
    for spread in found.spreads:
        x, y, depth = spread.point
        longitude, latitude = frame.geographic_coordinates(x, y)
        column, row = spread.column_width, spread.row_width
        rows.append(
            {
                "longitude": float(longitude),
                "latitude": float(latitude),
                "depth_km": depth,
                "resolution": spread.diagonal,
                "column_width_x_km": column.x_km,
                "column_width_y_km": column.y_km,
                "column_width_depth_km": column.depth_km,
                "row_width_x_km": row.x_km,
                "row_width_y_km": row.y_km,
                "row_width_depth_km": row.depth_km,
                "longest": column.longest,
            }
        )
    return pd.DataFrame(rows)


def _restoration_table(frame: pd.DataFrame) -> SectionTable:
    rows = tuple(
        (
            str(row["pattern"]),
            str(row["region"]).replace("-", "−"),
            str(row["blocks"]),
            _cell(row["rms_put_in_percent"], 2),
            _cell(row["restored_share"], 2),
            _cell(row["similarity"], 2),
        )
        for row in frame.to_dict("records")
    )
    return SectionTable(
        caption="Restoration in blocks with enough rays. Amplitude restored: slope of found on "
        "put in, 1 if whole. Similarity: 1 for the same pattern, 0 for an unrelated one.",
        names=tuple(_RESTORATION_COLUMNS.values()),
        rows=rows,
        numbers=(2, 3, 4, 5),
    )


def _spread_table(frame: pd.DataFrame) -> SectionTable:
    names = ("longitude", "latitude", "depth (km)", "R", "width x (km)", "y (km)", "depth (km)")
    rows = tuple(
        (
            _cell(row["longitude"], 2),
            _cell(row["latitude"], 2),
            _cell(row["depth_km"], 0),
            _cell(row["resolution"], 3),
            _cell(row["column_width_x_km"], 0),
            _cell(row["column_width_y_km"], 0),
            _cell(row["column_width_depth_km"], 0),
        )
        for row in frame.to_dict("records")
    )
    return SectionTable(
        caption="What single blocks become: diagonal R of the resolution matrix and full widths "
        "at half height.",
        names=names,
        rows=rows,
        numbers=tuple(range(len(names))),
    )


def _write_figures(
    folder: RunFolder, settings: RunSettings, found: Appraisal
) -> list[SectionFigure]:
    chosen = settings.outputs
    written = []
    for name, figure, caption in _figures(settings, found):
        paths = save_figure(
            figure, folder.figures / name, formats=chosen.figure_formats, dpi=chosen.dpi
        )
        names = tuple(path.relative_to(folder.path).as_posix() for path in paths)
        written.append(SectionFigure(names, caption))
    return written


def _figures(settings: RunSettings, found: Appraisal) -> list[tuple[str, Figure, str]]:
    result, data = found.result, found.result.data
    model, depths = result.model, settings.outputs.slice_depths_km
    counts = rose_counts(
        data.station_index[result.used],
        np.asarray(data.back_azimuth_deg, dtype=np.float64)[result.used],
        len(data.stations.network),
    )
    return [
        (
            "appraisal_resolved",
            figure_resolved(
                model,
                found.samples.resolution_mask(),
                resolved_from=settings.appraisal.resolved_from,
                stations=data.stations,
                depths_km=depths,
                colour_limit_percent=settings.outputs.colour_limit_percent,
            ),
            "The model relative to the regional mean; hatched and faded where the data take away "
            f"less than {100.0 * settings.appraisal.resolved_from:g} % of the prior variance.",
        ),
        (
            "appraisal_errors",
            figure_standard_errors(
                model, found.samples.sigma_percent(), stations=data.stations, depths_km=depths
            ),
            "Standard error of the perturbation: scatter of models that data and prior allow, at "
            "fixed rays and weights.",
        ),
        (
            "appraisal_directions",
            figure_directional_coverage(
                model, found.coverage.directional, stations=data.stations, depths_km=depths
            ),
            "Directional coverage: where rays share a plane, structure smears along it.",
        ),
        (
            "appraisal_roses",
            figure_roses(model.grid, data.stations, counts),
            "Where the picks of each station come from.",
        ),
        (
            "appraisal_point_spread",
            figure_point_spread(model.grid, found.spreads),
            "What the inversion makes of a perturbation in one block (outlined): a map and two "
            "sections for each point.",
        ),
        *(
            (
                f"appraisal_restoration_{_word(restoration.name)}",
                figure_restoration(restoration, model, depths_km=depths),
                f"Restoration of {restoration.name}: put in above, found below, on one scale.",
            )
            for restoration in found.restorations
        ),
    ]


def _finite(values: Floats) -> Floats:
    return np.where(np.isfinite(values), values, np.nan)


def _word(name: str) -> str:
    return re.sub(r"[^A-Za-z0-9]+", "_", name).strip("_").lower() or "pattern"


def _cell(value: object, digits: int) -> str:
    number = float(str(value))
    if not np.isfinite(number):
        return "beyond the box" if np.isinf(number) else "–"
    return f"{number:.{digits}f}".replace("-", "−")

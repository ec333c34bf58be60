"""Everything that an inversion leaves in its run folder, in three calls."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from rayloom.outputs.residual_figures import figure_misfit, figure_station_residuals
from rayloom.outputs.section import figure_section
from rayloom.outputs.section_line import SectionLine, default_lines
from rayloom.outputs.settings import OutputSettings
from rayloom.outputs.slices import figure_depth_slices
from rayloom.outputs.style import save_figure
from rayloom.outputs.tables import (
    write_exclusions_csv,
    write_history_csv,
    write_mislocations_csv,
    write_residuals_csv,
    write_station_terms_csv,
    write_table,
)
from rayloom.outputs.vtk import (
    write_events_vtp,
    write_model_vts,
    write_rays_vtp,
    write_stations_vtp,
)

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from rayloom.inversion.result import InversionResult


@dataclass(frozen=True)
class WrittenFigure:
    """A figure on disk.

    Attributes
    ----------
    paths : tuple of Path
        The files, one per format.
    caption : str
        What it shows and how to read it.
    """

    paths: tuple[Path, ...]
    caption: str


def write_tables(folder: str | Path, result: InversionResult) -> list[Path]:
    """Write the tables of an inversion.

    Parameters
    ----------
    folder : str or Path
        The run folder; made if missing.
    result : InversionResult
        The inversion.

    Returns
    -------
    list of Path
        ``history.csv``, ``residuals_after.csv``, ``exclusions.csv``,
        ``suspected_outliers.csv``, ``station_terms.csv`` and ``mislocations.csv``;
        ``uncertainty_factors.csv`` where uncertainties were rescaled.

    Raises
    ------
    FileAccessError
        A file cannot be written.
    """
    base = Path(folder)
    names = (
        "history.csv",
        "residuals_after.csv",
        "exclusions.csv",
        "suspected_outliers.csv",
        "station_terms.csv",
        "mislocations.csv",
    )
    history, residuals, exclusions, outliers, terms, mislocations = (base / name for name in names)
    write_history_csv(history, result)
    write_residuals_csv(residuals, result.data, result)
    write_exclusions_csv(exclusions, result.data, result)
    write_table(outliers, result.outlier_frame())
    write_station_terms_csv(terms, result)
    write_mislocations_csv(mislocations, result)
    written = [history, residuals, exclusions, outliers, terms, mislocations]
    if result.uncertainty_factor is not None:
        written.append(base / "uncertainty_factors.csv")
        write_table(written[-1], result.uncertainty_frame())
    return written


def write_model_files(folder: str | Path, result: InversionResult) -> list[Path]:
    """Write the model, and the rays, stations and events for three-dimensional viewers.

    Parameters
    ----------
    folder : str or Path
        The run folder; made if missing.
    result : InversionResult
        The inversion.

    Returns
    -------
    list of Path
        ``model.vts``, ``model.nc``, ``rays.vtp``, ``stations.vtp`` and
        ``events.vtp``.

    Raises
    ------
    FileAccessError
        A file cannot be written.
    """
    base = Path(folder)
    data, grid = result.data, result.model.grid
    write_model_vts(base / "model.vts", result.model)
    result.model.write_netcdf(base / "model.nc")
    _write_rays(base / "rays.vtp", result)
    terms = {f"term_{phase}_s": values for phase, values in result.station_terms_s.items()}
    used = np.bincount(data.station_index[result.used], minlength=len(data.stations.network))
    write_stations_vtp(
        base / "stations.vtp", data.stations, grid.frame, values={**terms, "picks": used}
    )
    write_events_vtp(base / "events.vtp", data.events, grid)
    names = ("model.vts", "model.nc", "rays.vtp", "stations.vtp", "events.vtp")
    return [base / name for name in names]


def _write_rays(path: Path, result: InversionResult) -> None:
    from rayloom.forward import Rays

    assert isinstance(result.rays, Rays)
    data, rows = result.data, result.ray_rows
    ray_values = {
        "residual_row": rows,
        "event_index": data.event_index[rows],
        "station_index": data.station_index[rows],
        "residual_before_s": data.relative_residual_s[rows],
        "residual_after_s": result.residual_after_s[rows],
        "weight": result.weights[rows],
    }
    write_rays_vtp(path, result.rays, values=ray_values)


def write_figures(
    folder: str | Path, result: InversionResult, settings: OutputSettings
) -> list[WrittenFigure]:
    """Draw and write the figures of an inversion.

    Parameters
    ----------
    folder : str or Path
        The folder of the figures; made if missing.
    result : InversionResult
        The inversion.
    settings : OutputSettings
        What to draw and how.

    Returns
    -------
    list of WrittenFigure
        Depth slices, sections, station residuals, misfit.

    Raises
    ------
    InputError
        A slice lies outside the model, or a section is not defined.
    FileAccessError
        A file cannot be written.
    """
    base = Path(folder)
    lines = _lines(result, settings)
    figures = [
        ("depth_slices", *_slices(result, settings, lines)),
        *(
            (f"section_{number}", *_section(result, settings, line))
            for number, line in enumerate(lines, start=1)
        ),
        ("station_residuals", *_stations(result)),
        ("misfit", *_misfit(result)),
    ]
    written = []
    for name, figure, caption in figures:
        paths = save_figure(figure, base / name, formats=settings.figure_formats, dpi=settings.dpi)
        written.append(WrittenFigure(tuple(paths), caption))
    return written


def _lines(result: InversionResult, settings: OutputSettings) -> list[SectionLine]:
    grid = result.model.grid
    if settings.sections:
        return [SectionLine.from_settings(grid.frame, section) for section in settings.sections]
    return list(default_lines(grid))


def _slices(
    result: InversionResult, settings: OutputSettings, lines: list[SectionLine]
) -> tuple[Figure, str]:
    figure = figure_depth_slices(
        result.model,
        stations=result.data.stations,
        depths_km=settings.slice_depths_km,
        colour_limit_percent=settings.colour_limit_percent,
        lines=lines,
    )
    return figure, (
        f"Velocity perturbation of {result.model.wave} waves by layer, relative to the regional "
        "mean: red is slower, blue faster. The mean of a layer itself is beyond the reach of "
        "relative residuals. Grey blocks are crossed by no ray; colour elsewhere does not mean "
        "that the block is resolved. Black lines: the sections below."
    )


def _section(
    result: InversionResult, settings: OutputSettings, line: SectionLine
) -> tuple[Figure, str]:
    figure = figure_section(
        result.model,
        line,
        stations=result.data.stations,
        band_km=settings.section_band_km,
        earth=result.data.earth,
        colour_limit_percent=settings.colour_limit_percent,
    )
    return figure, (
        f"Section {line.name}–{line.name}′, {line.length_km:.0f} km long, at true aspect. "
        f"Triangles: stations within {settings.section_band_km:g} km of the line, heights "
        f"exaggerated. Dashed: discontinuities of {result.data.earth.name}. Rays of distant "
        "earthquakes come from below, so anomalies smear upwards and downwards along them."
    )


def _stations(result: InversionResult) -> tuple[Figure, str]:
    figure = figure_station_residuals(result.data, residual_after_s=result.residual_after_s)
    return figure, (
        "Median residual of each station relative to its events: red is late. A pattern "
        "that remains after the inversion is not explained by the model or station terms."
    )


def _misfit(result: InversionResult) -> tuple[Figure, str]:
    figure = figure_misfit(
        result.history_frame(),
        before_s=result.data.relative_residual_s,
        after_s=result.residual_after_s,
        suspected_outlier=result.suspected_outlier,
    )
    return figure, (
        "Misfit over the iterations (0 is the starting model) and residuals before and after."
    )

"""What the step ``bodies`` leaves in the run folder: tables, figures, its part of the report."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, Any, Final

import numpy as np

from rayloom.appraisal.bodies import Body, BodyExtent, Interval
from rayloom.appraisal.leaks import Leak
from rayloom.appraisal.squeezing import SqueezedFirst
from rayloom.appraisal.temperature import ALTERNATIVES, CAVEAT
from rayloom.outputs import figure_depth_slices, save_figure, write_table
from rayloom.outputs.body_figures import figure_bodies
from rayloom.outputs.body_tables import (
    body_table,
    leak_table,
    squeezing_table,
    write_bodies_json,
)
from rayloom.outputs.leak_figure import figure_leaks
from rayloom.outputs.report_section import ReportSection, SectionFigure, SectionTable
from rayloom.outputs.squeezing_figure import figure_squeezing
from rayloom.settings import RunSettings
from rayloom.workflow.folder import RunFolder
from rayloom.workflow.written import Written

if TYPE_CHECKING:
    from rayloom.workflow.bodies import FoundBodies

SECTION_FILE: Final = "bodies_report.json"
SQUEEZED_FILE: Final = "squeezed.nc"

_CAPTIONS: Final = {
    "bodies": "Bodies: outline of the blocks that reach half of the peak (on the map from all "
    "depths together); green: 90 % intervals of centroid, top and base. Relative to the "
    "regional mean.",
    "squeezing": "Squeezing: structure is forbidden below (red) or above (blue) a depth, in the "
    "block columns of the body. A low p-value says that the data object. What they demand may "
    "be the body or anything else in its columns.",
    "demanded_outside": "What the data demand outside the bodies: structure was first allowed in "
    "the bodies, their surroundings and the crust alone; this is what a free inversion of the "
    "rest adds. Relative to the regional mean.",
    "leaks": "Leak tests: inversions of the delays of anomalies beside, below and in the crust "
    "alone. Strongest perturbation along y, relative to the regional mean.",
}


def write_bodies(folder: RunFolder, settings: RunSettings, found: FoundBodies) -> Written:
    """Write everything of the step.

    Parameters
    ----------
    folder : RunFolder
        The run folder, or its part of one wave.
    settings : RunSettings
        The settings.
    found : FoundBodies
        What the step worked out.

    Raises
    ------
    FileAccessError
        If a file cannot be written.
    """
    grid = found.result.model.grid
    tables = {
        "bodies.csv": body_table(found.bodies, found.extents),
        "squeezing.csv": squeezing_table(found.extents),
    }
    if found.leaks:
        tables["leaks.csv"] = leak_table(found.leaks, grid)
    for name, table in tables.items():
        write_table(folder.file(name), table)
    write_bodies_json(folder.file("bodies.json"), found.bodies, found.extents)
    figures = _write_figures(folder, settings, found)
    if found.squeezed is not None:
        _write_squeezed(folder, found, found.squeezed)
    section = ReportSection(
        title="Where the anomalies are",
        sentences=tuple(sentences(found)),
        tables=(_table(found),) if found.bodies else (),
        figures=tuple(figures),
    )
    section.write(folder.file(SECTION_FILE))
    drawn = [path for figure in figures for path in figure.paths]
    names = [*tables, "bodies.json", SECTION_FILE, *drawn]
    if found.squeezed is not None:
        names.append(SQUEEZED_FILE)
    return Written({name: folder.file(name) for name in names}, section)


def sentences(found: FoundBodies) -> list[str]:
    """Say in words where bodies are and what could feign them.

    Parameters
    ----------
    found : FoundBodies
        What the step worked out.
    """
    if not found.bodies:
        said = ["no body stands out of the resolved blocks"]
    else:
        said = [_said_of(body, found.extents[body.name]) for body in found.bodies]
    if any(body.temperature for body in found.bodies):
        said.append(f"temperatures: {CAVEAT} Alternatives: {'; '.join(ALTERNATIVES)}.")
    if found.squeezed is not None:
        said.append(_said_of_the_rest(found, found.squeezed))
    if found.leaks:
        said.append(_said_of_leaks(found.leaks))
    return said


def _said_of(body: Body, extent: BodyExtent) -> str:
    demanded = [
        f"{side} {depth_km:.0f} km"
        for side, depth_km in (
            ("above", extent.demanded_top_km),
            ("below", extent.demanded_base_km),
        )
        if np.isfinite(depth_km)
    ]
    parts = [
        f"{body.name}: centroid {body.longitude_deg.estimate:.2f}, "
        f"{body.latitude_deg.estimate:.2f}, depth {_shown(body.interval('depth_km'))} km; "
        f"top {_shown(body.interval('top_km'))} km, base {_shown(body.interval('base_km'))} km; "
        f"peak {_shown(body.interval('peak_percent'), '.1f')} %; "
        f"in {100.0 * body.existence_share:.0f} % of the samples",
        f"in its columns the data demand structure {' and '.join(demanded) or 'nowhere for sure'} "
        "(squeezing, p < 0.01)",
    ]
    if body.touches_edge:
        parts.append("it may go on in blocks that are not resolved")
    if body.smearing.flagged:
        parts.append(
            f"it is no longer than the point-spread towards azimuth "
            f"{body.smearing.azimuth_deg:.0f}°, {body.smearing.plunge_deg:.0f}° down"
        )
    if body.temperature is not None:
        parts.append(str(body.temperature))
    return "; ".join(parts)


def _said_of_the_rest(found: FoundBodies, squeezed: SqueezedFirst) -> str:
    outside = found.field.shown & ~np.logical_or.reduce(
        [body.region.domain for body in found.bodies]
    )
    largest = np.abs(squeezed.demanded_percent[outside]).max(initial=0.0)
    return (
        "with structure in the bodies and the crust tried first, the data still demand up to "
        f"{largest:.1f} % in the resolved blocks elsewhere"
    )


def _write_squeezed(folder: RunFolder, found: FoundBodies, squeezed: SqueezedFirst) -> None:
    number = np.zeros(found.result.model.grid.shape)
    for position, body in enumerate(found.bodies, start=1):
        number[body.region.mask] = position
    found.result.model.with_fields(
        body_number=number,
        bodies_only_percent=squeezed.squeezed_percent,
        demanded_outside_percent=squeezed.demanded_percent,
    ).write_netcdf(folder.file(SQUEEZED_FILE))


def _said_of_leaks(leaks: tuple[Leak, ...]) -> str:
    parts = []
    for name in dict.fromkeys(leak.source.name for leak in leaks):
        usual = next(leak for leak in leaks if leak.source.name == name)
        parts.append(f"{name} {usual.peak_percent:+.2f} % ({usual.delay_ms:.0f} ms rms of delay)")
    contrast = leaks[0].source.contrast_percent
    return (
        f"leak tests with anomalies of {contrast:g} %: strongest perturbation feigned below the "
        f"crust: {', '.join(parts)}"
    )


def _shown(interval: Interval, form: str = ".0f") -> str:
    return f"{interval.estimate:{form}} ({interval.low:{form}} to {interval.high:{form}})"


def _table(found: FoundBodies) -> SectionTable:
    names = ("depth_km", "top_km", "base_km", "width_km", "mean_percent", "peak_percent")
    rows = [
        (
            body.name,
            *(
                _shown(body.interval(name), ".1f" if "percent" in name else ".0f")
                for name in names
            ),
            _shown(body.interval("explained_ms")),
            f"{100.0 * body.existence_share:.0f}",
        )
        for body in found.bodies
    ]
    heads = ("depth (km)", "top (km)", "base (km)", "width (km)", "mean (%)", "peak (%)")
    return SectionTable(
        caption="Bodies: medians of the posterior samples and central 90 %.",
        names=("body", *heads, "explained (ms)", "in samples (%)"),
        rows=tuple(rows),
        numbers=tuple(range(1, len(heads) + 3)),
    )


def _write_figures(
    folder: RunFolder, settings: RunSettings, found: FoundBodies
) -> list[SectionFigure]:
    grid = found.result.model.grid
    figures: dict[str, Any] = {}
    if found.bodies:
        figures["bodies"] = figure_bodies(
            grid, found.field, found.bodies, stations=found.result.data.stations
        )
        figures["squeezing"] = figure_squeezing(found.extents)
    if found.squeezed is not None:
        figures["demanded_outside"] = figure_depth_slices(
            found.result.model,
            stations=found.result.data.stations,
            depths_km=settings.outputs.slice_depths_km,
            field=replace(found.field, values=found.squeezed.demanded_percent),
        )
    if found.leaks:
        figures["leaks"] = figure_leaks(grid, found.leaks, crust_km=settings.bodies.top_km)
    chosen = settings.outputs
    written = []
    for name, figure in figures.items():
        paths = save_figure(
            figure, folder.figures / name, formats=chosen.figure_formats, dpi=chosen.dpi
        )
        relative = tuple(path.relative_to(folder.path).as_posix() for path in paths)
        written.append(SectionFigure(relative, _CAPTIONS[name]))
    return written

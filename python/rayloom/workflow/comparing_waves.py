"""The step ``ratio``: the P and the S model of a run side by side."""

from __future__ import annotations

from rayloom.model import SlownessModel, wave_ratio
from rayloom.outputs.ratio_figure import figure_wave_ratio
from rayloom.outputs.style import save_figure
from rayloom.settings import RunSettings
from rayloom.survey import read_stations
from rayloom.workflow.data import Tables
from rayloom.workflow.folder import WAVES, RunFolder
from rayloom.workflow.plan import Files, Outcome
from rayloom.workflow.reporting import Reporter


def ratio_inputs(folder: RunFolder) -> Files:
    """Name the models that the ratio is made from."""
    return {f"{wave}/model.nc": folder.part(wave).file("model.nc") for wave in WAVES}


def write_ratio(folder: RunFolder, settings: RunSettings, reporter: Reporter) -> Outcome:
    """Write the ratio of S to P changes as netCDF and as a figure."""
    models = [SlownessModel.read_netcdf(path) for path in ratio_inputs(folder).values()]
    chosen = settings.outputs
    ratio = wave_ratio(
        *models, min_hits=chosen.ratio_min_hits, min_percent=chosen.ratio_min_percent
    )
    blocks = int(ratio.resolved.sum())
    told = "d ln Vs / d ln Vp: " + (
        f"median {ratio.median:.2f} over {blocks} blocks" if blocks else "no block qualifies"
    )
    reporter.note(told)
    table = folder.file("ratio.nc")
    ratio.write_netcdf(table)
    figure = figure_wave_ratio(
        ratio,
        stations=read_stations(Tables.of(folder, settings).stations),
        depths_km=chosen.slice_depths_km,
    )
    drawn = save_figure(
        figure, folder.figures / "ratio", formats=chosen.figure_formats, dpi=chosen.dpi
    )
    files = [table, *drawn]
    return Outcome(
        files={path.relative_to(folder.path).as_posix(): path for path in files},
        remarks={"ratio": told},
    )

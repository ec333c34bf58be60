"""What a run leaves behind: viewer files, tables, figures and the report.

Every file is written to a temporary name and renamed
(:func:`rayloom.writing.replacing`). Figures are matplotlib ``Figure``
objects; :func:`save_figure` writes them.
"""

from rayloom.outputs.linear_system import block_table, write_linear_system
from rayloom.outputs.report import render_report, write_report
from rayloom.outputs.residual_figures import figure_misfit, figure_station_residuals
from rayloom.outputs.results import (
    WrittenFigure,
    write_figures,
    write_model_files,
    write_tables,
)
from rayloom.outputs.section import figure_section
from rayloom.outputs.section_line import SectionLine, default_lines
from rayloom.outputs.settings import OutputSettings, SectionSettings
from rayloom.outputs.slices import figure_depth_slices
from rayloom.outputs.style import BlockField, ColourScale, perturbation_field, save_figure
from rayloom.outputs.tables import (
    exclusion_table,
    residual_table,
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
    write_points,
    write_rays_vtp,
    write_stations_vtp,
)
from rayloom.writing import replacing, write_text

__all__ = [
    "BlockField",
    "ColourScale",
    "OutputSettings",
    "SectionLine",
    "SectionSettings",
    "WrittenFigure",
    "block_table",
    "default_lines",
    "exclusion_table",
    "figure_depth_slices",
    "figure_misfit",
    "figure_section",
    "figure_station_residuals",
    "perturbation_field",
    "render_report",
    "replacing",
    "residual_table",
    "save_figure",
    "write_events_vtp",
    "write_exclusions_csv",
    "write_figures",
    "write_history_csv",
    "write_linear_system",
    "write_mislocations_csv",
    "write_model_files",
    "write_model_vts",
    "write_points",
    "write_rays_vtp",
    "write_report",
    "write_residuals_csv",
    "write_station_terms_csv",
    "write_stations_vtp",
    "write_table",
    "write_tables",
    "write_text",
]

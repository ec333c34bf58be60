"""Figures of an appraisal: what is veiled, counted and drawn."""

from __future__ import annotations

import numpy as np
import pytest
from matplotlib.collections import PolyCollection, QuadMesh

from rayloom.appraisal import Judgement, Restoration
from rayloom.appraisal.spread import FullWidth, PointSpread, full_width
from rayloom.errors import InputError
from rayloom.model import BlockGrid, Frame, SlownessModel
from rayloom.outputs.appraisal_figures import figure_resolved, figure_standard_errors
from rayloom.outputs.report_section import ReportSection, SectionFigure, SectionTable
from rayloom.outputs.restoration_figure import figure_restoration
from rayloom.outputs.rose_figure import SECTORS, figure_roses, rose_counts
from rayloom.outputs.spread_figure import figure_point_spread
from rayloom.survey import Stations

GRID = BlockGrid(
    Frame(longitude=20.0, latitude=40.0),
    np.linspace(-1.0, 1.0, 7),
    np.linspace(-1.0, 1.0, 6),
    [0.0, 40.0, 80.0, 120.0],
)


def model() -> SlownessModel:
    hits = np.ones(GRID.shape)
    hits[0] = 0.0
    return SlownessModel(GRID, np.full(GRID.shape, 0.125)).with_fields(hits=hits)


def stations() -> Stations:
    return Stations(
        network=np.array(["XX"] * 3),
        station=np.array(["A", "B", "C"]),
        latitude_deg=np.array([40.0, 40.3, 39.8]),
        longitude_deg=np.array([20.0, 20.4, 19.6]),
        elevation_m=np.zeros(3),
    )


def test_blocks_that_data_hardly_bear_on_are_veiled() -> None:
    """Veiled are blocks with rays whose share is under the limit, and no others."""
    share = np.full(GRID.shape, 0.5)
    share[:3, :, 1] = 0.1
    figure = figure_resolved(model(), share, resolved_from=0.3, depths_km=[20.0, 60.0])
    veiled = [
        [len(part.get_paths()) for part in axes.collections if isinstance(part, PolyCollection)]
        for axes in figure.axes[:2]
    ]
    assert veiled == [[0, 0], [10, 10]]


def test_standard_errors_are_what_is_coloured() -> None:
    sigma = np.random.default_rng(1).uniform(0.5, 0.9, GRID.shape)
    figure = figure_standard_errors(model(), sigma, depths_km=[60.0])
    drawn = [part for part in figure.axes[0].collections if isinstance(part, QuadMesh)][-1]
    values = np.ma.masked_invalid(drawn.get_array()).reshape(6, 5)
    np.testing.assert_allclose(values[1:].data, sigma[1:, :, 1])
    assert np.all(np.ma.getmaskarray(values)[0])


def test_roses_count_by_sector() -> None:
    counts = rose_counts(np.array([0, 0, 1, 1, 1]), np.array([0.0, 359.9, 29.9, 30.0, 390.0]), 3)
    assert counts.shape == (3, SECTORS)
    assert counts[0].tolist() == [1] + [0] * 10 + [1]
    assert counts[1].tolist() == [1, 2] + [0] * 10
    assert counts[2].sum() == 0


def test_a_wedge_points_to_where_picks_come_from() -> None:
    """Sector 30° to 60°: right of and above its station on a map with north up."""
    counts = np.zeros((3, SECTORS), dtype=np.int64)
    counts[1, 1] = 4
    figure = figure_roses(GRID, stations(), counts)
    wedges = [part for part in figure.axes[0].collections if isinstance(part, PolyCollection)]
    outline = wedges[0].get_paths()[0].vertices
    across, up = (outline[1:] - outline[0]).mean(axis=0)
    assert len(wedges[0].get_paths()) == 1
    azimuth = np.degrees(np.arctan2(across * np.cos(np.radians(40.0)), up))
    assert 35.0 < azimuth < 55.0


def test_put_in_and_come_back_share_one_scale() -> None:
    truth = np.full(GRID.shape, 3.0)
    judged = (Judgement("all depths", 1, 3.0, 0.5, 0.9),)
    restoration = Restoration("spikes", truth, 0.5 * truth, judged)
    figure = figure_restoration(restoration, model(), depths_km=[20.0, 60.0])
    meshes = [axes.collections[0] for axes in figure.axes[:4]]
    assert {mesh.get_clim() for mesh in meshes} == {(-3.0, 3.0)}
    assert [float(np.ma.max(mesh.get_array())) for mesh in meshes] == [3.0, 3.0, 1.5, 1.5]


def test_full_widths_of_a_bell() -> None:
    """A Gaussian of standard deviation s has the full width 2.3548 s (textbook)."""
    grid = BlockGrid(Frame.flat(), *(np.linspace(0.0, 205.0, 42) for _ in range(3)))
    offset = grid.centres - grid.centres[grid.block_count // 2]
    bell = np.exp(-0.5 * np.sum((offset / [15.0, 20.0, 30.0]) ** 2, axis=1)).reshape(grid.shape)
    found = full_width(grid, bell, (20, 20, 20))
    expected = 2.3548 * np.array([15.0, 20.0, 30.0])
    np.testing.assert_allclose([found.x_km, found.y_km, found.depth_km], expected, rtol=0.02)
    assert found.longest == "depth"
    wide = full_width(grid, np.ones(grid.shape), (20, 20, 20))
    assert np.isinf(wide.x_km)


def test_a_point_spread_has_a_row_of_three_panels() -> None:
    column = np.zeros(GRID.shape)
    column[3, 2, 1] = 0.4
    width = FullWidth(50.0, 40.0, float("inf"))
    spread = PointSpread((3, 2, 1), (0.1, 0.0, 60.0), column, column, width, width)
    figure = figure_point_spread(GRID, [spread, spread])
    assert len(figure.axes) == 2 * 3 + 1
    title = figure.axes[0].get_title(loc="left")
    assert "R = 0.400" in title
    assert "depth beyond the box" in title


def test_a_section_of_the_report_reads_back(tmp_path) -> None:  # type: ignore[no-untyped-def]
    table = SectionTable("what", ("a", "b"), (("1", "−2"),), (1,))
    section = ReportSection("Title", ("One.",), (table,), (SectionFigure(("f.png",), "c"),))
    section.write(tmp_path / "x_report.json")
    assert ReportSection.read(tmp_path / "x_report.json") == section
    (tmp_path / "y_report.json").write_text("{}", encoding="utf-8")
    with pytest.raises(InputError, match="cannot be read as a section"):
        ReportSection.read(tmp_path / "y_report.json")

from types import SimpleNamespace

import numpy as np
import pytest
from matplotlib.collections import QuadMesh
from matplotlib.colors import rgb_to_hsv

from rayloom.errors import InputError
from rayloom.model import BlockGrid, Frame, SlownessModel
from rayloom.outputs import (
    OutputSettings,
    SectionLine,
    SectionSettings,
    default_lines,
    figure_section,
)
from rayloom.outputs.section import cut_blocks


def make_model(frame=None):
    frame = frame or Frame(longitude=-179.0, latitude=52.0, azimuth_deg=40.0)
    size = 100.0 if frame.is_flat else 1.0
    grid = BlockGrid(
        frame,
        np.linspace(-3.0, 3.0, 13) * size,
        np.linspace(-2.0, 2.0, 9) * size,
        [-4.0, 20.0, 60.0, 120.0, 300.0],
    )
    rng = np.random.default_rng(4)
    reference = np.full(grid.shape, 0.12)
    model = SlownessModel(grid, reference * rng.uniform(0.97, 1.03, grid.shape), reference)
    return model.with_fields(hits=rng.integers(0, 4, grid.shape))


def panel(figure, label):
    (axes,) = (axes for axes in figure.axes if axes.get_label() == label)
    return axes


def meshes(axes):
    return [child for child in axes.get_children() if isinstance(child, QuadMesh)]


def geocentric_rad(latitude_deg):
    """Tan of the geocentric latitude is (1 − f)² tan φ, f of WGS84 (any geodesy textbook)."""
    return np.arctan((1.0 - 1.0 / 298.257223563) ** 2 * np.tan(np.deg2rad(latitude_deg)))


def arc_km(start, end):
    """Great-circle distance by the haversine formula (any textbook of navigation)."""
    lat1, lat2 = geocentric_rad(start[1]), geocentric_rad(end[1])
    half_lat, half_lon = 0.5 * (lat2 - lat1), 0.5 * np.deg2rad(end[0] - start[0])
    square = np.sin(half_lat) ** 2 + np.cos(lat1) * np.cos(lat2) * np.sin(half_lon) ** 2
    return 2.0 * 6371.0 * np.arcsin(np.sqrt(square))


def test_length_is_the_great_circle():
    frame = Frame(longitude=-179.0, latitude=52.0, azimuth_deg=40.0)
    start, end = (177.0, 50.5), (-176.0, 53.0)
    line = SectionLine.between(frame, start, end)
    assert line.length_km == pytest.approx(arc_km(start, end), rel=1e-12)
    longitude, latitude = frame.geographic_coordinates(*line.along(5))
    np.testing.assert_allclose(longitude[[0, -1]], [177.0, -176.0])
    np.testing.assert_allclose(latitude[[0, -1]], [50.5, 53.0])
    for share, point in zip(
        np.linspace(0, 1, 5), zip(longitude, latitude, strict=True), strict=True
    ):
        assert arc_km(start, point) == pytest.approx(share * line.length_km, abs=1e-6)


def test_line_through_a_centre_keeps_azimuth_and_length():
    """Azimuth by the spherical law of sines and cosines, geocentric latitudes (textbook)."""
    frame = Frame(longitude=20.0, latitude=68.0, azimuth_deg=-25.0)
    centre = (22.0, 66.5)
    line = SectionLine.through(frame, centre, azimuth_deg=65.0, length_km=500.0)
    longitude, latitude = (
        np.asarray(side) for side in frame.geographic_coordinates(*line.along(3))
    )
    assert longitude[1] == pytest.approx(22.0)
    assert latitude[1] == pytest.approx(66.5)
    assert line.length_km == pytest.approx(500.0)
    lat1, lat2 = geocentric_rad(latitude[1]), geocentric_rad(latitude[2])
    turn = np.deg2rad(longitude[2] - longitude[1])
    azimuth = np.arctan2(
        np.sin(turn) * np.cos(lat2),
        np.cos(lat1) * np.sin(lat2) - np.sin(lat1) * np.cos(lat2) * np.cos(turn),
    )
    assert np.rad2deg(azimuth) == pytest.approx(65.0, abs=1e-6)


def test_projection_gives_distances_along_and_across():
    """On the equator and its meridians distances are plain degrees of arc."""
    frame = Frame(longitude=0.0, latitude=0.0)
    line = SectionLine.between(frame, (-2.0, 0.0), (2.0, 0.0))
    x, y = frame.local_coordinates([0.0, 0.0, 1.0], [0.0, 1.0, -1.0])
    along, across = line.project(x, y)
    degree = 6371.0 * np.pi / 180.0
    np.testing.assert_allclose(along, [2 * degree, 2 * degree, 3 * degree], rtol=1e-9)
    up = np.rad2deg(geocentric_rad(1.0)) * degree
    np.testing.assert_allclose(across, [0.0, -up, up], atol=1e-9)


def test_flat_projection():
    line = SectionLine.through(Frame.flat(), (10.0, 0.0), azimuth_deg=90.0, length_km=8.0)
    np.testing.assert_allclose([line.start, line.end], [(6.0, 0.0), (14.0, 0.0)], atol=1e-12)
    along, across = line.project([7.0, 13.0], [2.0, -3.0])
    np.testing.assert_allclose(along, [1.0, 7.0])
    np.testing.assert_allclose(across, [-2.0, 3.0])


@pytest.mark.parametrize("frame", [None, Frame.flat()])
def test_section_holds_the_blocks_below_the_line(frame):
    model = make_model(frame)
    grid = model.grid
    size = 100.0 if grid.frame.is_flat else 1.0
    line = SectionLine(grid.frame, (-3.4 * size, -1.2 * size), (2.1 * size, 1.7 * size))
    axes = panel(figure_section(model, line), "section")
    drawn = meshes(axes)[-1].get_array()
    edges = cut_blocks(grid, line).distance_edges_km
    x, y = line.at(0.5 * (edges[1:] + edges[:-1]))
    outside = 0
    for layer, depth in enumerate(grid.depth_centres_km):
        block = grid.locate(np.column_stack([x, y, np.full_like(x, depth)]))
        seen = (block >= 0) & (model.fields["hits"].ravel()[block] > 0)
        outside += np.sum(block < 0)
        np.testing.assert_array_equal(~np.ma.getmaskarray(drawn)[layer], seen)
        expected = model.perturbation_percent.ravel()[block]
        np.testing.assert_array_equal(drawn[layer][seen], expected[seen])
    assert outside > 0


def test_blocks_without_rays_are_greyed_but_nothing_outside_the_model():
    model = make_model()
    line = SectionLine(model.grid.frame, (-4.0, 0.3), (2.9, 0.3))
    grey, coloured = meshes(panel(figure_section(model, line), "section"))
    shown = ~np.ma.getmaskarray(grey.get_array()), ~np.ma.getmaskarray(coloured.get_array())
    assert not np.any(shown[0] & shown[1])
    inside = cut_blocks(model.grid, line).inside
    np.testing.assert_array_equal(shown[0] | shown[1], np.broadcast_to(inside, shown[0].shape))


def test_slow_column_is_red():
    """Red for slow: common practice."""
    model = make_model(Frame.flat())
    slowness = np.array(model.reference)
    slowness[6:8] *= 1.03
    model = model.with_slowness(slowness).with_fields(hits=np.ones(model.grid.shape))
    line = SectionLine(model.grid.frame, (-300.0, 10.0), (300.0, 10.0))
    figure = figure_section(model, line)
    figure.draw_without_rendering()
    mesh = meshes(panel(figure, "section"))[-1]
    colours = mesh.get_facecolors().reshape(*mesh.get_array().shape, 4)
    middle = colours[:, colours.shape[1] // 2 + 3, :3]
    degrees_from_red = np.abs((360.0 * rgb_to_hsv(middle)[:, 0] + 180.0) % 360.0 - 180.0)
    assert np.all(degrees_from_red < 40.0)


def test_a_kilometre_down_is_as_long_as_a_kilometre_along():
    model = make_model()
    for length_km in (250.0, 600.0):
        line = SectionLine.through(
            model.grid.frame, (-179.0, 52.0), azimuth_deg=130.0, length_km=length_km
        )
        figure = figure_section(model, line)
        axes = panel(figure, "section")
        box = axes.get_position()
        width, height = figure.get_size_inches()
        along = box.width * width / np.ptp(axes.get_xlim())
        down = box.height * height / np.ptp(axes.get_ylim())
        assert along == pytest.approx(down)
        assert axes.get_ylim() == (300.0, -4.0)


def test_only_stations_of_the_band_stand_above():
    model = make_model(Frame.flat())
    line = SectionLine(model.grid.frame, (-200.0, 0.0), (200.0, 0.0))
    stations = [[-100.0, 20.0, -1.5], [50.0, -29.0, 0.2], [60.0, 31.0, -1.0], [210.0, 0.0, -1.0]]
    axes = panel(figure_section(model, line, stations=stations, band_km=30.0), "elevation")
    (triangles,) = (mark for mark in axes.lines if mark.get_marker() == "^")
    np.testing.assert_allclose(triangles.get_xydata(), [[100.0, 1.5], [250.0, -0.2]])
    low, high = axes.get_ylim()
    assert low < -0.2
    assert high > 1.5


def test_discontinuities_of_the_box_are_marked():
    earth = SimpleNamespace(discontinuities_km=np.array([0.0, 20.0, 35.0, 210.0, 410.0]))
    model = make_model(Frame.flat())
    line = default_lines(model.grid)[0]
    axes = panel(figure_section(model, line, earth=earth), "section")
    marked = [mark.get_ydata()[0] for mark in axes.lines if mark.get_label() == "discontinuity"]
    assert marked == [20.0, 35.0, 210.0]
    assert "210 km" in [text.get_text() for text in axes.texts]


def test_ends_are_named_on_section_and_index_map():
    model = make_model()
    line = SectionLine.between(model.grid.frame, (179.5, 52.0), (-177.5, 52.0), name="C")
    figure = figure_section(model, line, stations=[[0.0, 0.0, -1.0]])
    for label in ("elevation", "index map"):
        assert [text.get_text() for text in panel(figure, label).texts] == ["C", "C′"]


def test_default_lines_cross_the_middle():
    model = make_model()
    first, second = default_lines(model.grid)
    assert (first.name, second.name) == ("A", "B")
    assert first.length_km == pytest.approx(6.0 * 6371.0 * np.pi / 180.0)
    assert second.length_km == pytest.approx(4.0 * 6371.0 * np.pi / 180.0)


def test_settings_describe_a_line_in_one_of_two_ways():
    frame = Frame(longitude=12.0, latitude=-31.0)
    ends = SectionSettings(start=(11.0, -31.0), end=(13.0, -31.5), name="D")
    assert SectionLine.from_settings(frame, ends).name == "D"
    middle = SectionSettings(centre=(12.0, -31.0), azimuth_deg=20.0, length_km=300.0)
    assert SectionLine.from_settings(frame, middle).length_km == pytest.approx(300.0)
    for wrong in (
        {},
        {"start": (1.0, 2.0)},
        {"centre": (1.0, 2.0), "azimuth_deg": 3.0},
        {"start": (1.0, 2.0), "end": (3.0, 4.0), "azimuth_deg": 3.0},
    ):
        with pytest.raises(ValueError, match="give either start and end, or centre"):
            SectionSettings(**wrong)


def test_unknown_settings_are_refused():
    with pytest.raises(ValueError, match="dots_per_inch"):
        OutputSettings(dots_per_inch=300)
    with pytest.raises(ValueError, match="colour_limit_percent"):
        OutputSettings(colour_limit_percent=-1.0)


@pytest.mark.parametrize("frame", [Frame(longitude=12.0, latitude=-31.0), Frame.flat()])
def test_coinciding_ends_are_a_clear_error(frame):
    with pytest.raises(InputError, match="section A: the end points of the section coincide"):
        SectionLine.between(frame, (12.0, -31.0), (12.0, -31.0))

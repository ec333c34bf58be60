import matplotlib as mpl
import numpy as np
import pytest
from matplotlib.collections import QuadMesh
from matplotlib.colors import rgb_to_hsv

from rayloom.errors import InputError
from rayloom.model import BlockGrid, Frame, SlownessModel
from rayloom.outputs import (
    SectionLine,
    figure_depth_slices,
    perturbation_field,
    save_figure,
)
from rayloom.outputs.map_view import degree_label, map_view
from rayloom.outputs.slices import choose_layers
from rayloom.outputs.style import NO_DATA_COLOUR, late_red, slow_red

SLOW, FAST, UNSEEN = (1, 1, 1), (4, 2, 1), (0, 0, 1)


def make_model(frame=None, wave="P"):
    frame = frame or Frame(longitude=12.0, latitude=-31.0)
    size = 100.0 if frame.is_flat else 1.0
    grid = BlockGrid(
        frame,
        np.linspace(-3.0, 3.0, 7) * size,
        np.linspace(-2.0, 2.0, 5) * size,
        [-4.0, 20.0, 60.0, 120.0],
    )
    percent = np.random.default_rng(8).uniform(-0.2, 0.2, grid.shape)
    percent[SLOW], percent[FAST] = -3.0, 2.0
    hits = np.full(grid.shape, 5.0)
    hits[UNSEEN] = 0.0
    reference = np.full(grid.shape, 0.12)
    model = SlownessModel(grid, reference / (1.0 + percent / 100.0), reference, wave)
    return model.with_fields(hits=hits)


def panels(figure):
    return [axes for axes in figure.axes if axes.get_title()]


def meshes(axes):
    """Meshes of the greyed and of the coloured blocks of a map."""
    grey, coloured = (child for child in axes.get_children() if isinstance(child, QuadMesh))
    return grey, coloured


def hue(colour):
    """Hue in degrees: red near 0, blue near 240."""
    return 360.0 * rgb_to_hsv(colour[:3])[0]


def is_red(colour):
    return hue(colour) < 40.0 or hue(colour) > 340.0


def is_blue(colour):
    return 190.0 < hue(colour) < 260.0


def test_each_map_holds_the_perturbation_of_its_layer():
    model = make_model()
    maps = panels(figure_depth_slices(model))
    assert [axes.get_title() for axes in maps] == ["−4 to 20 km", "20–60 km", "60–120 km"]
    for layer, axes in enumerate(maps):
        drawn = meshes(axes)[1].get_array()
        seen = model.fields["hits"][:, :, layer] > 0
        np.testing.assert_array_equal(~np.ma.getmaskarray(drawn), seen)
        expected = model.perturbation_percent[:, :, layer]
        np.testing.assert_array_equal(drawn[seen], expected[seen])


def test_slow_is_red_and_fast_is_blue():
    """Red for slow and blue for fast: common practice."""
    figure = figure_depth_slices(make_model(), depths_km=[30.0])
    figure.draw_without_rendering()
    mesh = meshes(panels(figure)[0])[1]
    colours = mesh.get_facecolors().reshape(6, 4, 4)
    assert is_red(colours[SLOW[:2]])
    assert is_blue(colours[FAST[:2]])


def test_late_is_red_and_early_is_blue():
    """Red for late and blue for early: common practice."""
    assert is_red(late_red()(0.9))
    assert is_blue(late_red()(0.1))
    assert is_red(slow_red()(0.1))


def test_blocks_without_rays_are_grey():
    figure = figure_depth_slices(make_model(), depths_km=[30.0])
    figure.draw_without_rendering()
    grey, coloured = meshes(panels(figure)[0])
    hidden = ~np.ma.getmaskarray(grey.get_array())
    assert list(zip(*np.nonzero(hidden), strict=True)) == [UNSEEN[:2]]
    drawn = grey.get_facecolors().reshape(6, 4, 4)[UNSEEN[:2]]
    assert mpl.colors.to_hex(drawn) == NO_DATA_COLOUR
    assert coloured.get_facecolors().reshape(6, 4, 4)[UNSEEN[:2]][3] == 0.0


def test_one_symmetric_scale_for_all_maps():
    maps = panels(figure_depth_slices(make_model()))
    limits = {meshes(axes)[1].get_clim() for axes in maps}
    assert len(limits) == 1
    low, high = limits.pop()
    assert low == -high
    figure = figure_depth_slices(make_model(), colour_limit_percent=1.5)
    assert meshes(panels(figure)[0])[1].get_clim() == (-1.5, 1.5)


def test_scale_is_labelled_by_wave():
    for wave, label in (("P", "dVp"), ("S", "dVs")):
        figure = figure_depth_slices(make_model(wave=wave))
        labels = [axes.get_xlabel() for axes in figure.axes]
        assert f"{label} relative to the regional mean (%)" in labels


def test_blocks_stand_at_their_corners_longitude_and_latitude():
    frame = Frame(longitude=12.0, latitude=-31.0, azimuth_deg=35.0)
    model = make_model(frame)
    axes = panels(figure_depth_slices(model))[0]
    drawn = meshes(axes)[1].get_coordinates()
    mesh = np.meshgrid(model.grid.x_edges, model.grid.y_edges, indexing="ij")
    longitude, latitude = frame.geographic_coordinates(*mesh)
    np.testing.assert_allclose(drawn[..., 0], longitude)
    np.testing.assert_allclose(drawn[..., 1], latitude)
    middle = np.deg2rad(0.5 * sum(axes.get_ylim()))
    assert axes.get_aspect() == pytest.approx(1.0 / np.cos(middle))


def test_map_runs_on_across_the_antimeridian():
    model = make_model(Frame(longitude=179.5, latitude=-18.0))
    figure = figure_depth_slices(model)
    axes = panels(figure)[-1]
    drawn = meshes(axes)[1].get_coordinates()
    assert np.all(np.diff(drawn[..., 0], axis=0) > 0.0)
    assert 6.0 < np.ptp(drawn[..., 0]) < 7.0
    labels = {label.get_text() for label in axes.get_xticklabels()}
    assert {"180°", "178°E", "178°W"} <= labels


@pytest.mark.parametrize("latitude", [79.0, -88.5, 90.0])
def test_high_latitudes_are_drawn_in_the_frame(latitude):
    """Blocks stay nearly square where a geographic map would tear or stretch them."""
    model = make_model(Frame(longitude=-150.0, latitude=latitude, azimuth_deg=20.0))
    axes = panels(figure_depth_slices(model))[0]
    drawn = meshes(axes)[1].get_coordinates()
    mesh = np.meshgrid(model.grid.x_edges, model.grid.y_edges, indexing="ij")
    np.testing.assert_array_equal(drawn, np.stack(mesh, axis=-1))


def test_net_ticks_of_a_turned_map_stand_at_their_longitude():
    model = make_model(Frame(longitude=-150.0, latitude=79.0, azimuth_deg=20.0))
    axes = panels(figure_depth_slices(model))[-1]
    bottom = axes.get_ylim()[0]
    texts = [label.get_text() for label in axes.get_xticklabels()]
    assert len(texts) >= 2
    for tick, text in zip(axes.get_xticks(), texts, strict=True):
        longitude, _ = model.grid.frame.geographic_coordinates(tick, bottom)
        assert -float(text.rstrip("°W")) == pytest.approx(float(longitude), abs=0.01)


def test_flat_frames_are_drawn_in_kilometres():
    model = make_model(Frame.flat())
    figure = figure_depth_slices(model, stations=[[10.0, 20.0, -1.0]])
    axes = panels(figure)[0]
    assert axes.get_xlabel() == "x (km)"
    assert axes.get_aspect() == 1.0
    triangles = [line for line in axes.lines if line.get_marker() == "^"]
    np.testing.assert_array_equal(triangles[0].get_xydata(), [[10.0, 20.0]])


def test_section_line_is_marked_on_the_first_map():
    model = make_model()
    line = SectionLine.between(model.grid.frame, (10.5, -32.0), (13.5, -30.5), name="K")
    maps = panels(figure_depth_slices(model, lines=[line]))
    first = {text.get_text(): text.xy for text in maps[0].texts}
    np.testing.assert_allclose(first["K"], (10.5, -32.0), atol=1e-9)
    np.testing.assert_allclose(first["K′"], (13.5, -30.5), atol=1e-9)
    assert not any(text.get_text().startswith("K") for text in maps[1].texts)


def test_depth_names_the_layer_that_holds_it():
    grid = make_model().grid
    shown = np.ones(grid.shape, dtype=bool)
    assert choose_layers(grid, shown, [100.0, -4.0, 60.0, 61.0, 120.0]) == [0, 2]
    with pytest.raises(InputError, match="slice depth 121 km lies outside the model"):
        choose_layers(grid, shown, [30.0, 121.0])


def test_sensible_depths_skip_layers_without_rays():
    grid = BlockGrid(Frame.flat(), [0.0, 1.0, 2.0], [0.0, 1.0], np.arange(31.0))
    shown = np.zeros(grid.shape, dtype=bool)
    shown[:, :, 4:27] = True
    layers = choose_layers(grid, shown)
    assert len(layers) == 9
    assert (layers[0], layers[-1]) == (4, 26)
    assert np.ptp(np.diff(layers)) <= 1
    assert choose_layers(grid, np.zeros_like(shown))[0] == 0


def test_scale_fits_the_coloured_blocks_only():
    model = make_model()
    slowness = np.array(model.slowness_s_per_km)
    slowness[UNSEEN] *= 1.5
    field = perturbation_field(model.with_slowness(slowness).with_fields(**model.fields))
    assert 2.0 <= field.scale.highest <= 3.0
    with pytest.raises(InputError, match="colour_limit_percent"):
        perturbation_field(model, colour_limit_percent=0.0)


def test_own_matplotlib_settings_do_not_leak_in_or_out(tmp_path):
    with mpl.rc_context({"font.size": 31.0, "axes.facecolor": "black"}):
        figure = figure_depth_slices(make_model())
        save_figure(figure, tmp_path / "slices", dpi=50)
        assert mpl.rcParams["font.size"] == 31.0
    assert mpl.colors.to_hex(panels(figure)[0].get_facecolor()) == "#ffffff"
    assert panels(figure)[0].title.get_fontsize() < 10.0


def test_figures_are_written_in_all_formats(tmp_path):
    figure = figure_depth_slices(make_model(), depths_km=[30.0])
    written = save_figure(figure, tmp_path / "out" / "a.b", formats=("png", "pdf", "svg"), dpi=50)
    assert [path.name for path in written] == ["a.b.png", "a.b.pdf", "a.b.svg"]
    heads = [path.read_bytes()[:8] for path in written]
    assert heads[0] == b"\x89PNG\r\n\x1a\n"
    assert heads[1].startswith(b"%PDF")
    assert b"<?xml" in heads[2]


def test_no_labels_overlap():
    """Tick labels, titles and letters of the page keep clear of each other."""
    for frame in (Frame(longitude=179.0, latitude=-40.0, azimuth_deg=30.0), Frame.flat()):
        figure = figure_depth_slices(make_model(frame))
        figure.draw_without_rendering()
        texts = [
            text.get_window_extent()
            for axes in figure.axes
            for text in (
                *axes.get_xticklabels(),
                *axes.get_yticklabels(),
                axes.title,
                axes._left_title,
                axes.xaxis.label,
                axes.yaxis.label,
                *axes.texts,
            )
            if text.get_text() and text.get_visible()
        ]
        boxes = [box for box in texts if box.width > 1.0]
        page = figure.bbox
        for number, box in enumerate(boxes):
            assert page.x0 <= box.x0
            assert box.x1 <= page.x1
            assert not any(box.overlaps(other) for other in boxes[number + 1 :])


def test_degree_labels():
    assert degree_label(190.0, "EW") == "170°W"
    assert degree_label(-0.5, "NS") == "0.5°S"
    assert degree_label(0.0, "EW") == "0°"
    assert degree_label(540.0, "EW") == "180°"


def test_outline_is_closed():
    across, up = map_view(make_model().grid).outline
    assert (across[0], up[0]) == (across[-1], up[-1])

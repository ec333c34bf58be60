"""Viewer files, read back with the reference implementation of their format.

Source: the package ``vtk`` (Kitware), which defines the XML formats read here.
"""

import numpy as np
import pytest
from scipy.sparse import csr_array

from rayloom.errors import InputError
from rayloom.forward import Rays
from rayloom.model import BlockGrid, Frame, SlownessModel
from rayloom.outputs.vtk import (
    EVENT_RING,
    write_events_vtp,
    write_model_vts,
    write_points,
    write_rays_vtp,
    write_stations_vtp,
)
from rayloom.survey import Events, Stations

vtk_to_numpy = pytest.importorskip("vtkmodules.util.numpy_support").vtk_to_numpy
vtk_xml = pytest.importorskip("vtkmodules.vtkIOXML")
vtk_verdict = pytest.importorskip("vtkmodules.vtkFiltersVerdict")


def read(path, kind):
    reader = getattr(vtk_xml, f"vtkXML{kind}Reader")()
    complaints = []
    reader.AddObserver("ErrorEvent", lambda *_: complaints.append("error"))
    reader.AddObserver("WarningEvent", lambda *_: complaints.append("warning"))
    reader.SetFileName(str(path))
    reader.Update()
    assert not complaints
    return reader.GetOutput()


def cell_array(data, name):
    array = data.GetCellData().GetAbstractArray(name)
    if array.IsA("vtkStringArray"):
        return [array.GetValue(i) for i in range(array.GetNumberOfValues())]
    return vtk_to_numpy(array)


def cell_points(data, index):
    return vtk_to_numpy(data.GetCell(index).GetPoints().GetData()).copy()


def cell_volumes(data):
    sizes = vtk_verdict.vtkCellSizeFilter()
    sizes.SetInputData(data)
    sizes.Update()
    return vtk_to_numpy(sizes.GetOutput().GetCellData().GetArray("Volume"))


def curved_model(refine=1, frame=None):
    frame = frame or Frame(longitude=179.0, latitude=-38.0, azimuth_deg=25.0)
    grid = BlockGrid(
        frame,
        np.linspace(-3.0, 4.0, 7 * refine + 1),
        np.linspace(-2.0, 2.5, 6 * refine + 1),
        np.linspace(-3.0, 400.0, 5 * refine + 1),
    )
    rng = np.random.default_rng(3)
    reference = np.broadcast_to(np.linspace(0.17, 0.11, grid.shape[2]), grid.shape)
    slowness = reference * (1.0 + rng.normal(0.0, 0.02, grid.shape))
    return SlownessModel(grid, slowness, reference).with_fields(hits=rng.poisson(9.0, grid.shape))


def spherical_volume_km3(grid):
    """Volume between two radii, two longitudes and two latitudes of a sphere (textbook)."""
    outer, inner = 6371.0 - grid.depth_edges_km[[0, -1]]
    dx = np.deg2rad(np.ptp(grid.x_edges))
    dy = np.ptp(np.sin(np.deg2rad(grid.y_edges[[0, -1]])))
    return (outer**3 - inner**3) / 3.0 * dx * dy


def test_cell_volumes_sum_to_the_spherical_box(tmp_path):
    """Straight edges miss the curved box by a share that falls with the square of block size."""
    errors = []
    for refine in (1, 2):
        model = curved_model(refine)
        write_model_vts(tmp_path / "model.vts", model)
        volumes = cell_volumes(read(tmp_path / "model.vts", "StructuredGrid"))
        assert np.all(volumes > 0.0)
        errors.append(volumes.sum() / spherical_volume_km3(model.grid) - 1.0)
    assert abs(errors[0]) < 1e-4
    assert errors[0] / errors[1] == pytest.approx(4.0, rel=0.02)


def test_values_stand_in_their_blocks(tmp_path):
    """Every cell carries the values of the block that its middle lies in."""
    model = curved_model()
    grid, frame = model.grid, model.grid.frame
    write_model_vts(tmp_path / "model.vts", model)
    data = read(tmp_path / "model.vts", "StructuredGrid")
    assert data.GetNumberOfCells() == grid.block_count
    block = cell_array(data, "block")
    assert sorted(block) == list(range(grid.block_count))
    middles = np.array([cell_points(data, i).mean(axis=0) for i in range(grid.block_count)])
    expected = frame.enu_km(grid.centres[block])
    assert np.abs(middles - expected).max() < 1.5
    ix, iy, iz = np.unravel_index(block, grid.shape)
    for name, values in {
        "vp": model.velocity_km_s,
        "vp_reference": 1.0 / model.reference,
        "dvp": 100.0 * (model.reference / model.slowness_s_per_km - 1.0),
        "hits": model.fields["hits"],
    }.items():
        np.testing.assert_allclose(cell_array(data, name), values[ix, iy, iz], rtol=1e-15)
    np.testing.assert_array_equal(cell_array(data, "depth_km"), grid.depth_centres_km[iz])


def test_vertices_are_the_true_curved_corners(tmp_path):
    """A corner's distance from the Earth's centre is the radius of its depth (Pythagoras)."""
    model = curved_model()
    write_model_vts(tmp_path / "model.vts", model)
    data = read(tmp_path / "model.vts", "StructuredGrid")
    points = vtk_to_numpy(data.GetPoints().GetData())
    radius = np.sqrt(points[:, 0] ** 2 + points[:, 1] ** 2 + (points[:, 2] + 6371.0) ** 2)
    nx, ny, nz = (count + 1 for count in model.grid.shape)
    per_level = 6371.0 - model.grid.depth_edges_km[::-1]
    np.testing.assert_allclose(radius, np.repeat(per_level, nx * ny), rtol=1e-12)
    assert data.GetExtent() == (0, nx - 1, 0, ny - 1, 0, nz - 1)


def test_flat_model_volumes_are_exact(tmp_path):
    grid = BlockGrid(Frame.flat(), [0.0, 1.0, 3.0], [-2.0, 0.0, 5.0], [0.0, 4.0, 5.0])
    model = SlownessModel(grid, np.full(grid.shape, 0.2))
    write_model_vts(tmp_path / "flat.vts", model)
    data = read(tmp_path / "flat.vts", "StructuredGrid")
    ix, iy, iz = np.unravel_index(cell_array(data, "block"), grid.shape)
    expected = np.diff(grid.x_edges)[ix] * np.diff(grid.y_edges)[iy]
    expected *= np.diff(grid.depth_edges_km)[iz]
    np.testing.assert_allclose(cell_volumes(data), expected, rtol=1e-12)


def rays_of(lines, frame):
    count = len(lines)
    grid = BlockGrid(frame, [-1.0, 1.0], [-1.0, 1.0], [0.0, 400.0])
    return Rays(
        grid=grid,
        time_s=np.arange(count) + 600.0,
        outside_time_s=np.arange(count) + 550.0,
        path_lengths=csr_array((count, 1)),
        traced=np.array([len(line) > 0 for line in lines]),
        point_offsets=np.cumsum([0, *(len(line) for line in lines)]),
        all_points=np.concatenate(lines),
    )


def test_rays_are_polylines_in_order(tmp_path):
    frame = Frame(longitude=12.0, latitude=70.0, azimuth_deg=-10.0)
    rng = np.random.default_rng(5)
    scale = np.array([2.0, 2.0, 300.0])
    lines = [rng.random((count, 3)) * scale for count in (4, 0, 7, 2, 5)]
    path = tmp_path / "rays.vtp"
    residual = np.array([0.1, np.nan, -0.2, 0.3, 0.0])
    write_rays_vtp(path, rays_of(lines, frame), values={"residual_after_s": residual})
    data = read(path, "PolyData")
    assert data.GetNumberOfLines() == data.GetNumberOfCells() == 4
    assert cell_array(data, "row").tolist() == [0, 2, 3, 4]
    assert cell_array(data, "residual_after_s").tolist() == [0.1, -0.2, 0.3, 0.0]
    for cell, row in enumerate((0, 2, 3, 4)):
        np.testing.assert_allclose(cell_points(data, cell), frame.enu_km(lines[row]), atol=1e-3)


def test_chosen_rays_only(tmp_path):
    frame = Frame.flat()
    lines = [np.full((3, 3), float(number)) for number in range(6)]
    path = tmp_path / "rays.vtp"
    write_rays_vtp(path, rays_of(lines, frame), rows=[4, 1])
    data = read(path, "PolyData")
    assert cell_array(data, "row").tolist() == [4, 1]
    np.testing.assert_array_equal(cell_points(data, 0), np.full((3, 3), 4.0) * [1, 1, -1])
    assert cell_array(data, "time_s").tolist() == [604.0, 601.0]


def test_values_of_another_length_are_refused(tmp_path):
    rays = rays_of([np.zeros((2, 3)), np.ones((2, 3))], Frame.flat())
    with pytest.raises(InputError, match=r"'weight' has shape \(3,\)"):
        write_rays_vtp(tmp_path / "rays.vtp", rays, values={"weight": np.ones(3)})
    assert not list(tmp_path.iterdir())


def test_no_ray_at_all_is_still_a_file(tmp_path):
    path = tmp_path / "rays.vtp"
    write_rays_vtp(path, rays_of([np.zeros((0, 3))], Frame.flat()))
    assert read(path, "PolyData").GetNumberOfCells() == 0


def test_stations_stand_on_the_ground_with_their_names(tmp_path):
    stations = Stations(
        network=np.array(["VH", "VH"]),
        station=np.array(["ØRN", "B02"]),
        latitude_deg=np.array([-31.0, -30.0]),
        longitude_deg=np.array([12.0, 12.5]),
        elevation_m=np.array([1500.0, -200.0]),
    )
    frame = Frame(longitude=12.0, latitude=-31.0)
    write_stations_vtp(tmp_path / "stations.vtp", stations, frame)
    data = read(tmp_path / "stations.vtp", "PolyData")
    assert data.GetNumberOfVerts() == 2
    assert cell_array(data, "label") == ["VH.ØRN", "VH.B02"]
    np.testing.assert_allclose(cell_points(data, 0), [[0.0, 0.0, 1.5]], atol=1e-9)
    east, north, up = cell_points(data, 1)[0]
    assert np.hypot(np.hypot(east, north), up + 6371.0) == pytest.approx(6371.0 - 0.2)
    assert east > 0.0
    assert north > 0.0


def test_events_are_marked_in_their_direction(tmp_path):
    """Due north on the central meridian stays due north, due east on the equator due east.

    Distances: arcs of a meridian or the equator, on geocentric latitudes
    tan φ' = (1 − f)² tan φ with the flattening of WGS84 (any geodesy textbook).
    """
    model = curved_model(frame=Frame(longitude=20.0, latitude=0.0, azimuth_deg=33.0))
    events = Events(
        event=np.array(["north", "east", "near"]),
        time=np.array(["2020-01-01"] * 3, dtype="datetime64[ns]"),
        latitude_deg=np.array([60.0, 0.0, 1.0]),
        longitude_deg=np.array([20.0, 80.0, 20.0]),
        depth_km=np.array([10.0, 600.0, 5.0]),
    )
    write_events_vtp(tmp_path / "events.vtp", events, model.grid)
    data = read(tmp_path / "events.vtp", "PolyData")
    geocentric = np.rad2deg(np.arctan((1 - 1 / 298.257223563) ** 2 * np.tan(np.deg2rad([60, 1]))))
    np.testing.assert_allclose(
        cell_array(data, "distance_deg"), [geocentric[0], 60.0, geocentric[1]], rtol=1e-9
    )
    azimuth = cell_array(data, "azimuth_deg")
    np.testing.assert_allclose((azimuth + 180.0) % 360.0 - 180.0, [0.0, 90.0, 0.0], atol=1e-9)
    north, east, near = (cell_points(data, i)[0] for i in range(3))
    assert abs(north[0]) < 1e-6 < north[1]
    assert abs(east[1]) < 1e-6 < east[0]
    corner = np.hypot(4.0, 2.5)
    arc = np.rad2deg(np.arctan2(north[1], north[2] + 6371.0))
    assert arc == pytest.approx(EVENT_RING * corner, rel=2e-3)
    assert np.rad2deg(np.arctan2(near[1], near[2] + 6371.0)) == pytest.approx(geocentric[1])


def test_points_with_values(tmp_path):
    values = {"flag": np.array([True, False]), "number": np.array([3, 4], dtype=np.int64)}
    write_points(
        tmp_path / "p.vtp", [[1.0, 2.0, 3.0], [4.0, 5.0, 6.0]], Frame.flat(), values=values
    )
    data = read(tmp_path / "p.vtp", "PolyData")
    assert cell_array(data, "flag").tolist() == [1, 0]
    assert cell_array(data, "number").tolist() == [3, 4]
    np.testing.assert_array_equal(cell_points(data, 1), [[4.0, 5.0, -6.0]])

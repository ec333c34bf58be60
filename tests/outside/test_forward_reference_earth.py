"""The box of blocks against the one-dimensional Earth it is filled with."""

import numpy as np
import pytest

import rayloom as rl
from rayloom.earth import distance_azimuth_deg, geocentric_latitude_deg, phase_wave
from rayloom.survey import Events, Stations


@pytest.fixture(scope="module")
def earth():
    return rl.ReferenceEarth("ak135")


def _network(random, count=5):
    return Stations(
        network=np.array(["QX"] * count),
        station=np.array([f"S{k}" for k in range(count)]),
        latitude_deg=random.uniform(-41.2, -38.8, count),
        longitude_deg=random.uniform(64.6, 67.4, count),
        elevation_m=random.uniform(0.0, 3000.0, count),
    )


def _events(random, frame, *, arc=None, count=5):
    """Events in all directions at given arcs (rad), by default at 32° to 85°."""
    azimuth = np.radians(random.uniform(0.0, 360.0, count))
    if arc is None:
        arc = np.radians(random.uniform(32.0, 85.0, count))
    x = np.degrees(np.arctan2(np.sin(arc) * np.sin(azimuth), np.cos(arc)))
    y = np.degrees(np.arcsin(np.sin(arc) * np.cos(azimuth)))
    longitude, latitude = frame.geographic_coordinates(x, y)
    return Events(
        event=np.array([f"E{k}" for k in range(count)]),
        time=np.array(["2024-03-01"] * count, dtype="datetime64[ns]"),
        latitude_deg=latitude,
        longitude_deg=longitude,
        depth_km=random.uniform(5.0, 500.0, count),
    )


def _exact_times(earth, phase, events, stations):
    """Give one-dimensional times of all events at all stations, event by event."""
    event, station = np.indices((len(events), len(stations))).reshape(2, -1)
    path = distance_azimuth_deg(
        geocentric_latitude_deg(events.latitude_deg)[event],
        events.longitude_deg[event],
        geocentric_latitude_deg(stations.latitude_deg)[station],
        stations.longitude_deg[station],
    )
    return earth.travel_time(
        phase, path.distance_deg, events.depth_km[event], stations.depth_km[station]
    )


def test_the_reference_model_gives_back_the_times_of_the_one_dimensional_earth(earth):
    """First arrivals of ak135 (Kennett, Engdahl & Buland 1995) through the earth room.

    Blocks stand for the layers inside the box, so times agree to the blocks' averaging
    and the tracer's error at its standard quality: without the means of the events within
    2 ms (standard deviation) and 8 ms (largest).
    """
    random = np.random.default_rng(20)
    frame = rl.Frame(longitude=66.0, latitude=-40.0, azimuth_deg=25.0)
    depth_edges = np.unique(np.r_[-4.0, np.arange(0.0, 301.0, 20.0), 35.0, 210.0])
    edges_deg = np.arange(-4.2, 4.21, 0.3)
    grid = rl.BlockGrid(frame, edges_deg, edges_deg, depth_edges)
    model = rl.SlownessModel.from_earth(grid, earth)
    stations, events = _network(random), _events(random, frame)
    rays = rl.trace_distant(model, earth, events, stations)
    exact = _exact_times(earth, "P", events, stations)
    difference = (rays.time_s - exact).reshape(5, 5)
    assert rays.traced.all()
    assert difference.min() > -0.002
    assert difference.max() < 0.06
    relative = difference - difference.mean(axis=1, keepdims=True)
    assert relative.std() < 0.002
    assert np.abs(relative).max() < 0.008


def test_entries_lie_on_the_base_or_the_sides_and_times_add_up(earth):
    """Entry rule: never through the top; |G s + outside − t| ≤ 1e-5 s."""
    random = np.random.default_rng(21)
    frame = rl.Frame(longitude=66.0, latitude=-40.0)
    edges_deg = np.arange(-3.2, 3.21, 0.4)
    grid = rl.BlockGrid(frame, edges_deg, edges_deg, np.arange(-5.0, 316.0, 20.0))
    model = rl.SlownessModel.from_earth(grid, earth)
    model = model.with_slowness(model.reference * random.uniform(0.97, 1.03, grid.shape))
    stations, events = _network(random), _events(random, frame)
    for method in ("bent", "reference", "straight"):
        rays = rl.trace_distant(model, earth, events, stations, method=method)
        kept = rays.traced
        assert kept.sum() >= 20
        x, y, depth = rays.entry[kept].T
        on_base = np.isclose(depth, grid.depth_edges_km[-1])
        on_side = np.isclose(np.abs(x), 3.2) | np.isclose(np.abs(y), 3.2)
        assert (on_base | on_side).all()
        assert (depth > grid.depth_edges_km[0] + 1.0).all()
        np.testing.assert_allclose(
            rays.predict_s(model.slowness_s_per_km)[kept], rays.time_s[kept], atol=1e-5
        )


def test_no_bent_ray_is_later_than_the_reference_ray(earth):
    """Fermat's principle, to the tracer's error."""
    random = np.random.default_rng(22)
    frame = rl.Frame(longitude=66.0, latitude=-40.0)
    edges_deg = np.arange(-3.2, 3.21, 0.4)
    grid = rl.BlockGrid(frame, edges_deg, edges_deg, np.arange(-5.0, 316.0, 20.0))
    model = rl.SlownessModel.from_earth(grid, earth)
    model = model.with_slowness(model.reference * random.uniform(0.95, 1.05, grid.shape))
    stations, events = _network(random), _events(random, frame)
    bent = rl.trace_distant(model, earth, events, stations, method="bent", quality="thorough")
    fixed = rl.trace_distant(model, earth, events, stations, method="reference")
    both = bent.traced & fixed.traced
    assert (bent.time_s[both] <= fixed.time_s[both] + 0.01).all()
    assert (fixed.time_s[both] - bent.time_s[both]).mean() > 0.02


# phase, nearest and farthest distance (degrees)
DISTANT_PHASES = [
    ("Pdiff", 108.0, 120.0),
    ("PcP", 0.0, 70.0),
    ("PKPdf", 125.0, 180.0),
    ("pP", 32.0, 90.0),
    ("sP", 32.0, 90.0),
    ("S", 32.0, 78.0),
    ("ScS", 3.0, 70.0),
    ("SKS", 85.0, 130.0),
]


@pytest.mark.parametrize(("phase", "nearest", "farthest"), DISTANT_PHASES)
def test_every_phase_enters_the_blocks_and_keeps_its_time(earth, phase, nearest, farthest):
    """ak135 (Kennett, Engdahl & Buland 1995) through the earth room, as above.

    Blocks average their layers, so steep rays agree best; nearest and farthest distance
    count among the events.
    """
    random = np.random.default_rng(23)
    frame = rl.Frame(longitude=66.0, latitude=-40.0, azimuth_deg=25.0)
    depth_edges = np.unique(np.r_[-4.0, np.arange(0.0, 301.0, 20.0), 35.0, 210.0])
    edges_deg = np.arange(-4.2, 4.21, 0.3)
    grid = rl.BlockGrid(frame, edges_deg, edges_deg, depth_edges)
    model = rl.SlownessModel.from_earth(grid, earth, wave=phase_wave(phase))
    stations = _network(random)
    arc = np.radians([nearest, farthest, *random.uniform(nearest, farthest, 3)])
    events = _events(random, frame, arc=arc)
    rays = rl.trace_distant(model, earth, events, stations, phases=phase)
    exact = _exact_times(earth, phase, events, stations)
    assert rays.traced.all()
    difference = (rays.time_s - exact).reshape(5, 5)
    assert difference.min() > -0.002
    assert difference.max() < 0.1
    relative = difference - difference.mean(axis=1, keepdims=True)
    assert relative.std() < 0.012


def test_phases_of_one_event_are_waves_of_their_own(earth):
    """Rows of mixed phases hold what each phase gives alone; aliases count as their phase."""
    random = np.random.default_rng(24)
    frame = rl.Frame(longitude=66.0, latitude=-40.0)
    edges_deg = np.arange(-3.2, 3.21, 0.8)
    grid = rl.BlockGrid(frame, edges_deg, edges_deg, np.arange(-5.0, 316.0, 40.0))
    model = rl.SlownessModel.from_earth(grid, earth)
    stations = _network(random, 3)
    events = _events(random, frame, arc=np.radians([20.0, 65.0, 150.0]), count=3)
    pairs = np.indices((3, 3)).reshape(2, -1).T
    names = ("P", "PcP", "PKIKP")
    alone = [rl.trace_distant(model, earth, events, stations, phases=name) for name in names]
    order = random.permutation(27)
    mixed = rl.trace_distant(
        model,
        earth,
        events,
        stations,
        pairs=np.tile(pairs, (3, 1))[order],
        phases=np.repeat(names, 9)[order],
    )
    expected = np.concatenate([rays.time_s for rays in alone])[order]
    np.testing.assert_array_equal(mixed.time_s, expected)
    traced = np.array([rays.traced.reshape(3, 3).all(axis=1) for rays in alone])
    assert traced.tolist() == [[False, True, False], [True, True, False], [False, False, True]]
    assert alone[0].problems == {
        "no wave of the phase enters the blocks": 3,
        "ray enters closer than 25° to the event": 3,
    }

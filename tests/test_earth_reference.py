"""ReferenceEarth: shapes, ranges, pickling, velocities and tables."""

from __future__ import annotations

import pickle
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
from scipy.integrate import quad

from rayloom.earth import ModelTable, ReferenceEarth
from rayloom.errors import InputError


@pytest.fixture(scope="module")
def earth() -> ReferenceEarth:
    return ReferenceEarth()


@pytest.fixture(scope="module")
def uniform() -> ReferenceEarth:
    """Build a mantle of constant velocity over a small core."""
    return ReferenceEarth.from_table(
        ModelTable.from_arrays(
            [0.0, 5000.0, 5000.0, 6371.0],
            [10.0, 10.0, 8.0, 8.0],
            [6.0, 6.0, 0.0, 0.0],
            [5.5, 5.5, 5.5, 5.5],
        ),
        name="uniform",
    )


def test_straight_rays_in_a_uniform_mantle(uniform: ReferenceEarth) -> None:
    """Times are chord lengths over velocity, by the law of cosines."""
    angle = np.radians([20.0, 60.0, 120.0])
    for source_km, receiver_km in [(0.0, 0.0), (600.0, 0.0), (100.0, 300.0), (50.0, -4.0)]:
        a, b = 6371.0 - source_km, 6371.0 - receiver_km
        chord = np.sqrt(a * a + b * b - 2 * a * b * np.cos(angle))
        reach = np.degrees(np.arccos(min(a, b) / max(a, b)))
        turns = np.degrees(angle) > reach
        times = uniform.travel_time("P", np.degrees(angle), source_km, receiver_km)
        assert times[turns] == pytest.approx(chord[turns] / 10.0, abs=1e-7)
        assert np.all(np.isnan(times[~turns]))


def test_core_casts_a_shadow(uniform: ReferenceEarth) -> None:
    edge = 2.0 * np.degrees(np.arccos(1371.0 / 6371.0))
    times = uniform.travel_time("P", [edge - 0.01, edge + 0.01])
    assert np.isfinite(times[0])
    assert np.isnan(times[1])


def test_ellipticity_of_straight_rays(uniform: ReferenceEarth) -> None:
    """In a uniform mantle the delay is that of the chord between displaced ends."""
    latitude, azimuth, distance = np.radians([35.0, 60.0, 80.0])
    ellipticity = float(uniform.ellipticity(6371.0))
    end = np.arcsin(
        np.sin(latitude) * np.cos(distance) + np.cos(latitude) * np.sin(distance) * np.cos(azimuth)
    )
    radii = [6371.0 * (1 - ellipticity * (np.sin(t) ** 2 - 1 / 3)) for t in (latitude, end)]
    squares = radii[0] ** 2 + radii[1] ** 2
    chord = np.sqrt(squares - 2 * radii[0] * radii[1] * np.cos(distance))
    expected = (chord - 2 * 6371.0 * np.sin(distance / 2)) / 10.0
    delay = uniform.ellipticity_s("P", 80.0, 0.0, 35.0, 60.0)
    assert float(delay) == pytest.approx(expected, abs=0.01 * abs(expected))


def test_order_of_pairs_does_not_matter(earth: ReferenceEarth) -> None:
    rng = np.random.default_rng(24)
    distance, source = rng.uniform(20, 105, 600), rng.choice([0.0, 10.0, 33.0, 580.0], 600)
    receiver = rng.uniform(-5, 50, 600)
    order = rng.permutation(600)
    times = earth.travel_time("P", distance, source, receiver)
    shuffled = earth.travel_time("P", distance[order], source[order], receiver[order])
    assert np.array_equal(times[order], shuffled, equal_nan=True)


def test_no_gaps_between_branches(earth: ReferenceEarth) -> None:
    """Every distance up to the core's shadow has an arrival, and times rise."""
    distance = np.linspace(25.0, 94.0, 20001)
    for phase in ("P", "S"):
        for depth in (0.0, 123.4, 410.0):
            times = earth.travel_time(phase, distance, depth)
            assert np.all(np.isfinite(times))
            assert np.all(np.diff(times) > 0.0)


def test_ray_parameter_is_the_slope(earth: ReferenceEarth) -> None:
    step = 1e-3
    for depth in (0.0, 200.0, 600.0):
        distance = np.linspace(30.0, 90.0, 13)
        slope = (
            earth.travel_time("S", distance + step, depth)
            - earth.travel_time("S", distance - step, depth)
        ) / np.radians(2 * step)
        parameter = earth.ray_parameter("S", distance, depth)
        assert parameter == pytest.approx(slope, rel=2e-5)


def test_source_and_receiver_exchange(earth: ReferenceEarth) -> None:
    there = earth.travel_time("P", [30.0, 70.0], 500.0, 40.0)
    back = earth.travel_time("P", [30.0, 70.0], 40.0, 500.0)
    assert there == pytest.approx(back, abs=1e-7)


def test_first_arrival_of_a_triplication(earth: ReferenceEarth) -> None:
    """Near 20 degrees several rays arrive; the time curve is the lower envelope: concave."""
    distance = np.linspace(14.0, 30.0, 801)
    parameter = earth.ray_parameter("P", distance)
    assert np.all(np.diff(parameter) < 1e-6)
    assert np.diff(parameter).min() < -20.0


def test_shapes_and_missing_values(earth: ReferenceEarth) -> None:
    times = earth.travel_time("P", np.full((3, 1), 50.0), [0.0, 100.0])
    assert times.shape == (3, 2)
    assert earth.travel_time("P", 50.0).shape == ()
    assert np.isnan(earth.travel_time("P", np.nan))
    assert np.isnan(earth.travel_time("P", 179.0))
    assert earth.travel_time("P", []).shape == (0,)


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (
            ("PPP", 50.0),
            "phase: expected one of P, Pdiff, PcP, PKPdf, pP, sP, S, ScS, SKS, got 'PPP'",
        ),
        (("P", 181.0), "distance_deg: expected 0 to 180 degrees, got 181"),
        (("P", 50.0, 3000.0), "source_depth_km: expected -12 to 2891.5 km, got 3000"),
        (("P", 50.0, np.nan), "source_depth_km: expected -12 to 2891.5 km, got nan"),
        (("P", 50.0, 0.0, -13.0), "receiver_depth_km"),
        (("P", [1.0, 2.0], [1.0, 2.0, 3.0]), "shapes do not broadcast"),
        (("P", "far"), "distance_deg: expected numbers"),
    ],
)
def test_bad_arguments(earth: ReferenceEarth, arguments: tuple[object, ...], message: str) -> None:
    with pytest.raises(InputError, match=message):
        earth.travel_time(*arguments)  # type: ignore[arg-type]


def test_velocities_at_discontinuities(earth: ReferenceEarth) -> None:
    assert earth.velocity_km_s([-5.0, 0.0, 20.0, 35.0]) == pytest.approx([5.8, 5.8, 6.5, 8.04])
    assert earth.velocity_km_s(35.0, side="above") == pytest.approx(6.5)
    assert earth.velocity_km_s(35.0, "S") == pytest.approx(4.48)
    assert earth.discontinuities_km[:5] == pytest.approx([20, 35, 210, 410, 660])


@pytest.mark.parametrize("wave", ["P", "S"])
def test_mean_slowness(earth: ReferenceEarth, wave: str) -> None:
    def slowness(depth_km: float) -> float:
        return 1.0 / float(earth.velocity_km_s(depth_km, wave))

    edges = [-3.0, 10.0, 50.0, 700.0, 2800.0]
    means = earth.mean_slowness_s_per_km(edges, wave)
    for (low, high), mean in zip(pairwise(edges), means, strict=True):
        inside = np.unique(earth.table.depth_km)
        cuts = [low, *inside[(inside > low) & (inside < high)], high]
        total = sum(quad(slowness, a, b)[0] for a, b in pairwise(cuts))
        assert mean == pytest.approx(total / (high - low), rel=1e-9)
    with pytest.raises(InputError, match="rising"):
        earth.mean_slowness_s_per_km([10.0, 5.0], wave)


def test_time_table_agrees_with_exact_times(earth: ReferenceEarth) -> None:
    rng = np.random.default_rng(25)
    distance, depth = rng.uniform(25, 94, 1500), rng.uniform(-9, 700, 1500)
    for phase in ("P", "S"):
        for source_km in (0.0, 33.0, 410.0):
            table = earth.time_table(phase, source_km)
            exact = earth.travel_time(phase, distance, source_km, depth)
            misses = np.abs(table.time_s(distance, depth) - exact)
            assert np.nanmax(misses) <= 2e-4
            assert np.nanpercentile(misses, 99.0) <= 1e-4
            assert np.array_equal(np.isnan(misses), np.isnan(exact))


def test_time_table_slopes(earth: ReferenceEarth) -> None:
    """The depth slope is the vertical slowness of the rising ray, above a discontinuity."""
    table = earth.time_table("P", 100.0)
    distance = np.array([28.0, 45.0, 90.0])
    for depth in (0.0, 35.0, 200.0, 660.0):
        parameter = earth.ray_parameter("P", distance, 100.0, depth)
        velocity = earth.velocity_km_s(depth, side="above")
        expected = -np.sqrt(velocity**-2 - (parameter / (6371.0 - depth)) ** 2)
        assert table.depth_slope_s_per_km(distance, depth) == pytest.approx(expected, abs=3e-5)
        assert table.ray_parameter_s(distance, depth) == pytest.approx(parameter, rel=1e-3)
    assert np.isnan(table.time_s(24.0, 0.0))
    assert np.isnan(table.time_s(50.0, 701.0))


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"distance_deg": (50.0, 40.0)}, "rising pair"),
        ({"receiver_depth_km": (10.0, 10.0)}, "rising pair"),
        ({"receiver_depth_km": (0.0, 4000.0)}, "receiver_depth_km"),
    ],
)
def test_bad_time_tables(
    earth: ReferenceEarth, options: dict[str, tuple[float, float]], message: str
) -> None:
    with pytest.raises(InputError, match=message):
        earth.time_table("P", 0.0, **options)


def test_models_are_values(earth: ReferenceEarth, tmp_path: Path) -> None:
    copy = pickle.loads(pickle.dumps(earth))
    assert copy == earth
    assert hash(copy) == hash(earth)
    assert copy != ReferenceEarth("iasp91")
    assert float(copy.travel_time("P", 60.0)) == float(earth.travel_time("P", 60.0))
    with pytest.raises(AttributeError, match="cannot be changed"):
        earth.name = "other"  # type: ignore[misc]
    with pytest.raises(InputError, match="no Earth model 'ak153'"):
        ReferenceEarth("ak153")

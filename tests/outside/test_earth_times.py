"""Travel times against printed tables, integrated values and a reference library."""

from __future__ import annotations

import warnings
from importlib import resources

import numpy as np
import pytest

from rayloom.earth import ReferenceEarth

with warnings.catch_warnings():
    warnings.simplefilter("ignore", DeprecationWarning)
    from obspy.taup import TauPyModel

# phase, distance (degrees), source depth (km), integrated value (s)
LINEAR_VELOCITY = [
    ("P", 30, 0, 370.2635),
    ("P", 60, 0, 608.3172),
    ("P", 90, 0, 781.3854),
    ("P", 50, 100, 524.0311),
    ("P", 40, 300, 426.1761),
    ("P", 80, 700, 659.9336),
    ("S", 40, 0, 822.9147),
    ("S", 60, 0, 1101.8649),
    ("S", 50, 500, 880.7665),
    ("S", 75, 300, 1221.2157),
]
TABLES = ["ak135_P_shallow", "ak135_P_deep", "ak135_S_shallow", "ak135_S_deep"]


@pytest.fixture(scope="module")
def ak135() -> ReferenceEarth:
    return ReferenceEarth("ak135")


@pytest.fixture(scope="module")
def taup() -> TauPyModel:
    return TauPyModel("ak135")


@pytest.mark.parametrize(("phase", "distance", "depth", "expected"), LINEAR_VELOCITY)
def test_integrals_of_linear_velocity(
    ak135: ReferenceEarth, phase: str, distance: float, depth: float, expected: float
) -> None:
    """Computed separately: ak135, velocity linear in radius, integrated to 0.01 ms."""
    assert float(ak135.travel_time(phase, distance, depth)) == pytest.approx(expected, abs=1e-4)


@pytest.mark.parametrize("table", TABLES)
def test_printed_tables(ak135: ReferenceEarth, table: str) -> None:
    """Every printed ak135 value beyond 25 degrees, as obspy carries the tables.

    Kennett, Engdahl & Buland (1995), printed to 0.01 s. Left out are distances
    in the shadow of the core, where the tables continue with diffracted waves.
    """
    folder = resources.files("obspy.taup.tests") / "data" / "TauP_test_data"
    lines = (folder / f"{table}.txt").read_text().splitlines()
    depths = np.array(lines[0].split(), dtype=float)
    rows = [line.split() for line in lines[1:] if line.strip()]
    values = np.array([row[: 1 + 2 * len(depths)] for row in rows], dtype=float)
    values = values[values[:, 0] >= 25.0]
    printed = 60.0 * values[:, 1::2] + values[:, 2::2]

    times = ak135.travel_time(table.split("_")[1], values[:, :1], depths)

    assert np.all(np.isfinite(times[values[:, 0] <= 95.0]))
    assert np.nanmax(np.abs(times - printed)) <= 0.045


def test_iasp91() -> None:
    """Computed with a general-purpose library (iasp91: Kennett & Engdahl 1991)."""
    times = ReferenceEarth("iasp91").travel_time("P", [30.0, 60.0, 90.0])
    assert times == pytest.approx([370.26, 608.28, 781.33], abs=0.006)


@pytest.mark.parametrize("phase", ["P", "S"])
def test_reference_library_at_random(ak135: ReferenceEarth, taup: TauPyModel, phase: str) -> None:
    """obspy.taup (Crotwell, Owens & Ritsema 1999) at random distances and depths."""
    rng = np.random.default_rng(20)
    misses = []
    for source_km, receiver_km in zip(rng.uniform(0, 700, 8), rng.uniform(0, 700, 8), strict=True):
        for distance in rng.uniform(25.0, 94.0, 4):
            arrivals = taup.get_travel_times(
                source_km, distance, [phase], receiver_depth_in_km=receiver_km
            )
            time = ak135.travel_time(phase, distance, source_km, receiver_km)
            misses.append(float(time) - arrivals[0].time)
    assert np.max(np.abs(misses)) <= 5e-3
    assert np.std(misses) <= 1e-3


def test_ray_parameter_of_the_reference_library(ak135: ReferenceEarth, taup: TauPyModel) -> None:
    """obspy.taup's ray parameter; its layers make it coarser than its times."""
    rng = np.random.default_rng(21)
    for distance, depth in zip(rng.uniform(28, 94, 12), rng.uniform(0, 700, 12), strict=True):
        arrival = taup.get_travel_times(depth, distance, ["P"])[0]
        assert float(ak135.ray_parameter("P", distance, depth)) == pytest.approx(
            arrival.ray_param, rel=2e-3
        )


def test_incidence_at_the_surface(ak135: ReferenceEarth) -> None:
    """ak135 P from a surface source: values computed with a general library."""
    angles = ak135.incidence_deg("P", [30.0, 60.0, 90.0])
    assert angles == pytest.approx([27.5, 21.0, 14.0], abs=0.05)


def test_incidence_of_the_reference_library(ak135: ReferenceEarth, taup: TauPyModel) -> None:
    """obspy.taup's incidence angle at buried receivers."""
    for distance, source_km, receiver_km in [(35.0, 20.0, 0.0), (60.0, 300.0, 150.0)]:
        arrival = taup.get_travel_times(
            source_km, distance, ["P"], receiver_depth_in_km=receiver_km
        )[0]
        angle = float(ak135.incidence_deg("P", distance, source_km, receiver_km))
        assert angle == pytest.approx(arrival.incident_angle, abs=0.05)


def test_elevation(ak135: ReferenceEarth) -> None:
    """H sqrt(1/v^2 - p^2/R^2) at 5.8 km/s, seconds per km, computed."""
    delays = ak135.elevation_s("P", [30.0, 60.0, 90.0], 0.0, 1.0)
    assert delays == pytest.approx([0.153, 0.161, 0.167], abs=5e-4)


def test_shadow_of_the_core(ak135: ReferenceEarth, taup: TauPyModel) -> None:
    """P ends where obspy.taup's P ends; beyond it there is no arrival."""
    for depth in (0.0, 300.0, 700.0):
        distances = np.arange(92.0, 101.0, 0.25)
        arrives = [bool(taup.get_travel_times(depth, float(d), ["P"])) for d in distances]
        finite = np.isfinite(ak135.travel_time("P", distances, depth))
        assert abs(distances[finite].max() - distances[arrives].max()) <= 0.25
        assert not np.any(finite[distances > distances[finite].max()])

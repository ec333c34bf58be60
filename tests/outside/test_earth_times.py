"""Travel times against printed tables, integrated values and a reference library."""

from __future__ import annotations

import warnings
from importlib import resources
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray

from rayloom.earth import PHASES, ReferenceEarth

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
    ("PcP", 40, 0, 581.5933),
    ("PKPdf", 120, 0, 1132.4805),
    ("PKPdf", 150, 0, 1187.4318),
    ("PKPdf", 140, 300, 1132.6341),
    ("PKPdf", 170, 700, 1129.9959),
]
# table, largest difference (s)
REFLECTED_AND_CORE = [("PcP", 0.035), ("ScS", 0.035), ("PKIKP", 0.060)]
CORE_PHASES = ("PKPdf", "SKS")


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


def printed_table(name: str) -> tuple[NDArray[Any], NDArray[Any], NDArray[Any]]:
    """Read distances (a column), source depths and printed times; NaN where none is printed.

    ak135 tables of Kennett, Engdahl & Buland (1995) to 0.01 s, as obspy carries them.
    """
    folder = resources.files("obspy.taup.tests") / "data" / "TauP_test_data"
    lines = (folder / f"ak135_{name}.txt").read_text().splitlines()
    depths = np.array(lines[0].split(), dtype=float)
    rows = [line.split() for line in lines[1:] if line.strip()]
    values = np.array([row[: 1 + 2 * len(depths)] for row in rows], dtype=float)
    printed = 60.0 * values[:, 1::2] + values[:, 2::2]
    return values[:, :1], depths, np.where(printed > 0.0, printed, np.nan)


@pytest.mark.parametrize("table", ["P_shallow", "P_deep", "S_shallow", "S_deep"])
def test_printed_tables(ak135: ReferenceEarth, table: str) -> None:
    """Every printed value beyond 25 degrees, outside the shadow of the core."""
    distance, depth, printed = printed_table(table)
    times = ak135.travel_time(table[0], distance, depth)
    far = distance[:, 0] >= 25.0
    assert np.all(np.isfinite(times[far & (distance[:, 0] <= 95.0)]))
    assert np.nanmax(np.abs(times - printed)[far]) <= 0.045


@pytest.mark.parametrize("table", ["P_shallow", "P_deep"])
def test_printed_tables_in_the_shadow(ak135: ReferenceEarth, table: str) -> None:
    """In the shadow of the core the tables of P continue with diffracted waves."""
    distance, depth, printed = printed_table(table)
    times = ak135.travel_time("Pdiff", distance, depth)
    shadow = np.isnan(ak135.travel_time("P", distance, depth)) & (distance > 90.0)
    assert shadow.sum() > 200
    assert np.max(np.abs(times - printed)[shadow]) <= 0.045
    assert not np.any(np.isfinite(times[distance[:, 0] <= 90.0]))


@pytest.mark.parametrize(("table", "limit_s"), REFLECTED_AND_CORE)
def test_printed_tables_of_the_core(ak135: ReferenceEarth, table: str, limit_s: float) -> None:
    """Every printed value; where none is printed there is no ray, to one cell of the table."""
    distance, depth, printed = printed_table(table)
    times = ak135.travel_time(table, distance, depth)
    exists = np.isfinite(printed)
    assert exists.sum() > 500
    assert np.max(np.abs(times - printed)[exists]) <= limit_s
    assert np.sum(np.isfinite(times[~exists])) <= 1


def test_iasp91() -> None:
    """Computed with obspy.taup (iasp91: Kennett & Engdahl 1991)."""
    times = ReferenceEarth("iasp91").travel_time("P", [30.0, 60.0, 90.0])
    assert times == pytest.approx([370.26, 608.28, 781.33], abs=0.006)


def first_of_each_phase(
    taup: TauPyModel, source_km: float, distance: float, receiver_km: float
) -> dict[str, float]:
    """First arrival of every phase by obspy.taup, which knows PKPdf as PKIKP."""
    names = {"PKIKP" if phase == "PKPdf" else phase: phase for phase in PHASES}
    arrivals = taup.get_travel_times(
        source_km, distance, list(names), receiver_depth_in_km=receiver_km
    )
    found: dict[str, float] = {}
    for arrival in arrivals:
        phase = names[arrival.name]
        found[phase] = min(found.get(phase, np.inf), arrival.time)
    return found


def test_reference_library_at_random(ak135: ReferenceEarth, taup: TauPyModel) -> None:
    """obspy.taup (Crotwell, Owens & Ritsema 1999) at random distances and depths.

    Both agree on which phases arrive; obspy ends diffraction after 60 degrees
    along the core. The spread of SKS is that of its usual distances, 85 to 140
    degrees: obspy's velocities follow a power law inside each layer, and its SKS
    gets later with the way through the core (1.1 ms over all distances).
    """
    rng = np.random.default_rng(20)
    misses: dict[str, list[float]] = {phase: [] for phase in PHASES}
    usual: dict[str, list[float]] = {phase: [] for phase in PHASES}
    for source_km, receiver_km in rng.uniform(0.0, 700.0, (6, 2)):
        for distance in rng.uniform(0.0, 180.0, 14):
            expected = first_of_each_phase(taup, source_km, distance, receiver_km)
            for phase in PHASES:
                time = float(ak135.travel_time(phase, distance, source_km, receiver_km))
                if phase != "Pdiff" or distance < 150.0:
                    assert np.isfinite(time) == (phase in expected), (phase, distance)
                if phase in expected:
                    misses[phase].append(time - expected[phase])
                    if phase != "SKS" or 85.0 <= distance <= 140.0:
                        usual[phase].append(misses[phase][-1])
    for phase, values in misses.items():
        assert len(usual[phase]) >= 15
        assert np.max(np.abs(values)) <= (8e-3 if phase in CORE_PHASES else 5e-3), phase
        assert np.std(usual[phase]) <= 1e-3, phase


def test_ray_parameter_of_the_reference_library(ak135: ReferenceEarth, taup: TauPyModel) -> None:
    """obspy.taup's ray parameter; its layers make it coarser than its times."""
    rng = np.random.default_rng(21)
    for distance, depth in zip(rng.uniform(28, 94, 12), rng.uniform(0, 700, 12), strict=True):
        arrival = taup.get_travel_times(depth, distance, ["P"])[0]
        assert float(ak135.ray_parameter("P", distance, depth)) == pytest.approx(
            arrival.ray_param, rel=2e-3
        )


def test_incidence_at_the_surface(ak135: ReferenceEarth) -> None:
    """ak135 P from a surface source: values computed with obspy.taup."""
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

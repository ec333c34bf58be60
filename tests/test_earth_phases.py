"""Phases of the reference Earth: names, where they exist, tables, geometry of uniform Earths."""

from __future__ import annotations

import numpy as np
import pytest

from rayloom.earth import PHASES, ModelTable, ReferenceEarth, phase_wave, standard_phase
from rayloom.errors import InputError

# phase, nearest and farthest distance (degrees) beyond triplications
WINDOWS = [
    ("P", 27.0, 94.0),
    ("Pdiff", 101.0, 170.0),
    ("PcP", 0.0, 90.0),
    ("PKPdf", 118.0, 180.0),
    ("pP", 28.0, 94.0),
    ("sP", 28.0, 94.0),
    ("S", 27.0, 94.0),
    ("ScS", 0.0, 90.0),
    ("SKS", 80.0, 140.0),
]


@pytest.fixture(scope="module")
def earth() -> ReferenceEarth:
    return ReferenceEarth()


def layered(core_km: float, inner_km: float | None) -> ReferenceEarth:
    """Build an Earth of 10 km/s for P and 6 km/s for S wherever it is solid."""
    edges = [0.0, core_km, core_km, *([] if inner_km is None else [inner_km, inner_km]), 6371.0]
    shear = [6.0, 6.0, 0.0, 0.0, 4.0, 4.0][: len(edges)]
    density = [4.5, 4.5, 11.0, 11.0, 13.0, 13.0][: len(edges)]
    table = ModelTable.from_arrays(edges, [10.0] * len(edges), shear, density)
    return ReferenceEarth.from_table(table)


def test_names_and_waves() -> None:
    assert PHASES == ("P", "Pdiff", "PcP", "PKPdf", "pP", "sP", "S", "ScS", "SKS")
    assert standard_phase("PKIKP") == "PKPdf"
    assert standard_phase("ScS") == "ScS"
    assert [phase_wave(name) for name in ("sP", "PKIKP", "SKS")] == ["P", "P", "S"]
    with pytest.raises(InputError, match="phase: expected one of P, Pdiff"):
        phase_wave("Lg")


def test_an_alias_gives_the_same_arrival(earth: ReferenceEarth) -> None:
    assert float(earth.travel_time("PKIKP", 150.0)) == float(earth.travel_time("PKPdf", 150.0))
    table = earth.time_table("PKIKP", 0.0, distance_deg=(120.0, 180.0))
    assert table.phase == "PKPdf"


@pytest.mark.parametrize("inner_km", [4000.0, 5150.0])
def test_inner_core_of_the_model_bounds_pkpdf(inner_km: float) -> None:
    """With one velocity throughout PKPdf is a chord that meets the inner core."""
    earth = layered(2900.0, inner_km)
    edge = 2.0 * np.degrees(np.arccos((6371.0 - inner_km) / 6371.0))
    distance = np.array([edge + 0.01, 0.5 * (edge + 180.0), 179.9, 180.0])
    chord_s = 2.0 * 6371.0 * np.sin(np.radians(distance) / 2.0) / 10.0
    assert earth.travel_time("PKPdf", distance) == pytest.approx(chord_s, abs=1e-6)
    assert np.isnan(earth.travel_time("PKPdf", edge - 0.01))


def test_reflections_of_a_uniform_mantle() -> None:
    """PcP and ScS bounce at half the distance; pP is a mirror image (law of cosines)."""
    earth = layered(2900.0, None)
    half = np.radians([0.0, 10.0, 35.0]) / 2.0
    leg_km = np.sqrt(6371.0**2 + 3471.0**2 - 2.0 * 6371.0 * 3471.0 * np.cos(half))
    for phase, velocity in (("PcP", 10.0), ("ScS", 6.0)):
        times = earth.travel_time(phase, np.degrees(2.0 * half))
        assert times == pytest.approx(2.0 * leg_km / velocity, abs=1e-7)
    parameter = float(earth.ray_parameter("pP", 90.0, 500.0))
    up, down = 10.0 * parameter / np.array([5871.0, 6371.0])
    legs_km = 5871.0 * np.sqrt(1.0 - up**2), 6371.0 * np.sqrt(1.0 - down**2)
    angle = 3.0 * np.arccos(down) - np.arccos(up)
    assert np.degrees(angle) == pytest.approx(90.0, abs=1e-5)
    assert float(earth.travel_time("pP", 90.0, 500.0)) == pytest.approx(
        (3.0 * legs_km[1] - legs_km[0]) / 10.0, abs=1e-6
    )


def test_no_inner_core_no_pkpdf() -> None:
    earth = layered(2900.0, None)
    assert np.all(np.isnan(earth.travel_time("PKPdf", np.linspace(0.0, 180.0, 37))))


def test_depth_phases_need_a_buried_source(earth: ReferenceEarth) -> None:
    for phase in ("pP", "sP"):
        assert np.all(np.isnan(earth.travel_time(phase, 60.0, [0.0, -1.0])))
        assert float(earth.travel_time(phase, 60.0, 1e-3)) == pytest.approx(
            float(earth.travel_time("P", 60.0)), abs=1e-3
        )


def test_pdiff_continues_p_into_the_shadow(earth: ReferenceEarth) -> None:
    """Time = grazing P + p times the extra arc: a straight line that begins where P ends."""
    for depth in (0.0, 600.0):
        distance = np.linspace(90.0, 100.0, 5001)
        direct = earth.travel_time("P", distance, depth)
        diffracted = earth.travel_time("Pdiff", distance, depth)
        assert not np.any(np.isfinite(direct) & np.isfinite(diffracted))
        assert np.sum(np.isnan(direct) & np.isnan(diffracted)) <= 1
        last, first = np.nanmax(direct), np.nanmin(diffracted)
        parameter = float(earth.ray_parameter("Pdiff", 120.0, depth))
        step_s = parameter * np.radians(distance[1] - distance[0])
        assert first - last == pytest.approx(step_s, rel=1.0)
        far = earth.travel_time("Pdiff", [110.0, 140.0], depth)
        assert np.diff(far)[0] == pytest.approx(parameter * np.radians(30.0), abs=1e-9)


@pytest.mark.parametrize(("phase", "nearest", "farthest"), WINDOWS)
def test_ray_parameter_is_the_slope(
    earth: ReferenceEarth, phase: str, nearest: float, farthest: float
) -> None:
    step = 1e-3
    distance = np.linspace(nearest + 1.0, farthest - 1.0, 9)
    for receiver_km in (-2.0, 300.0):
        later = earth.travel_time(phase, distance + step, 200.0, receiver_km)
        earlier = earth.travel_time(phase, distance - step, 200.0, receiver_km)
        slope = (later - earlier) / np.radians(2 * step)
        parameter = earth.ray_parameter(phase, distance, 200.0, receiver_km)
        assert parameter == pytest.approx(slope, rel=1e-4, abs=1e-3)


@pytest.mark.parametrize(("phase", "nearest", "farthest"), WINDOWS)
def test_tables_agree_with_exact_times(
    earth: ReferenceEarth, phase: str, nearest: float, farthest: float
) -> None:
    """Receivers from 12 km above sea level to 800 km depth, to 0.1 ms.

    A table knows no arrival in the one cell of distance in which a phase ends.
    """
    rng = np.random.default_rng(40)
    distance, receiver = rng.uniform(nearest, farthest, 400), rng.uniform(-12.0, 800.0, 400)
    for source_km in (10.0, 700.0):
        table = earth.time_table(
            phase, source_km, distance_deg=(nearest, farthest), receiver_depth_km=(-12.0, 800.0)
        )
        exact = earth.travel_time(phase, distance, source_km, receiver)
        found = table.time_s(distance, receiver)
        assert not np.any(np.isfinite(found) & np.isnan(exact))
        assert np.mean(np.isfinite(exact) & np.isnan(found)) < 0.01
        assert np.isfinite(exact).mean() > 0.7
        assert np.nanmax(np.abs(found - exact)) <= 1e-4
        parameter = earth.ray_parameter(phase, distance, source_km, receiver)
        assert np.nanmax(np.abs(table.ray_parameter_s(distance, receiver) - parameter)) < 0.3


@pytest.mark.parametrize("phase", ["P", "Pdiff", "PcP", "PKPdf", "S", "ScS", "SKS"])
def test_source_and_receiver_exchange(earth: ReferenceEarth, phase: str) -> None:
    distance = np.array([40.0, 90.0, 130.0, 170.0])
    there = earth.travel_time(phase, distance, 500.0, 40.0)
    back = earth.travel_time(phase, distance, 40.0, 500.0)
    assert np.any(np.isfinite(there))
    assert there == pytest.approx(back, abs=1e-7, nan_ok=True)


def test_the_antipode(earth: ReferenceEarth) -> None:
    """The ray through the centre takes twice the vertical time from surface to centre."""
    vertical_s = float(earth.travel_time("PKPdf", 180.0))
    assert float(earth.ray_parameter("PKPdf", 180.0)) == 0.0
    near = earth.travel_time("PKPdf", [179.99, 179.999])
    assert np.all(near < vertical_s)
    assert near == pytest.approx(vertical_s, abs=1e-3)
    beside, exactly = earth.ellipticity_s("PKPdf", [179.999, 180.0], 0.0, 30.0, 40.0)
    assert beside == pytest.approx(exactly, abs=1e-4)

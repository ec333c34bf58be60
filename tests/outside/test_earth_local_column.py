"""The delay of a local crust against travel times through whole Earths that have it."""

from __future__ import annotations

import warnings
from pathlib import Path

import numpy as np
import pytest

from rayloom.earth import LocalColumn, ModelTable, ReferenceEarth, column_delay_s

SOURCE_KM = 200.0
"""Below any crust, so that the wave crosses the changed layers once, at the receiver."""


def with_crust(earth: ReferenceEarth, rows: list[tuple[float, float, float]]) -> ReferenceEarth:
    """Replace what lies above the last depth of some rows (depth, vp, vs) by them."""
    table, bottom = earth.table, rows[-1][0]
    depth, vp, vs = (list(column) for column in zip(*rows, strict=True))
    below = float(earth.velocity_km_s(bottom, "P")), float(earth.velocity_km_s(bottom, "S"))
    density = [2.8] * len(rows)
    if (vp[-1], vs[-1]) != below:
        depth, vp, vs = [*depth, bottom], [*vp, below[0]], [*vs, below[1]]
        density = [*density, 3.3]
    rest = table.depth_km > bottom
    return ReferenceEarth.from_table(
        ModelTable.from_arrays(
            [*depth, *table.depth_km[rest]],
            [*vp, *table.vp_km_s[rest]],
            [*vs, *table.vs_km_s[rest]],
            [*density, *table.density_g_cm3[rest]],
        )
    )


CRUSTS = {
    "thick": [(0.0, 6.1, 3.5), (55.0, 6.7, 3.9)],
    "thin": [(0.0, 5.4, 3.0), (8.0, 6.6, 3.7), (8.0, 8.04, 4.48), (35.0, 8.04, 4.48)],
    "layered": [(0.0, 2.5, 1.2), (3.0, 2.5, 1.2), (3.0, 6.0, 3.4), (40.0, 7.0, 4.0)],
}


def column_of(rows: list[tuple[float, float, float]]) -> LocalColumn:
    depth, vp, vs = (np.array(column) for column in zip(*rows, strict=True))
    return LocalColumn(depth, vp, vs, float("nan"))


@pytest.mark.parametrize("name", CRUSTS)
@pytest.mark.parametrize(
    ("phase", "distance_deg"),
    [("P", (30.0, 60.0, 90.0)), ("S", (30.0, 60.0, 78.0)), ("PKPdf", (130.0, 170.0))],
)
def test_delay_is_the_difference_of_two_earths(
    name: str, phase: str, distance_deg: tuple[float, ...]
) -> None:
    """First order in the change: within 0.3 ms for delays of up to 1.8 s."""
    earth = ReferenceEarth("ak135")
    distance = np.array(distance_deg)
    wave = "S" if phase == "S" else "P"
    local = with_crust(earth, CRUSTS[name])
    expected_s = local.travel_time(phase, distance, SOURCE_KM) - earth.travel_time(
        phase, distance, SOURCE_KM
    )
    parameter = earth.ray_parameter(phase, distance, SOURCE_KM)
    delay_s = column_delay_s(earth, column_of(CRUSTS[name]), wave, parameter)
    np.testing.assert_allclose(delay_s, expected_s, atol=3e-4)


def test_delay_against_the_reference_library(tmp_path: Path) -> None:
    """obspy.taup with ak135 and with ak135 under another crust: differential times.

    Its tables are interpolated to a few ms; the bar is 5 ms on delays of up to 1.4 s.
    """
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        from obspy.taup import TauPyModel
        from obspy.taup.taup_create import build_taup_model

    earth = ReferenceEarth("ak135")
    table = with_crust(earth, CRUSTS["layered"]).table
    rows = zip(table.depth_km, table.vp_km_s, table.vs_km_s, table.density_g_cm3, strict=True)
    lines = [f"{depth:.3f} {vp:.5f} {vs:.5f} {density:.3f}" for depth, vp, vs, density in rows]
    (tmp_path / "other.tvel").write_text("\n".join(["P", "S", *lines]) + "\n", encoding="ascii")
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        build_taup_model(str(tmp_path / "other.tvel"), str(tmp_path), verbose=False)
        found = {
            name: np.array(
                [
                    TauPyModel(model).get_travel_times(SOURCE_KM, distance, [phase])[0].time
                    for phase in ("P", "S")
                    for distance in (35.0, 60.0, 75.0)
                ]
            )
            for name, model in (("usual", "ak135"), ("other", str(tmp_path / "other.npz")))
        }
    expected_s = found["other"] - found["usual"]
    column = column_of(CRUSTS["layered"])
    delay_s = np.concatenate(
        [
            column_delay_s(
                earth,
                column,
                phase,
                earth.ray_parameter(phase, np.array([35.0, 60.0, 75.0]), SOURCE_KM),
            )
            for phase in ("P", "S")
        ]
    )
    np.testing.assert_allclose(delay_s, expected_s, atol=0.005)


def test_a_plane_layer_has_a_closed_form() -> None:
    """Textbook: h (√(1/v₁² − p²) − √(1/v₂² − p²)); 3 km near the surface are plane to 0.1 %."""
    earth = ReferenceEarth("ak135")
    column = LocalColumn(
        np.array([0.0, 3.0]), np.array([3.0, 3.0]), np.array([1.5, 1.5]), float("nan")
    )
    slowness = 0.06
    expected_s = 3.0 * (np.sqrt(1 / 3.0**2 - slowness**2) - np.sqrt(1 / 5.8**2 - slowness**2))
    delay_s = column_delay_s(earth, column, "P", slowness * 6371.0)
    assert float(delay_s) == pytest.approx(expected_s, rel=1e-3)


def test_elevation_lies_in_both_columns() -> None:
    """A station 2 km up: the local top speed counts there too, against that of the reference."""
    earth = ReferenceEarth("ak135")
    column = LocalColumn(
        np.array([0.0, 3.0]), np.array([3.0, 3.0]), np.array([1.5, 1.5]), float("nan")
    )
    at_sea, above = (
        float(column_delay_s(earth, column, "P", 0.0, sensor_km=depth)) for depth in (0.0, -2.0)
    )
    assert above - at_sea == pytest.approx(2.0 * (1 / 3.0 - 1 / 5.8), rel=1e-12)


@pytest.mark.parametrize("model", ["ak135", "iasp91"])
def test_the_reference_crust_itself_has_no_delay(model: str) -> None:
    earth = ReferenceEarth(model)
    column = LocalColumn.of_crust(earth, 35.0)
    assert column.moho_km == 35.0
    parameter = np.linspace(250.0, 600.0, 5)
    np.testing.assert_allclose(column_delay_s(earth, column, "P", parameter), 0.0, atol=1e-12)
    np.testing.assert_allclose(column_delay_s(earth, column, "S", parameter), 0.0, atol=1e-12)


@pytest.mark.parametrize("thickness_km", [7.0, 34.999, 35.001, 70.0])
def test_a_uniform_crust_of_any_thickness(thickness_km: float) -> None:
    """At p = 0 the delay is the sum of layer times: by hand from the ak135 table.

    ak135 has 20 km at 5.8 and 15 km at 6.5 km/s, then 8.04 km/s at 35 km, 8.045 at 77.5 km.
    """
    earth = ReferenceEarth("ak135")
    column = LocalColumn.of_crust(earth, thickness_km, vp_km_s=6.0, vs_km_s=3.4)
    crust_s = thickness_km / 6.0 - (20.0 / 5.8 + 15.0 / 6.5)
    mantle_s = (35.0 - thickness_km) / 8.04
    delay_s = float(column_delay_s(earth, column, "P", 0.0))
    assert delay_s == pytest.approx(crust_s + mantle_s, abs=0.002)


def test_thickness_is_from_the_ground_down() -> None:
    """A plateau 4 km high with 60 km of crust has its Moho at 56 km."""
    earth = ReferenceEarth("ak135")
    column = LocalColumn.of_crust(earth, 60.0, surface_km=-4.0, vp_km_s=6.2)
    assert column.moho_km == 56.0
    assert column.depth_km[0] == -4.0
    expected_s = 60.0 / 6.2 - 4.0 / 5.8 - 20.0 / 5.8 - 15.0 / 6.5 - 21.0 / 8.04
    delay_s = float(column_delay_s(earth, column, "P", 0.0, sensor_km=-4.0))
    assert delay_s == pytest.approx(expected_s, abs=0.002)

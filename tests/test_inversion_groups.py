"""Columns of station terms and event shifts."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray

from inversion_cases import residual_table, small_case
from rayloom.earth import ReferenceEarth
from rayloom.inversion import InversionSettings
from rayloom.inversion.groups import (
    mislocation_partials,
    station_term_group,
    station_term_layout,
)
from rayloom.inversion.rows import rows_of_residuals

Floats = NDArray[np.float64]
RADIUS_KM = 6371.0


def unit_vectors(latitude_deg: Floats, longitude_deg: Floats) -> Floats:
    latitude, longitude = np.radians(latitude_deg), np.radians(longitude_deg)
    horizontal = np.cos(latitude)
    return np.stack(
        [horizontal * np.cos(longitude), horizontal * np.sin(longitude), np.sin(latitude)], axis=-1
    )


@pytest.mark.parametrize("phase", ["P", "S"])
@pytest.mark.parametrize("depth_km", [40.0, 300.0])
def test_partials_are_the_change_of_travel_time_with_the_source(
    phase: str, depth_km: float
) -> None:
    """Against travel times to 60° or so with the source moved by 3 km either way."""
    earth = ReferenceEarth("ak135")
    azimuth = np.radians(np.array([20.0, 110.0, 200.0, 320.0]))
    distance = np.array([42.0, 55.0, 63.0, 74.0])
    source = np.array([1.0, 0.0, 0.0])
    east, north = np.array([0.0, 1.0, 0.0]), np.array([0.0, 0.0, 1.0])
    towards = np.sin(azimuth)[:, None] * east + np.cos(azimuth)[:, None] * north
    arc = np.radians(distance)[:, None]
    receivers = np.cos(arc) * source + np.sin(arc) * towards

    def times(shift_km: Floats) -> Floats:
        radius = RADIUS_KM - depth_km
        moved = radius * source + shift_km[0] * east + shift_km[1] * north
        moved = moved / np.linalg.norm(moved)
        degrees = np.degrees(np.arccos(receivers @ moved))
        return np.asarray(earth.travel_time(phase, degrees, depth_km + shift_km[2]))

    columns = [(times(3.0 * axis) - times(-3.0 * axis)) / 6.0 for axis in np.eye(3)]
    index = np.arange(4)
    table = residual_table(
        np.zeros(4, dtype=np.int64),
        index,
        np.zeros(4),
        np.degrees(azimuth),
        0.1,
        phase,
        distance_deg=distance,
        depth_km=depth_km,
    )
    partials = mislocation_partials(table, index)
    np.testing.assert_allclose(partials, np.column_stack(columns), rtol=2e-3, atol=2e-5)


def test_station_terms_are_one_per_station_and_phase() -> None:
    case = small_case()
    phase = np.where(case.data.event_index % 2 == 0, "P", "PcP")
    data = case.data.select(np.arange(phase.size))
    object.__setattr__(data, "phase", phase)
    rows, _ = rows_of_residuals(data, wave="P", min_picks_per_event=5)
    layout = station_term_layout(rows)
    assert layout.station.size == 2 * 18
    group = station_term_group(layout, InversionSettings(station_term_std_s={"P": 0.3}))
    terms = np.arange(36.0)
    assert group.matrix.shape == (rows.count, 36)
    predicted = group.matrix @ terms
    named = zip(rows.station, rows.phase, predicted, strict=True)
    key = {(s, p): t for s, p, t in zip(layout.station, layout.phase, terms, strict=True)}
    assert all(key[station, phase] == value for station, phase, value in named)
    sample = group.prior.colour(np.random.default_rng(0).standard_normal(36))
    for name in ("P", "PcP"):
        assert abs(sample[layout.phase == name].sum()) < 1e-12

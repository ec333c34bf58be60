"""Geodesy at the poles, at zero distance and with wrong input."""

from __future__ import annotations

import numpy as np
import pytest

from rayloom.earth import (
    distance_azimuth_deg,
    geocentric_latitude_deg,
    geographic_latitude_deg,
)
from rayloom.errors import InputError


def test_latitudes_agree_at_poles_and_equator() -> None:
    fixed = np.array([-90.0, 0.0, 90.0])
    assert geocentric_latitude_deg(fixed) == pytest.approx(fixed, abs=1e-12)
    assert geographic_latitude_deg(fixed) == pytest.approx(fixed, abs=1e-12)


def test_latitude_conversions_undo_each_other() -> None:
    latitude = np.linspace(-89.0, 89.0, 90)
    there = geocentric_latitude_deg(latitude)
    assert geographic_latitude_deg(there) == pytest.approx(latitude, abs=1e-12)
    assert np.all(np.abs(there) < np.abs(latitude))


def test_distances_at_the_extremes() -> None:
    found = distance_azimuth_deg(
        [10.0, 10.0, 0.0], [20.0, 20.0, 0.0], [10.0, -10.0, 0.0], [20.0, -160.0, 1e-7]
    )
    assert found.distance_deg == pytest.approx([0.0, 180.0, 1e-7], rel=1e-9, abs=1e-12)


def test_directions() -> None:
    found = distance_azimuth_deg(0.0, 0.0, [10.0, 0.0, -10.0, 0.0], [0.0, 10.0, 0.0, -10.0])
    assert found.azimuth_deg == pytest.approx([0.0, 90.0, 180.0, 270.0], abs=1e-9)
    assert found.back_azimuth_deg == pytest.approx([180.0, 270.0, 0.0, 90.0], abs=1e-9)


def test_broadcasts() -> None:
    found = distance_azimuth_deg(np.zeros((4, 1)), 0.0, np.zeros(3), np.arange(3.0))
    assert found.distance_deg.shape == (4, 3)


def test_bad_input() -> None:
    with pytest.raises(InputError, match="lies outside -90 to 90"):
        geocentric_latitude_deg([0.0, 120.0])
    with pytest.raises(InputError, match="expected numbers"):
        geographic_latitude_deg("north")
    with pytest.raises(InputError, match="do not broadcast"):
        distance_azimuth_deg([0.0, 1.0], 0.0, [0.0, 1.0, 2.0], 0.0)

"""Latitudes, distances and azimuths against published formulas and obspy."""

from __future__ import annotations

import warnings

import numpy as np
import pytest

from rayloom.earth import (
    distance_azimuth_deg,
    geocentric_latitude_deg,
    geographic_latitude_deg,
)

with warnings.catch_warnings():
    warnings.simplefilter("ignore", DeprecationWarning)
    from obspy.geodetics import gps2dist_azimuth, locations2degrees

# Defining and derived constants of WGS84 (NIMA Technical Report 8350.2, tables 3.1 and 3.3).
SEMI_MAJOR_M = 6378137.0
ECCENTRICITY_SQUARED = 6.69437999014e-3


def test_geocentric_latitude_from_cartesian_coordinates() -> None:
    """Through x, y, z of a point on the ellipsoid (Torge 1991, equations 3.34 to 3.36)."""
    latitude = np.linspace(-90.0, 90.0, 37)
    phi = np.radians(latitude)
    normal = SEMI_MAJOR_M / np.sqrt(1.0 - ECCENTRICITY_SQUARED * np.sin(phi) ** 2)
    z = normal * (1.0 - ECCENTRICITY_SQUARED) * np.sin(phi)
    expected = np.degrees(np.arctan2(z, normal * np.cos(phi)))
    assert geocentric_latitude_deg(latitude) == pytest.approx(expected, abs=1e-9)
    assert geographic_latitude_deg(expected) == pytest.approx(latitude, abs=1e-9)


def test_geocentric_latitude_by_series() -> None:
    """Phi - psi = m sin 2 phi - m^2/2 sin 4 phi + ..., m = e^2/(2 - e^2), a published series.

    Adams (1921), Coast and Geodetic Survey Special Publication 67, from memory.
    """
    m = ECCENTRICITY_SQUARED / (2.0 - ECCENTRICITY_SQUARED)
    phi = np.radians(np.array([10.0, 31.0, 45.0, 80.0]))
    series = m * np.sin(2 * phi) - m**2 / 2 * np.sin(4 * phi) + m**3 / 3 * np.sin(6 * phi)
    expected = np.degrees(phi - series)
    assert geocentric_latitude_deg(np.degrees(phi)) == pytest.approx(expected, abs=1e-8)


def test_distance_and_azimuths_on_the_sphere() -> None:
    """obspy.geodetics, with a sphere in place of the ellipsoid."""
    rng = np.random.default_rng(23)
    first, second = rng.uniform(-89, 89, (2, 40))
    longitude_1, longitude_2 = rng.uniform(-180, 180, (2, 40))
    found = distance_azimuth_deg(first, longitude_1, second, longitude_2)
    assert found.distance_deg == pytest.approx(
        locations2degrees(first, longitude_1, second, longitude_2), abs=1e-9
    )
    for i in range(40):
        _, azimuth, back = gps2dist_azimuth(
            first[i], longitude_1[i], second[i], longitude_2[i], a=6371e3, f=0.0
        )
        assert found.azimuth_deg[i] == pytest.approx(azimuth, abs=1e-6)
        assert found.back_azimuth_deg[i] == pytest.approx(back, abs=1e-6)

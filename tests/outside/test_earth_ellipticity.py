"""Ellipticity against printed coefficients and an independent package."""

from __future__ import annotations

import warnings

import numpy as np
import pytest

from rayloom.earth import ReferenceEarth

with warnings.catch_warnings():
    warnings.simplefilter("ignore", DeprecationWarning)
    from ellipticipy import ellipticity_correction
    from obspy.taup import TauPyModel

ROOT_3 = np.sqrt(3.0)


@pytest.fixture(scope="module")
def ak135() -> ReferenceEarth:
    return ReferenceEarth("ak135")


@pytest.mark.parametrize(
    ("phase", "distance", "expected"),
    [
        ("P", 30, (-0.65, -0.28, -0.15)),
        ("P", 60, (-0.54, -0.35, -0.54)),
        ("P", 90, (-0.47, 0.25, -0.82)),
        ("S", 60, (-0.99, -0.65, -0.96)),
    ],
)
def test_printed_coefficients(
    ak135: ReferenceEarth, phase: str, distance: float, expected: tuple[float, float, float]
) -> None:
    """Coefficients tau 0, 1, 2 at source depth 0, printed to 0.01 s.

    Tables of the kind of Kennett & Gudmundsson (1996), method of Dziewonski &
    Gilbert (1976): delay = sum of sigma_m tau_m, sigma_0 = (1 + 3 cos 2c)/4,
    sigma_1 = sqrt(3)/2 sin 2c cos z, sigma_2 = sqrt(3)/2 sin^2 c cos 2z for
    colatitude c and azimuth z of the source.
    """

    def delay(latitude: float, azimuth: float) -> float:
        return float(ak135.ellipticity_s(phase, distance, 0.0, latitude, azimuth))

    coefficients = (
        delay(90.0, 0.0),
        (delay(45.0, 0.0) - delay(45.0, 180.0)) / ROOT_3,
        (delay(0.0, 0.0) - delay(0.0, 90.0)) / ROOT_3,
    )
    assert coefficients == pytest.approx(expected, abs=0.01)


@pytest.mark.parametrize("phase", ["P", "S"])
def test_independent_package(ak135: ReferenceEarth, phase: str) -> None:
    """Ellipticipy (Russell et al. 2022), which integrates obspy's ray paths."""
    model = TauPyModel("ak135")
    rng = np.random.default_rng(22)
    for _ in range(10):
        depth, distance = rng.uniform(0, 700), rng.uniform(26, 93)
        latitude, azimuth = rng.uniform(-90, 90), rng.uniform(0, 360)
        arrival = model.get_ray_paths(depth, distance, [phase])[0]
        expected = ellipticity_correction(arrival, azimuth, latitude)
        delay = float(ak135.ellipticity_s(phase, distance, depth, latitude, azimuth))
        assert delay == pytest.approx(expected, abs=0.01)


def test_hydrostatic_ellipticity(ak135: ReferenceEarth) -> None:
    """1/ellipticity at surface and core by Radau from ak135 density, computed separately."""
    assert 1.0 / ak135.ellipticity([6371.0, 3479.5]) == pytest.approx([299.71, 392.1], abs=0.05)


def test_ellipticity_of_the_fluid_earth(ak135: ReferenceEarth) -> None:
    """Nakiboglu (1982), from memory: hydrostatic flattening close to 1/299.6."""
    assert float(1.0 / ak135.ellipticity(6371.0)) == pytest.approx(299.6, abs=0.3)

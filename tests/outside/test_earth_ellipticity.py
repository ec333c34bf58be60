"""Ellipticity against printed coefficients and an independent package."""

from __future__ import annotations

import warnings

import numpy as np
import pytest
from numpy.typing import ArrayLike, NDArray
from scipy.spatial import ConvexHull

from rayloom.earth import ModelTable, ReferenceEarth

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
        ("PKPdf", 150, (-2.19, 1.02, -0.27)),
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


@pytest.fixture(scope="module")
def taup() -> TauPyModel:
    return TauPyModel("ak135")


@pytest.mark.parametrize(
    ("phase", "nearest", "farthest"),
    [
        ("P", 26.0, 93.0),
        ("PcP", 3.0, 90.0),
        ("PKIKP", 118.0, 180.0),
        ("pP", 28.0, 93.0),
        ("sP", 28.0, 93.0),
        ("S", 26.0, 93.0),
        ("ScS", 3.0, 90.0),
        ("SKS", 68.0, 140.0),
    ],
)
def test_independent_package(
    ak135: ReferenceEarth, taup: TauPyModel, phase: str, nearest: float, farthest: float
) -> None:
    """Ellipticipy (Russell et al. 2022), which integrates obspy's ray paths."""
    rng = np.random.default_rng(22)
    for _ in range(6):
        depth, distance = rng.uniform(1, 700), rng.uniform(nearest, farthest)
        latitude, azimuth = rng.uniform(-90, 90), rng.uniform(0, 360)
        arrivals = taup.get_ray_paths(depth, distance, [phase])
        first = min(arrivals, key=lambda arrival: float(arrival.time))
        expected = ellipticity_correction(first, azimuth, latitude)
        delay = float(ak135.ellipticity_s(phase, distance, depth, latitude, azimuth))
        assert delay == pytest.approx(expected, abs=0.01)


def test_diffraction_is_a_string_around_the_core() -> None:
    """In a uniform mantle Pdiff is the shortest way around the core: a convex hull.

    Elementary geometry, for a core and a surface flattened as the model says.
    The package above leaves out what is due along the core.
    """
    uniform = ReferenceEarth.from_table(
        ModelTable.from_arrays(
            [0.0, 2900.0, 2900.0, 6371.0],
            [10.0, 10.0, 8.0, 8.0],
            [6.0, 6.0, 0.0, 0.0],
            [4.5, 4.5, 11.0, 11.0],
        )
    )
    distance, latitude = np.radians([150.0, 40.0])

    def around_s(core_flattening: float, surface_flattening: float) -> float:
        def point(radius_km: float, flattening: float, angle: ArrayLike) -> NDArray[np.float64]:
            shift = flattening * (np.sin(latitude + np.asarray(angle)) ** 2 - 1.0 / 3.0)
            radius = radius_km * (1.0 - shift)
            return np.stack([radius * np.cos(angle), radius * np.sin(angle)], axis=-1)

        core = point(3471.0, core_flattening, np.linspace(-1.0, distance + 1.0, 200001))
        ends = point(6371.0, surface_flattening, [0.0, distance])
        points = np.concatenate([core, ends, [[0.0, 0.0]]])
        hull = points[ConvexHull(points).vertices]
        length = np.linalg.norm(np.roll(hull, -1, axis=0) - hull, axis=1)
        first, last = (np.flatnonzero((hull == end).all(axis=1))[0] for end in ends)
        order = np.roll(np.arange(len(hull)), -first)
        return float(length[order[: (last - first) % len(hull)]].sum() / 10.0)

    flattening = [float(uniform.ellipticity(radius)) for radius in (3471.0, 6371.0)]
    assert around_s(0.0, 0.0) == pytest.approx(
        float(uniform.travel_time("Pdiff", 150.0)), abs=1e-4
    )
    expected = around_s(*flattening) - around_s(0.0, 0.0)
    delay = float(uniform.ellipticity_s("Pdiff", 150.0, 0.0, 40.0, 0.0))
    assert abs(expected) > 0.1
    assert delay == pytest.approx(expected, abs=0.01)


def test_hydrostatic_ellipticity(ak135: ReferenceEarth) -> None:
    """1/ellipticity at surface and core by Radau from ak135 density, computed separately."""
    assert 1.0 / ak135.ellipticity([6371.0, 3479.5]) == pytest.approx([299.71, 392.1], abs=0.05)


def test_ellipticity_of_the_fluid_earth(ak135: ReferenceEarth) -> None:
    """Nakiboglu (1982), from memory: hydrostatic flattening close to 1/299.6."""
    assert float(1.0 / ak135.ellipticity(6371.0)) == pytest.approx(299.6, abs=0.3)

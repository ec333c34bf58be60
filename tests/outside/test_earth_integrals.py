"""Phases against the ray integrals of the textbook, by adaptive quadrature."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
from scipy.integrate import quad

from rayloom.earth import ReferenceEarth

SURFACE_KM, CORE_KM, INNER_CORE_KM = 6371.0, 3479.5, 1217.5

# phase, distance (degrees), source depth (km), legs: wave and range of radii (km), in which
# the ray may turn; None at the source
MANTLE = (CORE_KM, SURFACE_KM)
CASES = [
    ("PcP", 55.0, 120.0, [("P", CORE_KM, None), ("P", *MANTLE)]),
    ("ScS", 33.0, 650.0, [("S", CORE_KM, None), ("S", *MANTLE)]),
    ("pP", 62.0, 210.0, [("P", None, SURFACE_KM), *[("P", *MANTLE)] * 2]),
    ("sP", 71.0, 33.0, [("S", None, SURFACE_KM), *[("P", *MANTLE)] * 2]),
    (
        "SKS",
        110.0,
        400.0,
        [("S", CORE_KM, None), *[("P", 0.0, CORE_KM)] * 2, ("S", *MANTLE)],
    ),
    (
        "PKPdf",
        137.0,
        500.0,
        [
            ("P", CORE_KM, None),
            *[("P", INNER_CORE_KM, CORE_KM)] * 2,
            *[("P", 0.0, INNER_CORE_KM)] * 2,
            ("P", *MANTLE),
        ],
    ),
]


class Integrals:
    """Angle and time along a ray in a model linear in radius between its rows."""

    def __init__(self, earth: ReferenceEarth) -> None:
        table = earth.table
        self.radius = SURFACE_KM - table.depth_km
        self.velocity = {"P": table.vp_km_s, "S": table.vs_km_s}

    def leg(self, wave: str, low_km: float, high_km: float, parameter: float) -> tuple:
        angle, time = 0.0, 0.0
        rows = zip(pairwise(self.radius), pairwise(self.velocity[wave]), strict=True)
        for (top, bottom), (v_top, v_bottom) in rows:
            low, high = max(bottom, low_km), min(top, high_km)
            if low >= high or v_top == 0.0:
                continue
            slope = (v_top - v_bottom) / (top - bottom)
            start = v_bottom - slope * bottom
            turning = parameter * start / (1.0 - parameter * slope)
            if turning >= high:
                continue
            parts = self.within(start, slope, max(low, turning), high, parameter)
            angle, time = angle + parts[0], time + parts[1]
        return angle, time

    @staticmethod
    def within(start: float, slope: float, low: float, high: float, p: float) -> list[float]:
        """Integrate with r = low + s², which takes away the root at a turning point."""

        def root(s: float) -> tuple[float, float, float]:
            r = low + s * s
            v = start + slope * r
            return r, v, 2.0 * s / np.sqrt(max(r * r - p * p * v * v, 1e-300))

        def angle(s: float) -> float:
            r, v, weight = root(s)
            return p * v / r * weight

        def time(s: float) -> float:
            r, v, weight = root(s)
            return r / v * weight

        end = np.sqrt(high - low)
        return [quad(f, 0.0, end, epsabs=1e-10, epsrel=1e-9)[0] for f in (angle, time)]


@pytest.mark.parametrize(("phase", "distance", "source_km", "legs"), CASES)
def test_integrals(phase: str, distance: float, source_km: float, legs: list[tuple]) -> None:
    """Aki & Richards (2002), chapter 9: angle and time integrals, linear velocity in ak135."""
    earth = ReferenceEarth("ak135")
    integrals = Integrals(earth)
    parameter = float(earth.ray_parameter(phase, distance, source_km))
    source = SURFACE_KM - source_km
    angle, time = 0.0, 0.0
    for wave, low_km, high_km in legs:
        low, high = (source if end is None else end for end in (low_km, high_km))
        part = integrals.leg(wave, low, high, parameter)
        angle, time = angle + part[0], time + part[1]
    assert np.degrees(angle) == pytest.approx(distance, abs=1e-4)
    expected = time + parameter * (np.radians(distance) - angle)
    assert float(earth.travel_time(phase, distance, source_km)) == pytest.approx(
        expected, abs=1e-4
    )

"""Where rays cross the base of a grid, against obspy's ray paths and velocities in ak135."""

import itertools

import numpy as np
import pytest
from scipy.integrate import quad

from rayloom.earth import ReferenceEarth
from rayloom.model.ray_offset import offset_deg

taup = pytest.importorskip("obspy.taup")

EDGES_KM = [0, 20, 35, 77.5, 120, 165, 210, 260, 310, 360, 410, 460, 510, 560, 610, 660]


@pytest.fixture(scope="module")
def reference():
    return taup.TauPyModel("ak135")


@pytest.fixture(scope="module")
def earth():
    return ReferenceEarth("ak135")


@pytest.mark.parametrize("phase", ["P", "S"])
@pytest.mark.parametrize("distance_deg", [30.0, 45.0, 60.0, 80.0])
@pytest.mark.parametrize("depth_km", [210.0, 410.0, 660.0])
def test_offset_agrees_with_pierce_points(reference, earth, phase, distance_deg, depth_km):
    """obspy.taup pierce points of the first arrival on its way up to the station.

    Its depths of pierce points are the discontinuities of ak135. Bar 0.03°: obspy
    interpolates its paths between sampled rays (it lets P at 30° turn at 767.8 km, 3.5 km
    deeper than the velocities say), and the next test is the sharp one.
    """
    arrival = reference.get_pierce_points(33.0, distance_deg, [phase])[0]
    upward = arrival.pierce[arrival.pierce["depth"].argmax() :]
    crossing = upward[np.isclose(upward["depth"], depth_km)][0]
    expected = distance_deg - np.degrees(crossing["dist"])
    parameter = earth.ray_parameter(phase, np.array([distance_deg]), 33.0)
    found = offset_deg(earth, parameter, wave=phase, depth_km=depth_km)
    assert found[0] == pytest.approx(expected, abs=0.03)


@pytest.mark.parametrize(("wave", "parameter"), [("P", 506.81), ("P", 300.0), ("S", 900.0)])
def test_offset_agrees_with_quadrature_over_published_velocities(
    reference, earth, wave, parameter
):
    """∫ p / (r √((r/v)² − p²)) dr by scipy.integrate.quad, v of ak135 as obspy carries it."""
    velocities = reference.model.s_mod.v_mod

    def integrand(depth_km):
        radius = 6371.0 - depth_km
        velocity = velocities.evaluate_below(depth_km, wave.lower()).item()
        return parameter / (radius * np.sqrt((radius / velocity) ** 2 - parameter**2))

    pieces = [quad(integrand, upper, lower)[0] for upper, lower in itertools.pairwise(EDGES_KM)]
    found = offset_deg(earth, np.array([parameter]), wave=wave, depth_km=660.0)
    assert found[0] == pytest.approx(np.degrees(sum(pieces)), abs=1e-4)

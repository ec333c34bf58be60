"""Where rays cross the base of a grid, against obspy's ray paths in ak135."""

import numpy as np
import pytest

from rayloom.earth import ReferenceEarth
from rayloom.model.ray_offset import offset_deg

taup = pytest.importorskip("obspy.taup")


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

    Its depths of pierce points are the discontinuities of ak135. Bar 0.01°, a tenth of
    the finest suggested block.
    """
    arrival = reference.get_pierce_points(33.0, distance_deg, [phase])[0]
    upward = arrival.pierce[arrival.pierce["depth"].argmax() :]
    crossing = upward[np.isclose(upward["depth"], depth_km)][0]
    expected = distance_deg - np.degrees(crossing["dist"])
    parameter = earth.ray_parameter(phase, np.array([distance_deg]), 33.0)
    found = offset_deg(earth, parameter, wave=phase, depth_km=depth_km)
    assert found[0] == pytest.approx(expected, abs=0.01)

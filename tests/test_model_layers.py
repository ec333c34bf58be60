"""Depth edges and ray offsets in invented Earths with known answers."""

from dataclasses import dataclass

import numpy as np
import pytest

from rayloom.model import BlockGrid, Frame, SlownessModel
from rayloom.model.layers import depth_edges_km
from rayloom.model.ray_offset import offset_deg


@dataclass
class LayeredEarth:
    """Constant velocities between discontinuities."""

    depths: list[float]
    velocities: list[float]
    radius_km: float = 6371.0

    @property
    def discontinuities_km(self):
        return np.array(self.depths)

    def velocity_km_s(self, depth_km, wave="P", *, side="below"):
        before = "right" if side == "below" else "left"
        return np.array(self.velocities)[np.searchsorted(self.depths, depth_km, side=before)]


def test_edges_lie_on_every_discontinuity_with_whole_kilometres_between():
    earth = LayeredEarth([20.0, 35.0, 77.5], [5.8, 6.5, 8.0, 8.1])
    edges = depth_edges_km(earth, top_km=-3.0, base_km=200.0, thickness_km=20.0)
    assert {-3.0, 20.0, 35.0, 77.5, 200.0} <= set(edges)
    assert np.diff(edges).max() <= 20.0
    others = edges[edges != 77.5]
    np.testing.assert_array_equal(others, np.round(others))


@pytest.mark.parametrize("thickness", [0.3, 1.0, 7.0, 19.4, 50.0])
def test_no_block_exceeds_the_thickness(thickness):
    earth = LayeredEarth([20.0, 35.0, 77.5], [5.8, 6.5, 8.0, 8.1])
    edges = depth_edges_km(earth, top_km=-0.7, base_km=150.3, thickness_km=thickness)
    widths = np.diff(edges)
    assert widths.min() > 0.0
    assert widths.max() <= thickness * (1.0 + 1e-12)
    assert (edges[0], edges[-1]) == (-0.7, 150.3)


def test_slivers_are_merged_in_favour_of_the_stronger_contrast():
    earth = LayeredEarth([1.0, 30.0, 33.0, 36.0, 100.0], [4.0, 6.0, 6.1, 8.0, 8.1, 8.5])
    edges = depth_edges_km(earth, top_km=-1.0, base_km=98.0, thickness_km=20.0)
    assert 33.0 in edges  # 1.9 km/s against 0.1 km/s at 30 and 36 km
    assert not {1.0, 30.0, 36.0} & set(edges)
    assert edges[-1] == 100.0  # the base moved onto the discontinuity 2 km below
    assert np.diff(edges).min() > 4.0


def test_offset_in_a_homogeneous_sphere_is_that_of_a_straight_line():
    """A chord meets radius r at asin(p v / r) from the vertical (plane trigonometry)."""
    earth = LayeredEarth([], [8.0])
    parameter = np.array([50.0, 300.0, 500.0])
    found = offset_deg(earth, parameter, wave="P", depth_km=400.0)
    crossed = np.arcsin(parameter * 8.0 / 5971.0) - np.arcsin(parameter * 8.0 / 6371.0)
    np.testing.assert_allclose(found, np.degrees(crossed), rtol=1e-5)


def test_offset_of_a_ray_that_turns_above_is_infinite():
    earth = LayeredEarth([], [8.0])
    found = offset_deg(earth, np.array([780.0]), wave="P", depth_km=400.0)
    assert found.tolist() == [np.inf]


class SlopingEarth:
    """Slowness 0.1 + 0.001 z, so that the mean over a layer is its middle value."""

    def mean_slowness_s_per_km(self, depth_edges_km, wave="P"):
        middle = 0.5 * (depth_edges_km[:-1] + depth_edges_km[1:])
        return (0.1 + 0.001 * middle) * (1.7 if wave == "S" else 1.0)


@pytest.mark.parametrize(("wave", "factor"), [("P", 1.0), ("S", 1.7)])
def test_reference_of_a_block_is_the_mean_over_its_depth(wave, factor):
    grid = BlockGrid(Frame.flat(), [0, 1, 3], [0, 1, 2, 3], [0.0, 10.0, 30.0])
    model = SlownessModel.from_earth(grid, SlopingEarth(), wave)
    assert model.wave == wave
    expected = np.broadcast_to(factor * np.array([0.105, 0.12]), grid.shape)
    np.testing.assert_allclose(model.slowness_s_per_km, expected)
    np.testing.assert_array_equal(model.perturbation_percent, np.zeros(grid.shape))

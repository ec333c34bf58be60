"""The box around a network: how its blocks follow from one horizontal width."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np

from rayloom.model.layers import depth_edges_km
from rayloom.model.network import NetworkExtent
from rayloom.model.settings import EdgeSegment, GridSettings
from rayloom.units import KM_PER_DEGREE

if TYPE_CHECKING:
    from rayloom.earth import ReferenceEarth

THINNEST_KM: Final = 10.0
THICKEST_KM: Final = 20.0

PADDING_RATIO: Final = 1.3
"""Width of a padding block in widths of the one before it, until the greatest width."""

WHOLE_BLOCKS: Final = 1e-2
"""Share of a block that a station may lie beyond a whole number of blocks."""

DEGREE_DIGITS: Final = 2
"""Decimals of edges in degrees, so that a settings file stays readable."""


@dataclass(frozen=True)
class Box:
    """Everything of a grid but the width of its inner blocks.

    Attributes
    ----------
    network : NetworkExtent
        Place and size of the network.
    earth : ReferenceEarth
        The one-dimensional model, whose discontinuities become edges.
    top_km, base_km : float
        Depth range, km below sea level.
    padding_deg : float
        Least distance of the sides from the outermost stations, degrees.
    padding_growth : float
        Greatest width of padding blocks, in widths of inner blocks.
    thickness_km : float, optional
        Greatest thickness of a block; by default as thick as wide, within 10 and 20 km.
    """

    network: NetworkExtent
    earth: ReferenceEarth
    top_km: float
    base_km: float
    padding_deg: float
    padding_growth: float
    thickness_km: float | None = None

    def settings(self, step_deg: float) -> GridSettings:
        """Write down the grid with inner blocks of one width.

        Parameters
        ----------
        step_deg : float
            Width of the inner blocks, degrees of arc.

        Returns
        -------
        GridSettings
            The grid in writing.
        """
        as_thick_as_wide = np.clip(round(step_deg * KM_PER_DEGREE), THINNEST_KM, THICKEST_KM)
        depths = depth_edges_km(
            self.earth,
            top_km=self.top_km,
            base_km=self.base_km,
            thickness_km=self.thickness_km or float(as_thick_as_wide),
        )
        frame = self.network.frame
        return GridSettings(
            longitude_deg=frame.longitude_deg,
            latitude_deg=frame.latitude_deg,
            azimuth_deg=frame.azimuth_deg,
            x_edges=self._axis(self.network.half_x_deg, step_deg),
            y_edges=self._axis(self.network.half_y_deg, step_deg),
            depth_edges_km=depths.tolist(),
        )

    def _axis(self, half_deg: float, step_deg: float) -> list[float | EdgeSegment]:
        """Lay equal blocks over the stations and half a block more, widening ones outside."""
        count = int(np.ceil(2.0 * half_deg / step_deg - WHOLE_BLOCKS)) + 1
        inner = round(0.5 * count * step_deg, DEGREE_DIGITS + 1)
        outer = [inner]
        width = step_deg
        while outer[-1] < half_deg + self.padding_deg:
            width = min(width * PADDING_RATIO, step_deg * self.padding_growth)
            outer.append(round(outer[-1] + width, DEGREE_DIGITS))
        beyond = outer[1:]
        return [
            *(-edge for edge in reversed(beyond)),
            EdgeSegment(start=-inner, stop=inner, step=step_deg),
            *beyond,
        ]

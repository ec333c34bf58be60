"""Tabulated first arrivals from one source depth: :class:`TimeTable`."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from rayloom._core import WavefrontTable
from rayloom.earth.checks import broadcast


@dataclass(frozen=True)
class TimeTable:
    """First arrivals of a phase from one source depth, by look-up.

    For many points of one source; :meth:`ReferenceEarth.time_table` makes it.
    Interpolation is bicubic in distance and depth, inside the layers of the
    model.

    Attributes
    ----------
    phase : str
        Its usual name.
    source_depth_km : float
        Depth of the source.
    distance_deg : tuple of float
        Smallest and largest distance.
    receiver_depth_km : tuple of float
        Smallest and largest receiver depth; negative above sea level.
    """

    phase: str
    source_depth_km: float
    distance_deg: tuple[float, float]
    receiver_depth_km: tuple[float, float]
    _table: WavefrontTable

    def time_s(
        self, distance_deg: ArrayLike, receiver_depth_km: ArrayLike = 0.0
    ) -> NDArray[np.float64]:
        """Travel time.

        Parameters
        ----------
        distance_deg, receiver_depth_km : array_like
            Points, broadcast against each other.

        Returns
        -------
        ndarray
            Seconds; NaN outside the table and where no rising ray arrives.
        """
        return self._look_up(distance_deg, receiver_depth_km)[0]

    def ray_parameter_s(
        self, distance_deg: ArrayLike, receiver_depth_km: ArrayLike = 0.0
    ) -> NDArray[np.float64]:
        """Ray parameter dT/dΔ.

        Parameters
        ----------
        distance_deg, receiver_depth_km : array_like
            Points, broadcast against each other.

        Returns
        -------
        ndarray
            Seconds per radian; NaN as in :meth:`time_s`.
        """
        return self._look_up(distance_deg, receiver_depth_km)[1]

    def depth_slope_s_per_km(
        self, distance_deg: ArrayLike, receiver_depth_km: ArrayLike = 0.0
    ) -> NDArray[np.float64]:
        """Change of travel time per kilometre of receiver depth.

        Parameters
        ----------
        distance_deg, receiver_depth_km : array_like
            Points, broadcast against each other.

        Returns
        -------
        ndarray
            Seconds per km, negative because the ray rises; at a discontinuity
            that of the layer above; NaN as in :meth:`time_s`.
        """
        return self._look_up(distance_deg, receiver_depth_km)[2]

    def _look_up(
        self, distance_deg: ArrayLike, receiver_depth_km: ArrayLike
    ) -> tuple[NDArray[np.float64], ...]:
        distance, depth = broadcast(distance_deg=distance_deg, receiver_depth_km=receiver_depth_km)
        found = self._table.at(np.radians(distance.ravel()), depth.ravel())
        return tuple(values.reshape(distance.shape) for values in found)

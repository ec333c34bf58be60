"""The radial Earth model that predictions start from: :class:`ReferenceEarth`."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from rayloom._core import WavefrontTable
from rayloom.earth.checks import broadcast, require_range
from rayloom.earth.geodesy import checked_latitude_deg
from rayloom.earth.phases import phase_wave, standard_phase
from rayloom.earth.structure import EarthStructure
from rayloom.earth.time_table import TimeTable
from rayloom.errors import InputError
from rayloom.units import EARTH_RADIUS_KM


class ReferenceEarth(EarthStructure):
    """A spherical Earth with velocities linear in radius between tabulated depths.

    Rays are solved for exactly: times carry no interpolation error. The first
    arrival over all branches of a phase counts. Phases are P, PcP, PKPdf (or
    PKIKP), pP, sP, S, ScS, SKS, and Pdiff, which grazes the core and runs along
    it at the speed of the mantle above; pP and sP need a source below sea level.

    Parameters
    ----------
    name : {"ak135", "iasp91"}
        Published model. Others: :meth:`from_csv`, :meth:`from_table`.

    Raises
    ------
    InputError
        If there is no such model.

    References
    ----------
    Kennett, B.L.N., Engdahl, E.R. & Buland, R. (1995). Constraints on seismic
    velocities in the Earth from traveltimes. Geophysical Journal International
    122, 108-124.

    Kennett, B.L.N. & Engdahl, E.R. (1991). Traveltimes for global earthquake
    location and phase identification. Geophysical Journal International 105,
    429-465.
    """

    __slots__ = ()

    def travel_time(
        self,
        phase: str,
        distance_deg: ArrayLike,
        source_depth_km: ArrayLike = 0.0,
        receiver_depth_km: ArrayLike = 0.0,
    ) -> NDArray[np.float64]:
        """Time of the first arrival of a phase.

        Parameters
        ----------
        phase : str
            One of :data:`rayloom.earth.PHASES` or an alias.
        distance_deg : array_like
            Distance, 0 to 180 degrees; NaN gives NaN.
        source_depth_km, receiver_depth_km : array_like
            Depths, negative above sea level; all three are broadcast.

        Returns
        -------
        ndarray
            Seconds; NaN where the phase does not arrive.

        Raises
        ------
        InputError
            If the phase is unknown, a value is out of range or the shapes do
            not broadcast.
        """
        return self._arrivals(phase, distance_deg, source_depth_km, receiver_depth_km)[0]

    def ray_parameter(
        self,
        phase: str,
        distance_deg: ArrayLike,
        source_depth_km: ArrayLike = 0.0,
        receiver_depth_km: ArrayLike = 0.0,
    ) -> NDArray[np.float64]:
        """Ray parameter p = dT/dΔ of the first arrival of a phase.

        Parameters
        ----------
        phase, distance_deg, source_depth_km, receiver_depth_km
            As in :meth:`travel_time`.

        Returns
        -------
        ndarray
            Seconds per radian; NaN where the phase does not arrive.

        Raises
        ------
        InputError
            As in :meth:`travel_time`.
        """
        return self._arrivals(phase, distance_deg, source_depth_km, receiver_depth_km)[1]

    def incidence_deg(
        self,
        phase: str,
        distance_deg: ArrayLike,
        source_depth_km: ArrayLike = 0.0,
        receiver_depth_km: ArrayLike = 0.0,
    ) -> NDArray[np.float64]:
        """Angle between the arriving ray and the vertical, at the receiver.

        Parameters
        ----------
        phase, distance_deg, source_depth_km, receiver_depth_km
            As in :meth:`travel_time`.

        Returns
        -------
        ndarray
            Degrees; NaN where the phase does not arrive. At a discontinuity the
            angle just below it.

        Raises
        ------
        InputError
            As in :meth:`travel_time`.

        Notes
        -----
        sin i = p v / r, Snell's law on the sphere.
        """
        parameter = self.ray_parameter(phase, distance_deg, source_depth_km, receiver_depth_km)
        (depth,) = broadcast(receiver_depth_km=receiver_depth_km)
        velocity = self.velocity_km_s(depth, phase_wave(phase))
        sine: NDArray[np.float64] = parameter * velocity / (EARTH_RADIUS_KM - depth)
        return np.degrees(np.arcsin(sine))

    def ellipticity_s(
        self,
        phase: str,
        distance_deg: ArrayLike,
        source_depth_km: ArrayLike,
        source_latitude_deg: ArrayLike,
        azimuth_deg: ArrayLike,
    ) -> NDArray[np.float64]:
        """Delay that the Earth's ellipticity brings to a receiver at sea level.

        Parameters
        ----------
        phase : str
            One of :data:`rayloom.earth.PHASES` or an alias.
        distance_deg, source_depth_km : array_like
            Distance in degrees and depth in km.
        source_latitude_deg : array_like
            Geocentric latitude of the source, degrees.
        azimuth_deg : array_like
            Azimuth at the source towards the receiver, degrees; all four are
            broadcast.

        Returns
        -------
        ndarray
            Seconds; NaN where the phase does not arrive.

        Raises
        ------
        InputError
            As in :meth:`travel_time`, or if a latitude is out of range.

        Notes
        -----
        Integrated along the ray of the spherical Earth, with the hydrostatic
        ellipticity of the model's density.

        References
        ----------
        Dziewonski, A.M. & Gilbert, F. (1976). The effect of small, aspherical
        perturbations on travel times and a re-examination of the corrections
        for ellipticity. Geophysical Journal of the Royal Astronomical Society
        44, 7-17.
        """
        distance, depth, latitude, azimuth = broadcast(
            distance_deg=distance_deg,
            source_depth_km=source_depth_km,
            source_latitude_deg=checked_latitude_deg(source_latitude_deg),
            azimuth_deg=azimuth_deg,
        )
        parameter = self.ray_parameter(phase, distance, depth)
        delay = self._core.ellipticity_s(
            phase,
            np.radians(distance.ravel()),
            parameter.ravel(),
            depth.ravel(),
            np.radians(latitude.ravel()),
            np.radians(azimuth.ravel()),
        )
        return delay.reshape(distance.shape)

    def elevation_s(
        self,
        phase: str,
        distance_deg: ArrayLike,
        source_depth_km: ArrayLike,
        elevation_km: ArrayLike,
    ) -> NDArray[np.float64]:
        """Delay that a receiver's elevation adds to the travel time to sea level.

        Parameters
        ----------
        phase : str
            One of :data:`rayloom.earth.PHASES` or an alias.
        distance_deg, source_depth_km : array_like
            Distance in degrees and depth in km.
        elevation_km : array_like
            Height above sea level, negative below; all three are broadcast.

        Returns
        -------
        ndarray
            Seconds; NaN where the phase does not arrive.

        Raises
        ------
        InputError
            As in :meth:`travel_time`.

        Notes
        -----
        h √(1/v² − p²/R²) with the velocity at the surface: the wave arrives as
        a plane.
        """
        (height,) = broadcast(elevation_km=elevation_km)
        parameter = self.ray_parameter(phase, distance_deg, source_depth_km)
        slowness = 1.0 / self.velocity_km_s(0.0, phase_wave(phase))
        return height * np.sqrt(slowness**2 - (parameter / EARTH_RADIUS_KM) ** 2)

    def time_table(
        self,
        phase: str,
        source_depth_km: float,
        *,
        distance_deg: tuple[float, float] = (25.0, 97.0),
        receiver_depth_km: tuple[float, float] = (-10.0, 700.0),
    ) -> TimeTable:
        """Tabulate the first arrivals from one source depth.

        Parameters
        ----------
        phase : str
            One of :data:`rayloom.earth.PHASES` or an alias.
        source_depth_km : float
            Depth of the source.
        distance_deg : tuple of float
            Smallest and largest distance, degrees.
        receiver_depth_km : tuple of float
            Smallest and largest receiver depth, negative above sea level.

        Returns
        -------
        TimeTable

        Raises
        ------
        InputError
            If the phase is unknown, a depth leaves crust and mantle or a range
            is empty.
        """
        phase_wave(phase)
        self._require_depth("source_depth_km", np.asarray(source_depth_km, dtype=np.float64))
        self._require_depth("receiver_depth_km", np.asarray(receiver_depth_km, dtype=np.float64))
        if not receiver_depth_km[0] < receiver_depth_km[1]:
            raise InputError(f"receiver_depth_km: expected a rising pair, got {receiver_depth_km}")
        if not 0.0 <= distance_deg[0] < distance_deg[1] <= 180.0:
            raise InputError(
                f"distance_deg: expected a rising pair in 0 to 180 degrees, got {distance_deg}"
            )
        table = WavefrontTable(
            self._core,
            phase,
            source_depth_km,
            depths_km=receiver_depth_km,
            distances_rad=(np.radians(distance_deg[0]), np.radians(distance_deg[1])),
        )
        return TimeTable(
            standard_phase(phase), source_depth_km, distance_deg, receiver_depth_km, table
        )

    def _arrivals(
        self,
        phase: str,
        distance_deg: ArrayLike,
        source_depth_km: ArrayLike,
        receiver_depth_km: ArrayLike,
    ) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        phase_wave(phase)
        distance, source, receiver = broadcast(
            distance_deg=distance_deg,
            source_depth_km=source_depth_km,
            receiver_depth_km=receiver_depth_km,
        )
        require_range("distance_deg", distance, 0.0, 180.0, unit="degrees", missing=True)
        self._require_depth("source_depth_km", source)
        self._require_depth("receiver_depth_km", receiver)
        time, parameter = self._core.first_arrivals(
            phase, np.radians(distance.ravel()), source.ravel(), receiver.ravel()
        )
        return time.reshape(distance.shape), parameter.reshape(distance.shape)

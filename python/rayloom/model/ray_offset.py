"""How far from its station a ray of the survey crosses a depth."""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np
from numpy.typing import NDArray

from rayloom.errors import InputError

if TYPE_CHECKING:
    from rayloom.earth import ReferenceEarth
    from rayloom.survey import Survey

Floats = NDArray[np.float64]

NEAREST_DEG: Final = 25.0
"""Nearer events are left aside: upper-mantle triplications."""

MOST_PICKS: Final = 2_000
"""Picks looked at, evenly drawn from all of them."""

STEP_KM: Final = 1.0


def ray_offset_deg(
    survey: Survey, earth: ReferenceEarth, *, depth_km: float, percentile: float
) -> float:
    """Find the horizontal distance between stations and where their rays cross a depth.

    Parameters
    ----------
    survey : Survey
        Events, stations and picks; P and S at 25° and more are looked at.
    earth : ReferenceEarth
        The one-dimensional model.
    depth_km : float
        Depth, km.
    percentile : float
        Which of the offsets sorted from the steepest ray to the shallowest, 0 … 100.

    Returns
    -------
    float
        Degrees of arc; infinite where that ray turns above the depth.

    Raises
    ------
    InputError
        If no pick is a P or S of an event at 25° or more.
    """
    offsets = [
        offset_deg(earth, ray_parameter, wave=wave, depth_km=depth_km)
        for wave, ray_parameter in _ray_parameters(survey, earth).items()
    ]
    together = np.concatenate(offsets) if offsets else np.zeros(0)
    if not together.size:
        raise InputError(
            f"no pick is a P or S of an event at {NEAREST_DEG:g}° or more, so the padding of the "
            "grid cannot be told; give padding_km",
            where="picks",
        )
    return float(np.percentile(together, percentile, method="higher"))


def offset_deg(
    earth: ReferenceEarth, ray_parameter_s: Floats, *, wave: str, depth_km: float
) -> Floats:
    """Integrate the distance a ray covers between a depth and the surface.

    Parameters
    ----------
    earth : ReferenceEarth
        The one-dimensional model.
    ray_parameter_s : ndarray, shape (n,)
        Ray parameters, s/rad.
    wave : {"P", "S"}
        Wave type.
    depth_km : float
        Depth, km.

    Returns
    -------
    ndarray, shape (n,)
        Degrees of arc, ∫ p / (r √((r/v)² − p²)) dr; infinite where the ray turns above.

    References
    ----------
    Lay, T. & Wallace, T. C. (1995). Modern Global Seismology, Academic Press, ch. 3.
    """
    step_count = max(int(np.ceil(depth_km / STEP_KM)), 1)
    depth = (np.arange(step_count) + 0.5) * (depth_km / step_count)
    radius = earth.radius_km - depth
    velocity = np.asarray(earth.velocity_km_s(depth, wave))
    parameter = np.asarray(ray_parameter_s, dtype=np.float64)[:, None]
    vertical = (radius / velocity) ** 2 - parameter**2
    turned = np.any(vertical <= 0.0, axis=1)
    integrand = parameter / (radius * np.sqrt(np.where(vertical > 0.0, vertical, np.inf)))
    offset = np.degrees(integrand.sum(axis=1) * (depth_km / step_count))
    return np.where(turned, np.inf, offset)


def _ray_parameters(survey: Survey, earth: ReferenceEarth) -> dict[str, Floats]:
    from rayloom.earth import distance_azimuth_deg, geocentric_latitude_deg

    picks, events, stations = survey.picks, survey.events, survey.stations
    stride = max(-(-len(picks.phase) // MOST_PICKS), 1)
    event, station = picks.event_index[::stride], picks.station_index[::stride]
    phase = picks.phase[::stride]
    distance = distance_azimuth_deg(
        geocentric_latitude_deg(events.latitude_deg[event]),
        events.longitude_deg[event],
        geocentric_latitude_deg(stations.latitude_deg[station]),
        stations.longitude_deg[station],
    ).distance_deg
    found = {}
    for wave in ("P", "S"):
        rows = (phase == wave) & (distance >= NEAREST_DEG)
        parameter = np.asarray(
            earth.ray_parameter(wave, distance[rows], events.depth_km[event[rows]])
        )
        found[wave] = parameter[np.isfinite(parameter)]
    return found

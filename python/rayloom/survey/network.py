"""The shape of the network: stations that stand far from all others."""

from __future__ import annotations

from typing import Final

import numpy as np

from rayloom.survey.notices import Notice
from rayloom.survey.stations import Stations
from rayloom.units import EARTH_RADIUS_KM

FEWEST_SITES: Final = 4
FAR_KM: Final = 100.0
FAR_MEDIANS: Final = 5.0
FAR_WIDEST: Final = 3.0
WIDEST_PERCENT: Final = 90.0
"""A station is remote if its spacing exceeds FAR_KM, FAR_MEDIANS times the median
spacing and FAR_WIDEST times the one that WIDEST_PERCENT of the sites stay below.
"""


def remote_stations(stations: Stations) -> list[Notice]:
    """Point at stations whose nearest neighbour is far beyond the usual spacing.

    Distances are great circles on a sphere, which is exact enough for a remark.
    """
    sites, site_of_row = np.unique(_unit_vectors(stations), axis=0, return_inverse=True)
    if len(sites) < FEWEST_SITES:
        return []
    nearest_km = _nearest_km(sites)
    median_km = float(np.median(nearest_km))
    widest_km = float(np.percentile(nearest_km, WIDEST_PERCENT, method="lower"))
    limit_km = max(FAR_KM, FAR_MEDIANS * median_km, FAR_WIDEST * widest_km)
    notices = []
    for site in np.flatnonzero(nearest_km > limit_km):
        label = str(stations.labels[np.flatnonzero(site_of_row.ravel() == site)[0]])
        detail = (
            f"station {label} lies {nearest_km[site]:.0f} km from its nearest neighbour, "
            f"far beyond the others (median {median_km:.0f} km); check its coordinates"
        )
        notices.append(Notice("warning", "remote_station", label, detail))
    return notices


def _unit_vectors(stations: Stations) -> np.ndarray:
    latitude = np.radians(stations.latitude_deg)
    longitude = np.radians(stations.longitude_deg)
    return np.stack(
        [
            np.cos(latitude) * np.cos(longitude),
            np.cos(latitude) * np.sin(longitude),
            np.sin(latitude),
        ],
        axis=1,
    )


def _nearest_km(sites: np.ndarray) -> np.ndarray:
    from scipy.spatial import cKDTree

    chords = np.asarray(cKDTree(sites).query(sites, k=2)[0])[:, 1]
    arcs = 2.0 * np.arcsin(np.minimum(chords / 2.0, 1.0))
    return np.asarray(arcs * EARTH_RADIUS_KM)

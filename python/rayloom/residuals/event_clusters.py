"""Events that lie close together: :func:`cluster_events`."""

from __future__ import annotations

import numpy as np

from rayloom.earth import geocentric_latitude_deg
from rayloom.survey import Events
from rayloom.survey.tables import FloatArray, IndexArray
from rayloom.units import EARTH_RADIUS_KM


def cluster_events(events: Events, chosen: IndexArray, *, distance_km: float) -> IndexArray:
    """Put events into clusters of limited extent.

    Parameters
    ----------
    events : Events
        The events table.
    chosen : (k,) int array
        Rows of the events to cluster, in the order of their names.
    distance_km : float
        No two hypocentres of a cluster lie further apart than this.

    Returns
    -------
    (k,) int array
        Cluster of each, numbered from 0 by its first event.

    Notes
    -----
    Complete linkage of the straight distances between hypocentres, cut at
    `distance_km`.
    """
    from scipy.cluster.hierarchy import fcluster, linkage

    if len(chosen) < 2:
        return np.zeros(len(chosen), dtype=np.int64)
    tree = linkage(_positions_km(events, chosen), method="complete")
    return _by_first(fcluster(tree, t=distance_km, criterion="distance").astype(np.int64))


def split_unconnected(
    cluster: IndexArray, event: IndexArray, station: IndexArray, phase: IndexArray
) -> IndexArray:
    """Split clusters until the picks of each phase hang together in each of them.

    Events hang together that share a station, directly or through others: only then can
    their unknown origin times be told apart from the structure.

    Parameters
    ----------
    cluster : (k,) int array
        Cluster of each event.
    event, station, phase : (n,) int arrays
        Event (0 to k − 1), station and phase of each pick.

    Returns
    -------
    (k,) int array
        Clusters, numbered from 0 by their first event.
    """
    names = np.unique(phase)
    while True:
        before = cluster
        for name in names:
            rows = phase == name
            cluster = _split(cluster, event[rows], station[rows])
        if np.array_equal(cluster, before):
            return cluster


def _split(cluster: IndexArray, event: IndexArray, station: IndexArray) -> IndexArray:
    """Split by the picks of one phase; events without any stay with the first part."""
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components

    node = np.unique(cluster[event] * (station.max() + 1) + station, return_inverse=True)[1]
    size = len(cluster) + int(node.max()) + 1
    links = coo_array(
        (np.ones(len(event)), (event, len(cluster) + node)), shape=(size, size)
    ).tocsr()
    part = connected_components(links, directed=False)[1][: len(cluster)].astype(np.int64)
    has_picks = np.isin(np.arange(len(cluster)), event)
    first: dict[int, int] = {}
    for index in np.flatnonzero(has_picks).tolist():
        first.setdefault(int(cluster[index]), int(part[index]))
    for index in np.flatnonzero(~has_picks).tolist():
        part[index] = first.get(int(cluster[index]), -1 - int(cluster[index]))
    return _by_first(part)


def _positions_km(events: Events, chosen: IndexArray) -> FloatArray:
    latitude = np.radians(geocentric_latitude_deg(events.latitude_deg[chosen]))
    longitude = np.radians(events.longitude_deg[chosen])
    radius = EARTH_RADIUS_KM - events.depth_km[chosen]
    axes = (
        np.cos(latitude) * np.cos(longitude),
        np.cos(latitude) * np.sin(longitude),
        np.sin(latitude),
    )
    return np.asarray(radius[:, None] * np.stack(axes, axis=-1))


def _by_first(labels: IndexArray) -> IndexArray:
    """Give labels numbers from 0 in the order of their first appearance."""
    _, first, inverse = np.unique(labels, return_index=True, return_inverse=True)
    rank = np.empty(len(first), dtype=np.int64)
    rank[np.argsort(first)] = np.arange(len(first))
    return np.asarray(rank[inverse])

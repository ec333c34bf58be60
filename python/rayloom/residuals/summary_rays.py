"""One summary residual for many nearly equal rays: :func:`summarise_rays`.

Swarms and aftershocks send many rays along one path. Left as they are they count as
independent evidence, which their common errors (structure near the source, a wrong
reference, the picker's habits) make them not.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np

from rayloom.earth import (
    distance_azimuth_deg,
    geocentric_latitude_deg,
    geographic_latitude_deg,
)
from rayloom.residuals.event_clusters import cluster_events, split_unconnected
from rayloom.residuals.prediction import pair_geometry
from rayloom.residuals.table import Residuals
from rayloom.residuals.two_way import fit_two_way
from rayloom.survey import Events
from rayloom.survey.tables import FloatArray, IndexArray, no_floats
from rayloom.units import KM_PER_DEGREE

if TYPE_CHECKING:
    import pandas as pd

_AVERAGED = ("predicted_s", "ellipticity_s", "elevation_s", "crust_s")


@dataclass(frozen=True, eq=False)
class SummaryRays:
    """Residuals of event clusters, and what they were made of.

    Attributes
    ----------
    data : Residuals
        One row per cluster, station and phase. Its events are the clusters: an event
        alone keeps its name, a cluster is called after its first event and the number of
        the others (``E0012+3``) and lies at the mean of its events.
    members : DataFrame
        One row per event: cluster, event, latitude, longitude, depth_km,
        ``distance_km`` from the mean, and its number of picks.
    picks_per_row : (n,) int array
        How many picks each row of `data` sums up.
    downweighted : int
        Picks beyond three standard deviations of the others of their cluster.
    """

    data: Residuals
    members: pd.DataFrame
    picks_per_row: IndexArray
    downweighted: int


def summarise_rays(
    data: Residuals, *, distance_km: float, systematic_s: float = 0.05
) -> SummaryRays:
    """Sum up the residuals of nearby events, one per station and phase.

    Parameters
    ----------
    data : Residuals
        Residuals of single events.
    distance_km : float
        Events are summed up whose hypocentres all lie within this of each other.
    systematic_s : float
        Standard deviation of what the picks of a cluster at one station have in common,
        s; it does not average out.

    Returns
    -------
    SummaryRays
        The uncertainty of a row is √(σ_pick²/k + σ_sys²), σ_pick²/k being 1/Σ(w/σ²) over
        its k picks with robust weights w, 1 but for outliers; a single pick gets
        σ_sys as well, so that weights compare.

    Notes
    -----
    Each event has an unknown mean of its own (its origin time), and events of a cluster
    are not recorded at the same stations. Summaries are therefore not means of
    residuals, but the station values s of a least-squares fit
    r = m(event) + s(station) (:mod:`rayloom.residuals.two_way`); where all events have
    all stations and equal uncertainties they are the means. A cluster whose events
    share no station is split. Results do not depend on the order of rows.
    """
    order = _order(data)
    used = np.unique(data.event_index)
    used = used[np.argsort(data.events.event[used], kind="stable")]
    place = np.full(len(data.events), -1, dtype=np.int64)
    place[used] = np.arange(len(used))
    event = place[data.event_index[order]]
    phase = np.unique(data.phase[order], return_inverse=True)[1]
    station = data.station_index[order]
    cluster = cluster_events(data.events, used, distance_km=distance_km)
    cluster = split_unconnected(cluster, event, station, phase)
    events = _cluster_events(data.events, used, cluster)
    key = np.stack([cluster[event], phase, station], axis=-1)
    rows, row = np.unique(key, axis=0, return_inverse=True)
    fitted = _fit_groups(data, order, event, key, row.ravel(), systematic_s)
    picks = np.bincount(row.ravel())
    summary = _residuals(data, order, events, rows, row.ravel(), picks, fitted)
    return SummaryRays(
        data=summary,
        members=_members(data, used, cluster, events),
        picks_per_row=picks.astype(np.int64),
        downweighted=int(np.count_nonzero(fitted.weight < 1.0)),
    )


@dataclass(frozen=True)
class _Fitted:
    """Value and uncertainty of each summary row, s; robust weight of each pick."""

    value_s: FloatArray
    uncertainty_s: FloatArray
    weight: FloatArray


def _order(data: Residuals) -> IndexArray:
    """Order rows by event, phase, station and value, whatever their order was."""
    return np.lexsort(
        (
            data.uncertainty_s,
            data.residual_s,
            data.station_index,
            data.phase,
            data.events.event[data.event_index],
        )
    ).astype(np.int64)


def _fit_groups(
    data: Residuals,
    order: IndexArray,
    event: IndexArray,
    key: IndexArray,
    row: IndexArray,
    systematic_s: float,
) -> _Fitted:
    """Fit each (cluster, phase) group by itself."""
    residual_s, sigma_s = data.residual_s[order], data.uncertainty_s[order]
    count = int(row.max()) + 1
    value_s, weight = np.empty(count), np.ones(len(order))
    group = np.unique(key[:, :2], axis=0, return_inverse=True)[1].ravel()
    by_group = np.argsort(group, kind="stable")
    for rows in np.split(by_group, np.flatnonzero(np.diff(group[by_group])) + 1):
        values, station = np.unique(row[rows], return_inverse=True)
        fit = fit_two_way(
            residual_s[rows],
            sigma_s[rows],
            np.unique(event[rows], return_inverse=True)[1],
            station,
            systematic_s=systematic_s,
        )
        value_s[values] = fit.station_s
        weight[rows] = fit.weight
    variance = 1.0 / np.bincount(row, weight / sigma_s**2, count)
    return _Fitted(value_s, np.sqrt(variance + systematic_s**2), weight)


def _residuals(
    data: Residuals,
    order: IndexArray,
    events: Events,
    rows: IndexArray,
    row: IndexArray,
    picks: IndexArray,
    fitted: _Fitted,
) -> Residuals:
    geometry = pair_geometry(events, data.stations, rows[:, 0], rows[:, 2])
    first = np.unique(row, return_index=True)[1]
    averaged: dict[str, Any] = {
        name: np.bincount(row, getattr(data, name)[order]) / picks for name in _AVERAGED
    }
    return replace(
        data,
        events=events,
        event_index=rows[:, 0],
        station_index=rows[:, 2],
        phase=data.phase[order][first],
        wave=data.wave[order][first],
        residual_s=fitted.value_s,
        uncertainty_s=fitted.uncertainty_s,
        distance_deg=geometry.distance_deg,
        azimuth_deg=geometry.azimuth_deg,
        back_azimuth_deg=geometry.back_azimuth_deg,
        relative_residual_s=no_floats(),
        **averaged,
    )


def _cluster_events(events: Events, used: IndexArray, cluster: IndexArray) -> Events:
    """Make an event of each cluster, at the mean of its members."""
    latitude = np.radians(geocentric_latitude_deg(events.latitude_deg[used]))
    longitude = np.radians(events.longitude_deg[used])
    axes = (
        np.cos(latitude) * np.cos(longitude),
        np.cos(latitude) * np.sin(longitude),
        np.sin(latitude),
    )
    count = np.bincount(cluster)
    x, y, z = (np.bincount(cluster, axis) / count for axis in axes)
    first = np.unique(cluster, return_index=True)[1]
    alone = count == 1
    names = [
        name if one else f"{name}+{number - 1}"
        for name, one, number in zip(events.event[used[first]], alone, count, strict=True)
    ]
    north = geographic_latitude_deg(np.degrees(np.arctan2(z, np.hypot(x, y))))
    east = np.degrees(np.arctan2(y, x))
    starts = np.array([events.time[used[cluster == c]].min() for c in range(len(count))])
    return Events(
        event=np.array(names, dtype=np.str_),
        time=starts,
        latitude_deg=np.where(alone, events.latitude_deg[used[first]], north),
        longitude_deg=np.where(alone, events.longitude_deg[used[first]], east),
        depth_km=np.bincount(cluster, events.depth_km[used]) / count,
        magnitude=np.where(alone, events.magnitude[used[first]], np.nan),
    )


def _members(
    data: Residuals, used: IndexArray, cluster: IndexArray, clusters: Events
) -> pd.DataFrame:
    import pandas as pd

    events = data.events
    apart_deg = distance_azimuth_deg(
        geocentric_latitude_deg(clusters.latitude_deg[cluster]),
        clusters.longitude_deg[cluster],
        geocentric_latitude_deg(events.latitude_deg[used]),
        events.longitude_deg[used],
    ).distance_deg
    below_km = events.depth_km[used] - clusters.depth_km[cluster]
    picks = np.bincount(data.event_index, minlength=len(events))[used]
    table = pd.DataFrame(
        {
            "cluster": clusters.event[cluster],
            "event": events.event[used],
            "latitude": events.latitude_deg[used],
            "longitude": events.longitude_deg[used],
            "depth_km": events.depth_km[used],
            "distance_km": np.hypot(apart_deg * KM_PER_DEGREE, below_km),
            "picks": picks,
        }
    )
    return table.iloc[np.argsort(cluster, kind="stable")].reset_index(drop=True)

"""Faults put into clean surveys, and which findings count as naming them."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from bench.planted.survey import Draft, earth
from rayloom.residuals.prediction import pair_geometry
from rayloom.residuals.screens import Finding
from rayloom.units import KM_PER_DEGREE

Random = np.random.Generator
Planter = Callable[[Draft, Random, float], tuple[Draft, str]]


@dataclass(frozen=True)
class Fault:
    """One way to spoil a survey.

    Parameters
    ----------
    name : str
        What is wrong.
    size : str
        How large it is, in words; planted at ``scale`` times this.
    plant : callable
        Takes a draft, a random generator and a scale; returns the spoilt draft and who is
        concerned.
    kinds : tuple of str
        Kinds of finding that name it.
    scales : tuple of float
        Sizes to measure.
    """

    name: str
    size: str
    plant: Planter
    kinds: tuple[str, ...]
    scales: tuple[float, ...] = (1.0,)

    def named_by(self, finding: Finding, who: str) -> bool:
        """Whether a finding names this fault and whom it concerns."""
        return finding.kind in self.kinds and who in finding.who


def _label(draft: Draft, station: int) -> str:
    return str(draft.stations.labels[station])


def _any_station(draft: Draft, random: Random) -> int:
    return int(random.integers(len(draft.stations)))


def _any_event(draft: Draft, random: Random) -> int:
    return int(random.integers(len(draft.events)))


def _sign(random: Random) -> float:
    return float(random.choice([-1.0, 1.0]))


def _later(draft: Draft, late_s: NDArray[np.float64]) -> Draft:
    return replace(draft, travel_s=draft.travel_s + late_s)


def _changed(table: Any, row: int, **values: float) -> Any:
    columns = {}
    for name, value in values.items():
        column = getattr(table, name).copy()
        column[row] = value
        columns[name] = column
    return replace(table, **columns)


def step(draft: Draft, random: Random, scale: float) -> tuple[Draft, str]:
    station = _any_station(draft, random)
    rows = draft.station_index == station
    order = np.argsort(np.argsort(draft.event_index + 1e9 * ~rows, kind="stable"))
    since = rows & (order >= random.uniform(0.25, 0.75) * rows.sum())
    return _later(draft, 0.3 * scale * _sign(random) * since), _label(draft, station)


def drift(draft: Draft, random: Random, scale: float) -> tuple[Draft, str]:
    station = _any_station(draft, random)
    days = (draft.events.time - draft.events.time.min()) / np.timedelta64(1, "D")
    share = (days / days.max())[draft.event_index]
    late_s = 0.3 * scale * _sign(random) * share * (draft.station_index == station)
    return _later(draft, late_s), _label(draft, station)


def offset(draft: Draft, random: Random, scale: float) -> tuple[Draft, str]:
    station = _any_station(draft, random)
    late_s = 1.0 * scale * _sign(random) * (draft.station_index == station)
    return _later(draft, late_s), _label(draft, station)


def cycle_skip(draft: Draft, random: Random, scale: float) -> tuple[Draft, str]:
    row = int(random.integers(len(draft.travel_s)))
    late_s = np.zeros(len(draft.travel_s))
    late_s[row] = scale * _sign(random)
    event = draft.events.event[draft.event_index[row]]
    return _later(draft, late_s), f"{event} {_label(draft, draft.station_index[row])} P"


def polarity_both_sides(draft: Draft, random: Random, scale: float) -> tuple[Draft, str]:
    station = _any_station(draft, random)
    side = random.choice([-0.5, 0.5], len(draft.travel_s))
    return _later(draft, scale * side * (draft.station_index == station)), _label(draft, station)


def polarity_one_side(draft: Draft, random: Random, scale: float) -> tuple[Draft, str]:
    station = _any_station(draft, random)
    late_s = 0.5 * scale * _sign(random) * (draft.station_index == station)
    return _later(draft, late_s), _label(draft, station)


def polarity_since(draft: Draft, random: Random, scale: float) -> tuple[Draft, str]:
    return step(draft, random, scale * 0.5 / 0.3)


def duplicate_picks(draft: Draft, random: Random, scale: float) -> tuple[Draft, str]:
    row = int(random.integers(len(draft.travel_s)))
    rows = np.append(np.arange(len(draft.travel_s)), row)
    twice = draft.select(rows)
    travel_s = twice.travel_s.copy()
    travel_s[-1] += scale * random.uniform(0.05, 1.0) * _sign(random)
    return replace(twice, travel_s=travel_s), _label(draft, draft.station_index[row])


def duplicate_event(draft: Draft, random: Random, scale: float) -> tuple[Draft, str]:
    """Another catalogue's version of an event, with some of its picks."""
    event = _any_event(draft, random)
    rows = np.flatnonzero(draft.event_index == event)
    events = draft.events
    columns = {
        name: np.append(getattr(events, name), getattr(events, name)[event])
        for name in events.column_names()
    }
    columns["event"] = np.append(events.event, "AGAIN")
    columns["time"][-1] += np.timedelta64(round(1e3 * scale * random.uniform(-3.0, 3.0)), "ms")
    columns["latitude_deg"][-1] += random.normal(0.0, 0.1)
    again = draft.select(np.append(np.arange(len(draft.travel_s)), rows))
    event_index = again.event_index.copy()
    event_index[len(draft.travel_s) :] = len(events)
    whole = replace(again, events=type(events)(**columns), event_index=event_index)
    new = np.arange(len(draft.travel_s), len(event_index))
    return whole.repredicted(new), "AGAIN"


def station_exchanged(draft: Draft, random: Random, scale: float) -> tuple[Draft, str]:
    station = _any_station(draft, random)
    given = draft.stations
    latitude = given.longitude_deg[station]
    if abs(latitude) > 90.0:
        latitude = 180.0 - abs(latitude)
    stations = _changed(
        given,
        station,
        latitude_deg=float(latitude),
        longitude_deg=float(given.latitude_deg[station]),
    )
    spoilt = replace(draft, stations=stations)
    rows = np.flatnonzero(draft.station_index == station)
    return spoilt.repredicted(rows), _label(draft, station)


def station_shifted(draft: Draft, random: Random, scale: float) -> tuple[Draft, str]:
    station = _any_station(draft, random)
    angle = random.uniform(0.0, 2.0 * np.pi)
    away_deg = 20.0 * scale / KM_PER_DEGREE
    given = draft.stations
    latitude_deg = float(given.latitude_deg[station])
    stations = _changed(
        given,
        station,
        latitude_deg=latitude_deg + away_deg * np.cos(angle),
        longitude_deg=float(given.longitude_deg[station])
        + away_deg * np.sin(angle) / np.cos(np.radians(latitude_deg)),
    )
    spoilt = replace(draft, stations=stations)
    rows = np.flatnonzero(draft.station_index == station)
    return spoilt.repredicted(rows), _label(draft, station)


def event_outside(draft: Draft, random: Random, scale: float) -> tuple[Draft, str]:
    """Have an event at 15 to 21 degrees, truly there."""
    event = _any_event(draft, random)
    latitude_deg = float(np.median(draft.stations.latitude_deg))
    away_deg = random.uniform(15.0, 21.0)
    events = _changed(
        draft.events,
        event,
        latitude_deg=latitude_deg + (away_deg if latitude_deg < 0.0 else -away_deg),
        longitude_deg=float(np.median(draft.stations.longitude_deg)),
    )
    rows = np.flatnonzero(draft.event_index == event)
    late_s = (draft.travel_s - draft.predicted_s)[rows]
    spoilt = replace(draft, events=events).repredicted(rows)
    travel_s = spoilt.travel_s.copy()
    travel_s[rows] = spoilt.predicted_s[rows] + late_s
    return replace(spoilt, travel_s=travel_s), str(draft.events.event[event])


def half_sky(draft: Draft, random: Random, scale: float) -> tuple[Draft, str]:
    """Only the events of one half of all back-azimuths are there."""
    centre = random.uniform(0.0, 2.0 * np.pi)
    middle = int(
        np.argmin(np.abs(draft.stations.latitude_deg - np.median(draft.stations.latitude_deg)))
    )
    geometry = pair_geometry(
        draft.events,
        draft.stations,
        np.arange(len(draft.events)),
        np.full(len(draft.events), middle),
    )
    there = np.cos(np.radians(geometry.back_azimuth_deg) - centre) > 0.0
    return draft.select(there[draft.event_index]), "P back-azimuths"


def phase_mixed(other: str) -> Planter:
    def plant(draft: Draft, random: Random, scale: float) -> tuple[Draft, str]:
        """One pick is that of another phase of the same event."""
        geometry = pair_geometry(
            draft.events, draft.stations, draft.event_index, draft.station_index
        )
        near = geometry.distance_deg <= 65.0
        deep = draft.events.depth_km[draft.event_index] >= 12.0
        row = int(random.choice(np.flatnonzero(near & deep)))
        one = np.array([row])
        distance_deg = geometry.distance_deg[one]
        depth_km = draft.events.depth_km[draft.event_index[one]]
        gap_s = earth().travel_time(other, distance_deg, depth_km) - earth().travel_time(
            "P", distance_deg, depth_km
        )
        late_s = np.zeros(len(draft.travel_s))
        late_s[row] = gap_s[0]
        event = draft.events.event[draft.event_index[row]]
        return _later(draft, late_s), f"{event} {_label(draft, draft.station_index[row])} P"

    return plant


def uncertainties_times(factor: float) -> Planter:
    def plant(draft: Draft, random: Random, scale: float) -> tuple[Draft, str]:
        return replace(draft, uncertainty_s=draft.uncertainty_s * factor), "all P picks"

    return plant


def station_uncertainties(draft: Draft, random: Random, scale: float) -> tuple[Draft, str]:
    station = _any_station(draft, random)
    factor = np.where(draft.station_index == station, 10.0 ** _sign(random), 1.0)
    return replace(draft, uncertainty_s=draft.uncertainty_s * factor), _label(draft, station)


def one_sided_set(draft: Draft, random: Random, scale: float) -> tuple[Draft, str]:
    """Have an event recorded only where picks are late (or early) on the whole."""
    residual_s = draft.travel_s - draft.predicted_s
    events, stations = len(draft.events), len(draft.stations)
    mean_s = np.bincount(draft.event_index, residual_s, events) / np.bincount(
        draft.event_index, minlength=events
    )
    off_s = residual_s - mean_s[draft.event_index]
    term_s = np.bincount(draft.station_index, off_s, stations) / np.maximum(
        np.bincount(draft.station_index, minlength=stations), 1
    )
    event = _any_event(draft, random)
    order = np.argsort(term_s * _sign(random))
    chosen = np.isin(draft.station_index, order[: stations // 5])
    kept = (draft.event_index != event) | chosen
    return draft.select(kept), str(draft.events.event[event])


def cluster(draft: Draft, random: Random, scale: float) -> tuple[Draft, str]:
    """Move a third of all events into a circle of 60 km about one of them."""
    count = len(draft.events) // 3
    rows = random.choice(len(draft.events), count, replace=False)
    latitude = draft.events.latitude_deg.copy()
    longitude = draft.events.longitude_deg.copy()
    spread_deg = random.uniform(-0.35, 0.35, (2, count))
    latitude[rows] = latitude[rows[0]] + spread_deg[0]
    longitude[rows] = longitude[rows[0]] + spread_deg[1] / np.cos(np.radians(latitude[rows[0]]))
    events = replace(draft.events, latitude_deg=latitude, longitude_deg=longitude)
    delay_s = np.full(len(draft.stations), np.nan)
    first = draft.event_index == rows[0]
    delay_s[draft.station_index[first]] = (draft.travel_s - draft.predicted_s)[first]
    moved = np.isin(draft.event_index, rows[1:])
    late_s = draft.travel_s - draft.predicted_s
    noise_s = random.normal(0.0, 0.1, int(moved.sum()))
    late_s[moved] = delay_s[draft.station_index[moved]] + noise_s
    spoilt = replace(draft, events=events).repredicted(np.flatnonzero(moved))
    spoilt = replace(spoilt, travel_s=spoilt.predicted_s + late_s)
    return spoilt.select(np.isfinite(late_s)), ""


def event_exchanged(draft: Draft, random: Random, scale: float) -> tuple[Draft, str]:
    possible = np.flatnonzero(np.abs(draft.events.longitude_deg) <= 90.0)
    turned = len(possible) == 0
    event = int(random.choice(possible)) if not turned else _any_event(draft, random)
    latitude = float(draft.events.latitude_deg[event])
    longitude = float(draft.events.longitude_deg[event])
    right = {"latitude_deg": longitude, "longitude_deg": latitude}
    if turned:
        right = {"latitude_deg": -latitude, "longitude_deg": longitude}
    spoilt = replace(draft, events=_changed(draft.events, event, **right))
    rows = np.flatnonzero(draft.event_index == event)
    return spoilt.repredicted(rows), str(draft.events.event[event])


def event_late(draft: Draft, random: Random, scale: float) -> tuple[Draft, str]:
    event = _any_event(draft, random)
    late_s = 10.0 * scale * _sign(random) * (draft.event_index == event)
    return _later(draft, late_s), str(draft.events.event[event])


def event_deep(draft: Draft, random: Random, scale: float) -> tuple[Draft, str]:
    """Make the table's depth 100 km too large, or too small where that is possible."""
    event = _any_event(draft, random)
    depth_km = float(draft.events.depth_km[event])
    change_km = 100.0 * scale * (-1.0 if depth_km > 100.0 * scale else 1.0)
    events = _changed(draft.events, event, depth_km=depth_km + change_km)
    rows = np.flatnonzero(draft.event_index == event)
    return replace(draft, events=events).repredicted(rows), str(draft.events.event[event])


def event_shifted(draft: Draft, random: Random, scale: float) -> tuple[Draft, str]:
    """Put the table's epicentre 2 degrees off, in any direction."""
    event = _any_event(draft, random)
    angle = random.uniform(0.0, 2.0 * np.pi)
    latitude_deg = float(draft.events.latitude_deg[event])
    away_deg = 2.0 * scale
    events = _changed(
        draft.events,
        event,
        latitude_deg=float(np.clip(latitude_deg + away_deg * np.cos(angle), -89.0, 89.0)),
        longitude_deg=float(draft.events.longitude_deg[event])
        + away_deg * np.sin(angle) / max(np.cos(np.radians(latitude_deg)), 0.1),
    )
    rows = np.flatnonzero(draft.event_index == event)
    return replace(draft, events=events).repredicted(rows), str(draft.events.event[event])


ORIGIN_KINDS = ("event_origin", "event_place", "event_coordinates", "outside_window")

FAULTS = (
    Fault("station steps", "0.3 s", step, ("station_step", "station_drift"), (1.0, 1.5)),
    Fault("station drifts", "0.3 s in all", drift, ("station_drift", "station_step"), (1.0, 1.5)),
    Fault("station off its neighbours", "1 s", offset, ("station_offset",), (1.0, 1.5)),
    Fault("cycle skip, one pick", "1 period of 1 s", cycle_skip, ("cycle_skip",)),
    Fault("polarity, early and late", "half a period", polarity_both_sides, ("polarity",)),
    Fault(
        "polarity, one side", "half a period", polarity_one_side, ("polarity", "station_offset")
    ),
    Fault("polarity, since a day", "half a period", polarity_since, ("station_step",)),
    Fault("pick given twice", "0.05 to 1 s apart", duplicate_picks, ("duplicate_pick",)),
    Fault("event listed twice", "within 3 s", duplicate_event, ("duplicate_event",)),
    Fault(
        "station, latitude and longitude exchanged",
        "",
        station_exchanged,
        ("station_coordinates",),
    ),
    Fault("station shifted", "20 km", station_shifted, ("station_coordinates",), (1.0, 1.5)),
    Fault("event outside the window", "15 to 21 deg away", event_outside, ("outside_window",)),
    Fault("events in half of all directions", "", half_sky, ("thin_sector",)),
    Fault("pP called P, one pick", "", phase_mixed("pP"), ("phase_mixed",)),
    Fault("PcP called P, one pick", "", phase_mixed("PcP"), ("phase_mixed",)),
    Fault("uncertainties too small", "10 times", uncertainties_times(0.1), ("uncertainty_scale",)),
    Fault(
        "uncertainties too large", "10 times", uncertainties_times(10.0), ("uncertainty_scale",)
    ),
    Fault(
        "uncertainties of one station", "10 times", station_uncertainties, ("uncertainty_scale",)
    ),
    Fault("event seen by late stations only", "a fifth of them", one_sided_set, ("event_mean",)),
    Fault("cluster of events", "a third in 60 km", cluster, ("event_cluster",)),
    Fault("event, latitude and longitude exchanged", "", event_exchanged, ORIGIN_KINDS),
    Fault("event, origin time", "10 s", event_late, ("event_origin",), (1.0, 0.5)),
    Fault("event, depth", "100 km", event_deep, ("event_origin",), (1.0, 0.5)),
    Fault("event, epicentre", "2 deg", event_shifted, ORIGIN_KINDS, (1.0, 0.5)),
)
"""Every kind, at the sizes measured."""

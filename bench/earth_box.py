"""A box filled with the one-dimensional Earth against the times of that Earth."""

from __future__ import annotations

from pathlib import Path

import numpy as np
from numpy.typing import NDArray

import rayloom as rl
from bench.report import Report, Table
from bench.surveys import distant_events, network
from rayloom.earth import distance_azimuth_deg, geocentric_latitude_deg
from rayloom.forward import Rays, trace_distant
from rayloom.model import SuggestionSettings, suggest_grid
from rayloom.survey import Events, Picks, Stations, Survey

Floats = NDArray[np.float64]
PLACE = rl.Frame(longitude=66.0, latitude=-40.0, azimuth_deg=0.0)
DISTANCES_DEG = (30.0, 95.0)
BASE_KM = 400.0
LEAST_INSIDE_DEG = 0.5
LIMITS = {(20.0, 20.0): (2.0, 8.0), (10.0, 10.0): (1.0, 8.0)}
FLAT_BLOCKS = (20.0, 10.0)


def run(*, quick: bool, output: Path) -> Report:
    """Measure with suggested grids of 20- and 10-km blocks, and with flat ones."""
    stations_count, events_count = (8, 12) if quick else (25, 80)
    report = Report(
        "Box against the one-dimensional Earth ak135, P",
        {"stations": stations_count, "events": events_count, "base (km)": BASE_KM},
    )
    table = report.table(
        "Difference after removal of event means",
        "spacing (km)",
        "thickness (km)",
        "blocks",
        "quality",
        "rays",
        "mean before removal (ms)",
        "sd (ms)",
        "max (ms)",
        "no ray",
    )
    stations = network(PLACE, stations_count, (1.5, 1.5), seed=31)
    events = distant_events(PLACE, events_count, DISTANCES_DEG, seed=32)
    sizes = [FLAT_BLOCKS, *LIMITS]
    for size_km in sizes[:2] if quick else sizes:
        for quality in ("standard", "thorough"):
            _one_grid(report, table, (stations, events), size_km, quality)
    report.remarks.append(
        "Grids are those suggested for the survey with the given spacing and thickness; "
        "all stations lie at least 0.5° inside."
    )
    return report


def _one_grid(
    report: Report,
    table: Table,
    survey: tuple[Stations, Events],
    size_km: tuple[float, float],
    quality: str,
) -> None:
    stations, events = survey
    earth = rl.ReferenceEarth("ak135")
    wishes = SuggestionSettings(
        spacing_km=size_km[0], block_thickness_km=size_km[1], depth_km=BASE_KM
    )
    grid = suggest_grid(_survey(stations, events), earth, wishes).grid
    _require_inside(grid, stations)
    model = rl.SlownessModel.from_earth(grid, earth)
    rays = trace_distant(model, earth, events, stations, quality=quality)
    before, relative = _differences(rays, earth, events, stations)
    found = 1e3 * float(relative.std()), 1e3 * float(np.abs(relative).max())
    mean, missing = 1e3 * float(before.mean()), int((~rays.traced).sum())
    table.add(*size_km, grid.block_count, quality, len(rays), mean, *found, missing)
    label = f"{size_km[0]:g} × {size_km[1]:g} km, {quality}"
    for what, measured, limit in zip(("sd", "max"), found, LIMITS.get(size_km, ()), strict=False):
        report.at_most(f"{label}: {what} (ms)", measured, limit)


def _differences(
    rays: Rays, earth: rl.ReferenceEarth, events: Events, stations: Stations
) -> tuple[Floats, Floats]:
    """Return box minus Earth of all traced rays, with and without the means of the events."""
    event, station = np.indices((len(events), len(stations))).reshape(2, -1)
    path = distance_azimuth_deg(
        geocentric_latitude_deg(events.latitude_deg)[event],
        events.longitude_deg[event],
        geocentric_latitude_deg(stations.latitude_deg)[station],
        stations.longitude_deg[station],
    )
    exact = earth.travel_time(
        "P", path.distance_deg, events.depth_km[event], stations.depth_km[station]
    )
    kept = rays.traced & (path.distance_deg >= DISTANCES_DEG[0])
    kept &= path.distance_deg <= DISTANCES_DEG[1]
    difference, group = (rays.time_s - exact)[kept], event[kept]
    number = np.bincount(group, minlength=len(events))
    means = np.bincount(group, difference, minlength=len(events)) / np.maximum(number, 1)
    return difference, difference - means[group]


def _require_inside(grid: rl.BlockGrid, stations: Stations) -> None:
    x, y = grid.frame.local_coordinates(stations.longitude_deg, stations.latitude_deg)
    room = min(
        (values - edges[0]).min() if low else (edges[-1] - values).min()
        for values, edges in ((x, grid.x_edges), (y, grid.y_edges))
        for low in (True, False)
    )
    if room < LEAST_INSIDE_DEG:
        raise ValueError(f"a station lies only {room:.2f}° inside the grid")


def _survey(stations: Stations, events: Events) -> Survey:
    event, station = np.indices((len(events), len(stations))).reshape(2, -1)
    picks = Picks(
        event_index=event,
        station_index=station,
        phase=np.full(event.size, "P"),
        time=events.time[event],
        uncertainty_s=np.full(event.size, 0.1),
    )
    return Survey(stations, events, picks)

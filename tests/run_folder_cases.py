"""A small survey with times of its own, as files, for tests of the whole line.

Travel times are those of the reference Earth plus a delay at each station, so that an
inversion has something to find.
"""

from __future__ import annotations

import csv
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from rayloom.earth import ReferenceEarth, distance_azimuth_deg, geocentric_latitude_deg

CENTRE_LONGITUDE_DEG = 12.0
CENTRE_LATITUDE_DEG = -31.0

COARSE_GRID = """\
[grid]
longitude_deg = 12.0
latitude_deg = -31.0
x_edges = [-6.0, -2.5, -1.0, 0.0, 1.0, 2.5, 6.0]
y_edges = [-6.0, -2.5, -1.0, 0.0, 1.0, 2.5, 6.0]
depth_edges_km = [-3.0, 20.0, 35.0, 120.0, 210.0, 300.0]
"""


@dataclass(frozen=True)
class SurveyFiles:
    """Where the tables are."""

    stations: Path
    events: Path
    picks: Path

    def options(self) -> list[str]:
        """Return the options of ``rayloom init`` that name them."""
        return [
            "--stations",
            str(self.stations),
            "--events",
            str(self.events),
            "--picks",
            str(self.picks),
        ]


def write_small_survey(folder: Path) -> SurveyFiles:
    """Write 12 stations, 10 events and 120 picks."""
    folder.mkdir(parents=True, exist_ok=True)
    random = np.random.default_rng(11)
    latitude_deg, longitude_deg = (
        axis.ravel()
        for axis in np.meshgrid(
            CENTRE_LATITUDE_DEG + np.array([-0.6, 0.0, 0.6]),
            CENTRE_LONGITUDE_DEG + np.array([-0.9, -0.3, 0.3, 0.9]),
            indexing="ij",
        )
    )
    names = [f"S{number:02d}" for number in range(latitude_deg.size)]
    delay_s = 0.3 * np.sign(longitude_deg - CENTRE_LONGITUDE_DEG)
    files = SurveyFiles(folder / "stations.csv", folder / "events.csv", folder / "picks.csv")
    _write(
        files.stations,
        "network,station,latitude,longitude,elevation_m",
        [
            ("XX", name, f"{lat:.4f}", f"{lon:.4f}", "1200")
            for name, lat, lon in zip(names, latitude_deg, longitude_deg, strict=True)
        ],
    )
    earth = ReferenceEarth("ak135")
    events, picks = [], []
    for number in range(10):
        azimuth = np.radians(36.0 * number)
        event_latitude = CENTRE_LATITUDE_DEG + 55.0 * np.cos(azimuth) * 0.8
        event_longitude = CENTRE_LONGITUDE_DEG + 55.0 * np.sin(azimuth)
        origin = np.datetime64("2021-03-01T00:00:00.000", "ms") + np.timedelta64(number, "D")
        event = f"E{number}"
        events.append(
            (event, f"{origin}Z", f"{event_latitude:.3f}", f"{event_longitude:.3f}", "33")
        )
        distance_deg = distance_azimuth_deg(
            geocentric_latitude_deg(np.full_like(latitude_deg, event_latitude)),
            np.full_like(latitude_deg, event_longitude),
            geocentric_latitude_deg(latitude_deg),
            longitude_deg,
        ).distance_deg
        travel_s = earth.travel_time("P", distance_deg, source_depth_km=33.0)
        travel_s = travel_s + delay_s + random.normal(0.0, 0.05, travel_s.size)
        for name, seconds in zip(names, travel_s, strict=True):
            if np.isfinite(seconds):
                arrival = origin + np.timedelta64(round(seconds * 1000), "ms")
                picks.append((event, "XX", name, "P", f"{arrival}Z", "0.1"))
    _write(files.events, "event,time,latitude,longitude,depth_km", events)
    _write(files.picks, "event,network,station,phase,time,uncertainty_s", picks)
    return files


def write_run_folder(folder: Path, files: SurveyFiles) -> Path:
    """Write a ``rayloom.toml`` with few blocks and two iterations."""
    folder.mkdir(parents=True, exist_ok=True)
    text = (
        f'[inputs]\nstations = "{files.stations.as_posix()}"\n'
        f'events = "{files.events.as_posix()}"\npicks = "{files.picks.as_posix()}"\n\n'
        f"{COARSE_GRID}\n[inversion]\nmax_iterations = 2\n\n[outputs]\ndpi = 60\n"
    )
    (folder / "rayloom.toml").write_text(text, encoding="utf-8")
    return folder


def _write(path: Path, header: str, rows: list[tuple[str, ...]]) -> None:
    with path.open("w", encoding="utf-8", newline="") as stream:
        writer = csv.writer(stream, lineterminator="\n")
        writer.writerow(header.split(","))
        writer.writerows(rows)

"""Write the demo's survey: three CSV files of the form that users bring, and the truth."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable, Sequence
from dataclasses import replace
from pathlib import Path
from typing import Final

import numpy as np
from numpy.typing import NDArray

from rayloom.demo.invention import Invention, Scenario, invent
from rayloom.demo.places import PLACES
from rayloom.demo.seismicity import Seismicity
from rayloom.demo.times import PHASE, Progress
from rayloom.demo.truth import DemoTruth
from rayloom.survey import Stations
from rayloom.writing import write_text

STATIONS_FILE: Final = "stations.csv"
EVENTS_FILE: Final = "events.csv"
PICKS_FILE: Final = "picks.csv"
TRUTH_FILE: Final = "truth.json"
TRUTH_MODEL_FILE: Final = "truth.nc"


def write_survey(
    folder: str | Path,
    *,
    seed: int | None = None,
    scenario: Scenario | None = None,
    truth_netcdf: bool = False,
    threads: int | None = None,
    progress: Progress | None = None,
) -> DemoTruth:
    """Invent a survey of the highland and write it.

    Writes ``stations.csv``, ``events.csv`` (with the errors of a catalogue) and
    ``picks.csv``, and beside them ``truth.json`` with what lies below.

    Parameters
    ----------
    folder : str or Path
        Where to write; made if missing.
    seed : int, optional
        Decides every draw: the same seed gives the same files. The scenario's by default.
    scenario : Scenario, optional
        Sizes of the survey; 60 stations and 120 events by default.
    truth_netcdf : bool
        Whether to write the true model to ``truth.nc`` too.
    threads : int, optional
        Number of threads; all by default.
    progress : callable, optional
        Called with rays done and rays in all.

    Returns
    -------
    DemoTruth
        The content of ``truth.json``.

    Raises
    ------
    FileAccessError
        If a file cannot be written.
    InputError
        If the highland has not that many stations.
    """
    folder = Path(folder)
    scenario = scenario or Scenario()
    if seed is not None:
        scenario = replace(scenario, seed=seed)
    invention = invent(scenario, threads=threads, progress=progress)
    _write_stations(folder / STATIONS_FILE, invention.stations)
    _write_events(folder / EVENTS_FILE, invention.seismicity)
    _write_picks(folder / PICKS_FILE, invention)
    truth = DemoTruth.of(invention)
    truth.write_json(folder / TRUTH_FILE)
    if truth_netcdf:
        invention.model.write_netcdf(folder / TRUTH_MODEL_FILE)
    return truth


def _write_stations(path: Path, stations: Stations) -> None:
    names = {place.code: place.name for place in PLACES}
    rows = (
        (network, code, f"{latitude:.5f}", f"{longitude:.5f}", f"{elevation:.0f}", names[code])
        for network, code, latitude, longitude, elevation in zip(
            stations.network,
            stations.station,
            stations.latitude_deg,
            stations.longitude_deg,
            stations.elevation_m,
            strict=True,
        )
    )
    header = ("network", "station", "latitude", "longitude", "elevation_m", "place")
    _write_table(path, header, rows)


def _write_events(path: Path, seismicity: Seismicity) -> None:
    catalogue = seismicity.catalogue
    rows = (
        (event, time, f"{latitude:.3f}", f"{longitude:.3f}", f"{depth:.1f}", f"{size:.1f}", region)
        for event, time, latitude, longitude, depth, size, region in zip(
            catalogue.event,
            _stamps(catalogue.time),
            catalogue.latitude_deg,
            catalogue.longitude_deg,
            catalogue.depth_km,
            catalogue.magnitude,
            seismicity.region,
            strict=True,
        )
    )
    header = ("event", "time", "latitude", "longitude", "depth_km", "magnitude", "region")
    _write_table(path, header, rows)


def _write_picks(path: Path, invention: Invention) -> None:
    recordings, stations = invention.recordings, invention.stations
    origin = invention.seismicity.true.time[recordings.event_index]
    travel = np.round(invention.travel_s * 1e9).astype("timedelta64[ns]")
    rows = (
        (event, network, code, PHASE, time, f"{uncertainty:g}")
        for event, network, code, time, uncertainty in zip(
            invention.seismicity.true.event[recordings.event_index],
            stations.network[recordings.station_index],
            stations.station[recordings.station_index],
            _stamps(origin + travel),
            invention.errors.uncertainty_s,
            strict=True,
        )
    )
    _write_table(path, ("event", "network", "station", "phase", "time", "uncertainty_s"), rows)


def _stamps(time: NDArray[np.datetime64]) -> list[str]:
    """ISO 8601 times in UTC, rounded to the millisecond."""
    rounded = (time + np.timedelta64(500, "us")).astype("datetime64[ms]")
    return [f"{stamp}Z" for stamp in np.datetime_as_string(rounded)]


def _write_table(path: Path, header: Sequence[str], rows: Iterable[Sequence[str]]) -> None:
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(header)
    writer.writerows(rows)
    write_text(path, text.getvalue())

"""Reading one survey in each format it may come in: time and memory."""

from __future__ import annotations

import tempfile
import warnings
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from statistics import median
from typing import Any, Final

import numpy as np

import rayloom as rl
from bench.isolation import Isolated, run_isolated
from bench.report import Report
from bench.stopwatch import REPEATS
from bench.surveys import distant_events, network
from rayloom.earth import distance_azimuth_deg, geocentric_latitude_deg
from rayloom.survey import Picks, Survey, read_survey

FORMS: Final = {
    "CSV": "csv",
    "pandas frames": "frames",
    "FDSN text, picks as CSV": "fdsn",
    "StationXML and QuakeML": "xml",
    "obspy alone, StationXML and QuakeML": "obspy",
}


def run(*, quick: bool, output: Path) -> Report:
    """Measure reading, each form and repeat in a process of its own."""
    counts = (12, 20) if quick else (60, 300)
    report = Report(
        "Reading one survey",
        {"stations": counts[0], "events": counts[1], "picks": counts[0] * counts[1]},
    )
    table = report.table(
        "Each form in a process of its own",
        "form",
        "files (MB)",
        "wall (s)",
        "CPU (s)",
        "picks per CPU second",
        "increase of peak memory (MiB)",
        "picks read",
    )
    with tempfile.TemporaryDirectory() as folder:
        sizes = _write(_survey(*counts), Path(folder) / "whole")
        _write(_survey(5, 3), Path(folder) / "small")
        for title, form in FORMS.items():
            done = [
                run_isolated("bench.reading:prepare", folder=folder, form=form)
                for _ in range(REPEATS)
            ]
            table.add(title, sizes[form] / 1e6, *_measures(done))
    report.remarks += [
        "CPU counts user and system time of the reading alone, without imports; a "
        "small survey is read before.",
        "obspy alone makes its objects of every element and checks nothing; rayloom hands it the "
        "file in pieces without what is not needed, and checks every value. QuakeML is read twice "
        "by rayloom, once for events and once for picks.",
    ]
    return report


def prepare(*, folder: str, form: str) -> Callable[[], dict[str, Any]]:
    """Read a small survey, so that everything is imported, and return the reading as a call."""
    _reading(Path(folder) / "small", form)()
    return _reading(Path(folder) / "whole", form)


def _reading(folder: Path, form: str) -> Callable[[], dict[str, Any]]:
    paths = {name: str(folder / file) for name, file in _FILES.get(form, {}).items()}
    if form in ("xml", "obspy"):
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            from obspy import read_events, read_inventory
    if form == "obspy":

        def plain() -> dict[str, Any]:
            read_inventory(paths["stations"], format="STATIONXML")
            catalogue = read_events(paths["events"], format="QUAKEML")
            return {"picks": sum(len(event.picks) for event in catalogue)}

        return plain
    source: dict[str, Any] = paths
    if form == "frames":
        import pandas as pd

        text = {"event": str, "station": str, "network": str}
        named = _FILES["csv"].items()
        source = {name: pd.read_csv(folder / file, dtype=text) for name, file in named}
    return lambda: {"picks": len(read_survey(**source).picks)}


_FILES: Final = {
    "csv": {"stations": "stations.csv", "events": "events.csv", "picks": "picks.csv"},
    "fdsn": {"stations": "stations.txt", "events": "events.txt", "picks": "picks.csv"},
    "xml": {"stations": "stations.xml", "events": "catalogue.xml", "picks": "catalogue.xml"},
    "obspy": {"stations": "stations.xml", "events": "catalogue.xml"},
}


def _measures(done: list[Isolated]) -> tuple[float | int, ...]:
    cpu_s = median(one.cpu_s for one in done)
    picks = int(done[0].result["picks"])
    return (
        median(one.wall_s for one in done),
        cpu_s,
        picks / cpu_s,
        max(one.increase_mib for one in done),
        picks,
    )


def _write(survey: Survey, folder: Path) -> dict[str, int]:
    """Write the survey in every form and return the bytes of each."""
    from tests.survey_files import write_csv, write_fdsn, write_xml

    folder.mkdir()
    write_csv(survey, folder)
    write_fdsn(survey, folder)
    write_xml(survey, folder)
    sizes = {
        form: sum((folder / file).stat().st_size for file in {*files.values()})
        for form, files in _FILES.items()
    }
    return {**sizes, "frames": sizes["csv"]}


def _survey(stations: int, events: int) -> Survey:
    frame = rl.Frame(longitude=12.0, latitude=-31.0)
    places = network(frame, stations, (3.0, 3.0), 1)
    sources = distant_events(frame, events, (35.0, 85.0), 2)
    origin = sources.time + np.arange(events) * np.timedelta64(7_200_500, "ms")
    sources = replace(sources, time=origin, magnitude=np.full(events, 6.0))
    event, station = (index.ravel() for index in np.indices((events, stations)))
    distance_deg = distance_azimuth_deg(
        geocentric_latitude_deg(sources.latitude_deg)[event],
        sources.longitude_deg[event],
        geocentric_latitude_deg(places.latitude_deg)[station],
        places.longitude_deg[station],
    ).distance_deg
    travel_s = rl.ReferenceEarth("ak135").travel_time("P", distance_deg, sources.depth_km[event])
    late = np.round(travel_s * 1e3).astype("timedelta64[ms]")
    picks = Picks(
        event_index=event,
        station_index=station,
        phase=np.full(len(event), "P"),
        time=sources.time[event] + late,
        uncertainty_s=np.full(len(event), 0.1),
    )
    return Survey(places, sources, picks)

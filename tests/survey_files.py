"""One survey written as CSV, as StationXML and QuakeML, and as text of FDSN web services."""

from __future__ import annotations

import warnings
from pathlib import Path

import numpy as np

from rayloom.earth import ReferenceEarth, distance_azimuth_deg, geocentric_latitude_deg
from rayloom.survey import Events, Picks, Stations, Survey

with warnings.catch_warnings():
    warnings.simplefilter("ignore")
    from obspy import Catalog, Inventory, UTCDateTime
    from obspy.core.event import (
        Arrival,
        Event,
        Magnitude,
        Origin,
        Pick,
        ResourceIdentifier,
        WaveformStreamID,
    )
    from obspy.core.inventory import Channel, Network, Station

MOVED = np.datetime64("2019-06-01T00:00:00", "ns")


def times(*texts: str) -> np.ndarray:
    return np.array(texts, dtype="datetime64[ns]")


def example_survey() -> Survey:
    """Seven stations (one moved, one buried, one on the sea floor), four events, P and S."""
    stations = Stations(
        network=np.array(["XA", "XA", "XA", "XA", "XA", "XB", "XB", "XB"]),
        station=np.array(["ALP", "ALP", "BET", "GAM", "DEL", "EPS", "SEA", "ZET"]),
        latitude_deg=np.array([44.1, 44.25, 44.9, 45.3, 46.0, 45.6, 43.2, 44.4]),
        longitude_deg=np.array([7.2, 7.3, 8.15, 6.9, 9.1, 10.0, 8.6, 11.25]),
        elevation_m=np.array([1200.0, 1234.5, 350.0, 2750.0, 12.0, 80.0, -2410.0, 0.0]),
        burial_m=np.array([0.0, 0.0, 0.0, 0.0, 0.0, 120.0, 0.0, 2.5]),
        start=np.concatenate([times("2018-01-01"), [MOVED], [np.datetime64("NaT")] * 6]),
        end=np.concatenate([[MOVED], [np.datetime64("NaT")] * 7]),
    )
    events = Events(
        event=np.array(["quake1", "quake2", "20190707_42", "e4"]),
        time=times(
            "2019-03-07T04:05:04.506",
            "2019-05-12T23:59:59.999",
            "2019-07-07T12:00:00",
            "2019-12-31T23:55:00.125",
        ),
        latitude_deg=np.array([36.5, 51.77, 41.2, 13.3]),
        longitude_deg=np.array([70.7, -175.5, 142.8, -60.9]),
        depth_km=np.array([210.3, 33.0, 59.7, 0.0]),
        magnitude=np.array([6.1, 6.8, 5.9, 6.0]),
    )
    return Survey(stations, events, _example_picks(stations, events))


def _example_picks(stations: Stations, events: Events) -> Picks:
    random = np.random.default_rng(4)
    event, station = (index.ravel() for index in np.indices((len(events), len(stations))))
    before = events.time[event] < MOVED
    recorded = ~((station == 0) & ~before | (station == 1) & before)
    event, station = (np.repeat(index[recorded], 2) for index in (event, station))
    phase = np.tile(["P", "S"], len(event) // 2)
    latitude = [geocentric_latitude_deg(t.latitude_deg) for t in (events, stations)]
    distance = distance_azimuth_deg(
        latitude[0][event],
        events.longitude_deg[event],
        latitude[1][station],
        stations.longitude_deg[station],
    ).distance_deg
    earth = ReferenceEarth("ak135")
    travel_s = np.empty(len(event))
    for name in ("P", "S"):
        rows = phase == name
        travel_s[rows] = earth.travel_time(name, distance[rows], events.depth_km[event[rows]])
    travel_s += random.normal(0.0, 0.4, len(event))
    kept = np.isfinite(travel_s)
    late = np.round(travel_s[kept] * 1000.0).astype("timedelta64[ms]")
    return Picks(
        event_index=event[kept],
        station_index=station[kept],
        phase=phase[kept],
        time=events.time[event[kept]] + late,
        uncertainty_s=random.choice([0.05, 0.1, 0.25], int(kept.sum())),
    )


def write_csv(survey: Survey, folder: Path) -> dict[str, Path]:
    frames = {
        "stations": survey.stations.to_frame(),
        "events": survey.events.to_frame(),
        "picks": survey.picks.to_frame(survey.stations, survey.events),
    }
    paths = {name: folder / f"{name}.csv" for name in frames}
    for name, frame in frames.items():
        frame.to_csv(paths[name], index=False)
    return paths


def write_xml(survey: Survey, folder: Path) -> dict[str, Path]:
    """StationXML with several channels a station, and QuakeML, both by obspy."""
    paths = {"stations": folder / "stations.xml", "events": folder / "catalogue.xml"}
    inventory(survey.stations).write(str(paths["stations"]), format="STATIONXML")
    catalogue(survey).write(str(paths["events"]), format="QUAKEML")
    return {**paths, "picks": paths["events"]}


def inventory(stations: Stations) -> Inventory:
    networks = [Network(code) for code in np.unique(stations.network)]
    for row in range(len(stations)):
        network = next(one for one in networks if one.code == stations.network[row])
        network.stations.append(_station(stations, row))
    return Inventory(networks=networks, source="test")


def _station(stations: Stations, row: int) -> Station:
    place = {
        "latitude": float(stations.latitude_deg[row]),
        "longitude": float(stations.longitude_deg[row]),
    }
    epoch = {
        "start_date": moment(stations.start[row]),
        "end_date": moment(stations.end[row]),
    }
    surface_m, burial_m = float(stations.elevation_m[row]), float(stations.burial_m[row])
    sensor = {"elevation": surface_m - burial_m, "depth": burial_m}
    channels = [
        Channel(code, location, **place, **sensor, **epoch)
        for location, code in (("00", "HHZ"), ("00", "HHN"), ("10", "BHZ"))
    ]
    channels.append(Channel("LOG", "", **place, elevation=surface_m, depth=0.0, **epoch))
    return Station(
        str(stations.station[row]), **place, elevation=surface_m, channels=channels, **epoch
    )


def catalogue(survey: Survey) -> Catalog:
    return Catalog([_event(survey, row) for row in range(len(survey.events))])


def _event(survey: Survey, row: int) -> Event:
    events, stations, picks = survey.events, survey.stations, survey.picks
    name = events.event[row]
    made = []
    arrivals = []
    for number in np.flatnonzero(picks.event_index == row).tolist():
        station = picks.station_index[number]
        identifier = ResourceIdentifier(f"smi:local/pick/{name}/{number}")
        pick = Pick(
            resource_id=identifier,
            time=moment(picks.time[number]),
            waveform_id=WaveformStreamID(
                str(stations.network[station]), str(stations.station[station]), "00", "HHZ"
            ),
        )
        pick.time_errors.uncertainty = float(picks.uncertainty_s[number])
        made.append(pick)
        arrivals.append(Arrival(pick_id=identifier, phase=str(picks.phase[number])))
    origin = Origin(
        resource_id=ResourceIdentifier(f"smi:local/origin/{name}"),
        time=moment(events.time[row]),
        latitude=float(events.latitude_deg[row]),
        longitude=float(events.longitude_deg[row]),
        depth=float(events.depth_km[row]) * 1000.0,
        arrivals=arrivals,
    )
    first = Origin(time=moment(events.time[row]) - 30, latitude=0.0, longitude=0.0, depth=1000.0)
    return Event(
        resource_id=ResourceIdentifier(f"smi:local/event/{name}"),
        origins=[first, origin],
        preferred_origin_id=origin.resource_id,
        magnitudes=[Magnitude(mag=float(events.magnitude[row]))],
        picks=made,
    )


def moment(time: np.datetime64) -> UTCDateTime | None:
    return None if np.isnat(time) else UTCDateTime(ns=int(time.astype(np.int64)))


def write_fdsn(survey: Survey, folder: Path) -> dict[str, Path]:
    """Text as of the services station (level=channel) and event."""
    stations, events = survey.stations, survey.events
    lines = [
        "#Network | Station | Location | Channel | Latitude | Longitude | Elevation | Depth | "
        "Azimuth | Dip | SensorDescription | Scale | ScaleFreq | ScaleUnits | SampleRate | "
        "StartTime | EndTime"
    ]
    for row in range(len(stations)):
        burial_m = float(stations.burial_m[row])
        place = f"{stations.latitude_deg[row]!s}|{stations.longitude_deg[row]!s}"
        sensor = f"{float(stations.elevation_m[row]) - burial_m}|{burial_m}"
        epoch = "|".join(_fdsn_time(t[row]) for t in (stations.start, stations.end))
        codes = f"{stations.network[row]}|{stations.station[row]}"
        lines += [
            f'{codes}|00|HH{part}|{place}|{sensor}|0|-90|a "broad" band, 120 s|1|1|M/S|100|{epoch}'
            for part in "ZNE"
        ]
    paths = {"stations": folder / "stations.txt", "events": folder / "events.txt"}
    paths["stations"].write_text("\n".join(lines) + "\n")
    lines = [
        "#EventID | Time | Latitude | Longitude | Depth/km | Author | Catalog | Contributor | "
        "ContributorID | MagType | Magnitude | MagAuthor | EventLocationName"
    ]
    for row in range(len(events)):
        place = "|".join(
            str(float(column[row]))
            for column in (events.latitude_deg, events.longitude_deg, events.depth_km)
        )
        lines.append(
            f"{events.event[row]}|{_fdsn_time(events.time[row])}|{place}|ab|CAT|C|17|Mw|"
            f"{events.magnitude[row]}|ab|SOMEWHERE, O'HARE"
        )
    paths["events"].write_text("\n".join(lines) + "\n")
    return paths


def _fdsn_time(time: np.datetime64) -> str:
    return "" if np.isnat(time) else str(time.astype("datetime64[us]"))

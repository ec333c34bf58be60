"""Summary rays: one residual per cluster of events, station and phase."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from rayloom.earth import ReferenceEarth, distance_azimuth_deg, geocentric_latitude_deg
from rayloom.errors import FileProblemsError
from rayloom.residuals import Residuals, ResidualSettings, summarise_rays
from rayloom.residuals.event_clusters import split_unconnected
from rayloom.survey import Events, Stations
from rayloom.workflow import Reporter, RunFolder, run_step
from rayloom.workflow.data import read_back_residuals, read_earth
from run_folder_cases import write_run_folder, write_small_survey

STATIONS = 8
EARTH = ReferenceEarth("ak135")


def stations() -> Stations:
    number = np.arange(STATIONS)
    return Stations(
        network=np.full(STATIONS, "XX"),
        station=np.array([f"S{n}" for n in number]),
        latitude_deg=-31.0 + 0.1 * number,
        longitude_deg=12.0 + 0.2 * number,
        elevation_m=np.zeros(STATIONS),
    )


def events(latitude_deg, longitude_deg, depth_km=33.0) -> Events:
    count = len(latitude_deg)
    return Events(
        event=np.array([f"E{n:02d}" for n in range(count)]),
        time=np.datetime64("2020-01-01", "ns") + np.arange(count) * np.timedelta64(1, "D"),
        latitude_deg=np.asarray(latitude_deg, dtype=float),
        longitude_deg=np.asarray(longitude_deg, dtype=float),
        depth_km=np.broadcast_to(depth_km, count).astype(float),
        magnitude=np.full(count, 6.0),
    )


def data_of(table: Events, event, station, residual_s, uncertainty_s=0.1, phase="P") -> Residuals:
    event, station = np.asarray(event), np.asarray(station)
    count = len(event)
    nothing = np.zeros(count)
    return Residuals(
        stations=stations(),
        events=table,
        earth=EARTH,
        event_index=event,
        station_index=station,
        phase=np.broadcast_to(phase, count).astype(np.str_),
        wave=np.full(count, "P"),
        residual_s=np.asarray(residual_s, dtype=float),
        uncertainty_s=np.broadcast_to(uncertainty_s, count).astype(float),
        distance_deg=nothing + 50.0,
        azimuth_deg=nothing,
        back_azimuth_deg=nothing,
        predicted_s=nothing + 500.0,
        ellipticity_s=nothing,
        elevation_s=nothing,
    )


def swarm(count: int) -> Events:
    """Events within a few km, and one a thousand km away."""
    return events([*(20.0 + 0.01 * np.arange(count)), 30.0], [*([60.0] * count), 60.0])


def test_with_every_station_at_every_event_it_is_the_mean_and_the_stated_formula() -> None:
    """σ² = σ_pick²/k + σ_sys² and the mean of k residuals, by hand."""
    random = np.random.default_rng(8)
    event, station = (grid.ravel() for grid in np.indices((4, STATIONS)))
    residual_s = random.normal(0.0, 0.1, 4 * STATIONS) + np.array([3.0, -2.0, 0.5, 0.0])[event]
    summary = summarise_rays(
        data_of(swarm(3), event, station, residual_s), distance_km=20.0, systematic_s=0.07
    )
    data = summary.data
    assert data.events.event.tolist() == ["E00+2", "E03"]
    together = data.event_index == 0
    np.testing.assert_array_equal(data.station_index[together], np.arange(STATIONS))
    expected_s = residual_s.reshape(4, STATIONS)[:3].mean(axis=0)
    np.testing.assert_allclose(data.residual_s[together], expected_s, atol=1e-12)
    np.testing.assert_allclose(
        data.uncertainty_s[together], np.sqrt(0.1**2 / 3 + 0.07**2), rtol=1e-12
    )
    np.testing.assert_allclose(data.residual_s[~together], residual_s[3 * STATIONS :], atol=1e-12)
    np.testing.assert_allclose(data.uncertainty_s[~together], np.hypot(0.1, 0.07), rtol=1e-12)
    np.testing.assert_array_equal(summary.picks_per_row, [3] * STATIONS + [1] * STATIONS)
    assert summary.downweighted == 0


def incomplete(seed: int, *, noise: float = 1.0):
    random = np.random.default_rng(seed)
    event, station = (grid.ravel() for grid in np.indices((6, STATIONS)))
    kept = random.random(len(event)) < 0.6
    event, station = event[kept], station[kept]
    uncertainty_s = random.uniform(0.05, 0.3, len(event))
    structure_s, means_s = random.normal(0.0, 0.4, STATIONS), random.normal(0.0, 2.0, 6)
    error_s = noise * uncertainty_s * np.clip(random.standard_normal(len(event)), -2.0, 2.0)
    return (
        event,
        station,
        structure_s[station] + means_s[event] + error_s,
        uncertainty_s,
        structure_s,
    )


def test_with_gaps_it_is_the_weighted_least_squares_fit() -> None:
    """Against numpy.linalg.lstsq of the design with a column per event and per station."""
    event, station, residual_s, sigma_s, _ = incomplete(9)
    data = summarise_rays(
        data_of(
            events([20.0 + 0.01 * n for n in range(6)], [60.0] * 6),
            event,
            station,
            residual_s,
            sigma_s,
        ),
        distance_km=20.0,
    ).data
    design = np.zeros((len(event), 6 + STATIONS))
    design[np.arange(len(event)), event] = 1.0
    design[np.arange(len(event)), 6 + station] = 1.0
    solution = np.linalg.lstsq(design / sigma_s[:, None], residual_s / sigma_s, rcond=None)[0]
    expected_s = solution[6:]
    np.testing.assert_allclose(
        data.residual_s - data.residual_s.mean(), expected_s - expected_s.mean(), atol=1e-9
    )
    picks_variance = 1.0 / np.bincount(station, 1.0 / sigma_s**2)
    np.testing.assert_allclose(data.uncertainty_s, np.sqrt(picks_variance + 0.05**2), rtol=1e-12)


def test_gaps_do_not_leak_event_means_into_the_stations() -> None:
    """Without noise the structure comes back exactly, though means differ by seconds."""
    event, station, residual_s, sigma_s, structure_s = incomplete(10, noise=0.0)
    table = events([20.0 + 0.01 * n for n in range(6)], [60.0] * 6)
    data = summarise_rays(
        data_of(table, event, station, residual_s, sigma_s), distance_km=20.0
    ).data
    found_s = data.residual_s - data.residual_s.mean()
    np.testing.assert_allclose(found_s, structure_s - structure_s.mean(), atol=1e-9)


def test_the_order_of_rows_and_events_does_not_matter() -> None:
    event, station, residual_s, sigma_s, _ = incomplete(11)
    table = events([20.0 + 0.05 * n for n in range(6)], [60.0] * 6)
    first = summarise_rays(data_of(table, event, station, residual_s, sigma_s), distance_km=15.0)
    random = np.random.default_rng(12)
    rows, renumbered = random.permutation(len(event)), random.permutation(6)
    place = np.argsort(renumbered)
    second = summarise_rays(
        data_of(
            table.select(renumbered),
            place[event[rows]],
            station[rows],
            residual_s[rows],
            sigma_s[rows],
        ),
        distance_km=15.0,
    )
    assert len(first.data.events) > 1
    pd.testing.assert_frame_equal(first.data.to_frame(), second.data.to_frame())
    pd.testing.assert_frame_equal(first.members, second.members)


def test_an_outlier_hardly_moves_the_summary_and_is_counted() -> None:
    event, station = (grid.ravel() for grid in np.indices((5, STATIONS)))
    residual_s = 0.3 * (station % 2) + event
    residual_s[3 * STATIONS + 2] += 3.0
    table = events([20.0 + 0.01 * n for n in range(5)], [60.0] * 5)
    summary = summarise_rays(
        data_of(table, event, station, residual_s), distance_km=20.0, systematic_s=0.0
    )
    found_s = summary.data.residual_s - np.median(summary.data.residual_s[::2])
    assert summary.downweighted == 1
    assert abs(found_s[2]) < 0.1
    assert summary.data.uncertainty_s[2] > summary.data.uncertainty_s[0]


def test_no_two_events_of_a_cluster_lie_further_apart_than_asked() -> None:
    random = np.random.default_rng(13)
    count, limit_km = 60, 80.0
    table = events(
        20.0 + random.uniform(-2, 2, count),
        60.0 + random.uniform(-2, 2, count),
        random.uniform(0, 150, count),
    )
    event = np.arange(count).repeat(STATIONS)
    station = np.tile(np.arange(STATIONS), count)
    members = summarise_rays(
        data_of(table, event, station, np.zeros(len(event))), distance_km=limit_km
    ).members
    assert len(members) == count
    for _, inside in members.groupby("cluster"):
        for _, one in inside.iterrows():
            apart_deg = distance_azimuth_deg(
                geocentric_latitude_deg(one["latitude"]),
                one["longitude"],
                geocentric_latitude_deg(inside["latitude"].to_numpy()),
                inside["longitude"].to_numpy(),
            ).distance_deg
            apart_km = np.hypot(apart_deg * 111.195, inside["depth_km"] - one["depth_km"])
            assert (apart_km * 0.97 <= limit_km).all()
    assert 5 < members["cluster"].nunique() < 40
    assert (members["picks"] == STATIONS).all()


def test_events_without_a_common_station_stay_apart() -> None:
    cluster = split_unconnected(
        np.zeros(4, dtype=np.int64),
        np.array([0, 0, 1, 1, 2, 2, 3, 3]),
        np.array([0, 1, 1, 2, 5, 6, 6, 7]),
        np.zeros(8, dtype=np.int64),
    )
    assert cluster.tolist() == [0, 0, 1, 1]
    both = split_unconnected(
        np.zeros(3, dtype=np.int64),
        np.array([0, 1, 2, 0, 1]),
        np.array([0, 0, 0, 1, 2]),
        np.array([0, 0, 0, 1, 1]),
    )
    assert both.tolist() == [0, 1, 0]


def test_phases_are_summed_up_by_themselves_and_lie_at_the_mean_place() -> None:
    event, station = (grid.ravel() for grid in np.indices((2, STATIONS)))
    table = events([20.0, 20.2], [179.95, -179.95], np.array([30.0, 40.0]))
    phase = np.where(station < 5, "P", "PcP")
    data = summarise_rays(
        data_of(table, event, station, np.where(phase == "P", 0.1, 0.9), phase=phase),
        distance_km=60.0,
    ).data
    assert data.events.event.tolist() == ["E00+1"]
    assert data.events.latitude_deg[0] == pytest.approx(20.1, abs=1e-4)
    assert abs(data.events.longitude_deg[0]) == pytest.approx(180.0, abs=1e-3)
    assert data.events.depth_km[0] == 35.0
    assert sorted(
        {*zip(data.phase.tolist(), data.residual_s.round(12).tolist(), strict=True)}
    ) == [
        ("P", 0.1),
        ("PcP", 0.9),
    ]


class Listener(Reporter):
    """Remembers why steps begin and what was noted."""

    def __init__(self) -> None:
        self.reasons: dict[str, str] = {}
        self.notes: list[str] = []

    def begin(self, step: str, reason: str) -> None:
        self.reasons[step] = reason

    def note(self, text: str) -> None:
        self.notes.append(text)


def test_a_run_sums_up_on_request_and_keeps_the_residuals_of_single_events(tmp_path: Path) -> None:
    """Two of ten events are moved to one place; their picks stay, off by minutes."""
    files = write_small_survey(tmp_path / "survey")
    rows = pd.read_csv(files.events)
    rows.loc[1, ["latitude", "longitude"]] = rows.loc[0, ["latitude", "longitude"]] + [0.1, 0.1]
    rows.to_csv(files.events, index=False)
    folder = write_run_folder(tmp_path / "run", files)
    settings = folder / "rayloom.toml"
    text = settings.read_text(encoding="utf-8").replace("= 2", "= 1", 1)
    text += "\n[residuals]\nmax_residual_s = 3000.0\n"
    settings.write_text(text, encoding="utf-8")
    run_step(folder, "residuals")
    before = (folder / "residuals.csv").read_bytes()
    settings.write_text(f"{text}summary_distance_km = 40.0\n", encoding="utf-8")
    listener = Listener()
    assert not run_step(folder, "residuals", reporter=listener)
    run_step(folder, "invert", reporter=listener)
    assert (folder / "residuals.csv").read_bytes() == before
    assert any(
        "120 residuals of 10 events summed up to 108 of 9" in note for note in listener.notes
    )
    clusters = pd.read_csv(folder / "summary_clusters.csv")
    assert clusters["cluster"].value_counts()["E0+1"] == 2
    after = pd.read_csv(folder / "residuals_after.csv")
    assert len(after) == 108
    opened = RunFolder(folder)
    chosen = opened.read_settings()
    data = read_back_residuals(opened, read_earth(opened, "ak135"), chosen)
    assert len(data.residual_s) == 108


def test_settings_that_make_no_sense_are_refused(tmp_path: Path) -> None:
    assert ResidualSettings().summary_distance_km is None
    folder = write_run_folder(tmp_path / "run", write_small_survey(tmp_path / "survey"))
    settings = folder / "rayloom.toml"
    text = settings.read_text(encoding="utf-8")
    settings.write_text(f"{text}\n[residuals]\nsummary_distance_km = -5\n", encoding="utf-8")
    with pytest.raises(FileProblemsError, match=r"residuals\.summary_distance_km: got -5"):
        RunFolder(folder).read_settings()

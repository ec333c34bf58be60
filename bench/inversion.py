"""A whole inversion of residuals that the tracer itself made in a known model."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from statistics import median
from typing import Any

import numpy as np
from numpy.typing import NDArray

import rayloom as rl
from bench.isolation import Isolated, run_isolated
from bench.models import box_grid, roughened
from bench.report import Report
from bench.stopwatch import REPEATS
from bench.surveys import distant_events, network
from rayloom.earth import distance_azimuth_deg, geocentric_latitude_deg
from rayloom.forward import Rays, trace_distant
from rayloom.inversion import InversionSettings, invert
from rayloom.residuals import Residuals
from rayloom.survey import Events, Stations

Floats = NDArray[np.float64]
THREADS = 2
NOISE_S = 0.05
BLOCK_KM = 20.0
DISTANCES_DEG = (36.0, 90.0)
WELL_CROSSED = 20


def run(*, quick: bool, output: Path) -> Report:
    """Measure time, peak memory and what comes back of the truth."""
    shape, counts = ((22, 22, 10), (15, 20)) if quick else ((40, 40, 20), (50, 100))
    report = Report(
        "Whole inversion, default settings, bent rays",
        {
            "blocks": int(np.prod(shape)),
            "residuals": counts[0] * counts[1],
            "noise (s)": NOISE_S,
            "threads": THREADS,
        },
    )
    table = report.table(
        "Each run in a process of its own",
        "run",
        "wall (s)",
        "CPU (s)",
        "increase of peak memory (MiB)",
        "models solved for",
        "variance reduction (%)",
        "correlation with the truth",
        "sd of what is left (ms)",
    )
    arguments = {"shape": shape, "stations": counts[0], "events": counts[1]}
    done = [run_isolated("bench.inversion:prepare", **arguments) for _ in range(REPEATS)]
    keys = ("models", "variance_reduction", "correlation", "left_ms")
    for number, one in enumerate(done):
        values = [one.result[key] for key in keys]
        table.add(number + 1, one.wall_s, one.cpu_s, one.increase_mib, *values)
    report.remarks += _remarks(done)
    return report


def _remarks(done: list[Isolated]) -> list[str]:
    walls = median(one.wall_s for one in done)
    return [
        f"Median wall time {walls:.1f} s; stopped because {done[0].result['stopped']}.",
        f"Correlation over blocks crossed by at least {WELL_CROSSED} rays. The data come from "
        "the same tracer and blocks, so that resolution, not tracing, limits it.",
    ]


def prepare(shape: list[int], stations: int, events: int) -> Callable[[], dict[str, Any]]:
    """Make the data; return the inversion of them."""
    data, model, truth = survey_of_truth(shape, stations, events)
    settings = InversionSettings(threads=THREADS)

    def work() -> dict[str, Any]:
        result = invert(data, model, settings)
        crossed = result.model.fields["hits"] >= WELL_CROSSED
        found = result.model.perturbation_percent[crossed]
        return {
            "models": len(result.history) - 1,
            "variance_reduction": result.history[-1].variance_reduction_percent,
            "correlation": float(np.corrcoef(found, truth.perturbation_percent[crossed])[0, 1]),
            "left_ms": 1e3 * float(np.nanstd(result.residual_after_s)),
            "stopped": result.stopped_because,
        }

    return work


def survey_of_truth(
    shape: list[int], stations: int, events: int
) -> tuple[Residuals, rl.SlownessModel, rl.SlownessModel]:
    """Trace a smooth truth of 4 %; return the residuals, the reference and the truth."""
    nx, ny, nz = shape
    earth = rl.ReferenceEarth("ak135")
    grid = box_grid((nx, ny, nz), BLOCK_KM, sphere=True, top_km=-3.0)
    model = rl.SlownessModel.from_earth(grid, earth)
    truth = roughened(model, "smooth", 4.0, seed=81)
    half = grid.x_edges[-1] - 1.5
    places = network(grid.frame, stations, (half, half), seed=82)
    sources = distant_events(grid.frame, events, DISTANCES_DEG, seed=83)
    return _residuals(model, truth, earth, sources, places), model, truth


def _residuals(
    model: rl.SlownessModel,
    truth: rl.SlownessModel,
    earth: rl.ReferenceEarth,
    events: Events,
    stations: Stations,
) -> Residuals:
    options: dict[str, Any] = {"threads": THREADS}
    reference = trace_distant(model, earth, events, stations, **options)
    true = trace_distant(truth, earth, events, stations, quality="thorough", **options)
    kept = np.flatnonzero(reference.traced & true.traced)
    noise_s = np.random.default_rng(84).normal(0.0, NOISE_S, kept.size)
    return residual_table(
        reference,
        kept,
        (true.time_s - reference.time_s)[kept] + noise_s,
        (earth, events, stations),
    )


def residual_table(
    reference: Rays,
    kept: NDArray[np.int64],
    residual_s: Floats,
    survey: tuple[rl.ReferenceEarth, Events, Stations],
) -> Residuals:
    """Lay residuals of traced rays out as a table; only what an inversion reads is filled."""
    earth, events, stations = survey
    event, station = np.divmod(kept, len(stations))
    path = distance_azimuth_deg(
        geocentric_latitude_deg(events.latitude_deg)[event],
        events.longitude_deg[event],
        geocentric_latitude_deg(stations.latitude_deg)[station],
        stations.longitude_deg[station],
    )
    return Residuals(
        stations=stations,
        events=events,
        earth=earth,
        event_index=event,
        station_index=station,
        phase=np.full(kept.size, "P"),
        wave=np.full(kept.size, "P"),
        residual_s=residual_s,
        uncertainty_s=np.full(kept.size, NOISE_S),
        distance_deg=path.distance_deg,
        azimuth_deg=path.azimuth_deg,
        back_azimuth_deg=path.back_azimuth_deg,
        predicted_s=reference.time_s[kept],
        ellipticity_s=np.zeros(kept.size),
        elevation_s=np.zeros(kept.size),
    )

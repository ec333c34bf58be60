"""The whole job: 36,000 rays of distant events through 150,000 blocks on the sphere."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from statistics import median
from typing import Any

import numpy as np

import rayloom as rl
from bench.isolation import run_isolated
from bench.models import box_grid, roughened
from bench.report import Report, Table
from bench.stopwatch import REPEATS, clock
from bench.surveys import distant_events, network
from rayloom.forward import trace_distant
from rayloom.survey import Events, Stations

THREADS = 2
CORRELATION_KM = 60.0
TOP_KM = -3.0
CHANGE_PERCENT = 0.4
DISTANCES_DEG = (36.0, 90.0)
LEAST_INSIDE_DEG = 1.5
WALL_LIMITS_S = {"standard": 90.0, "thorough": 180.0}
MEMORY_LIMIT_MIB = 200.0
RETRACING_LIMIT = 0.6


@dataclass(frozen=True)
class Size:
    """How large a job is."""

    shape: tuple[int, int, int]
    stations: int
    events: int


FULL = Size((75, 50, 40), 120, 300)
QUICK = Size((40, 40, 20), 12, 20)


def run(*, quick: bool, output: Path) -> Report:
    """Measure time and peak memory of both quality levels, each in its own process."""
    size = QUICK if quick else FULL
    blocks, rays = int(np.prod(size.shape)), size.stations * size.events
    report = Report(
        "Distant events on the sphere, smooth ±4 %, correlation 60 km",
        {"blocks": blocks, "rays": rays, "threads": THREADS},
    )
    table = report.table(
        "Tracing, each run in a process of its own",
        "quality",
        "run",
        "wall (s)",
        "CPU (s)",
        "CPU (ms per ray)",
        "peak memory (MiB)",
        "increase (MiB)",
        "values per ray",
        "points per ray",
        "no ray",
    )
    for quality in WALL_LIMITS_S:
        _trace(report, table, quality, rays, quick=quick)
        _retrace(report, quality, quick=quick)
    return report


def _trace(report: Report, table: Table, quality: str, rays: int, *, quick: bool) -> None:
    done = [
        run_isolated("bench.job:prepare", quick=quick, quality=quality) for _ in range(REPEATS)
    ]
    for number, one in enumerate(done):
        per_ray = 1e3 * one.cpu_s / rays
        result = (one.result[key] for key in ("values", "points", "missing"))
        memory = one.peak_mib, one.increase_mib
        table.add(quality, number + 1, one.wall_s, one.cpu_s, per_ray, *memory, *result)
    wall = median(one.wall_s for one in done)
    increase = median(one.increase_mib for one in done)
    report.at_most(f"{quality}: wall (s)", wall, WALL_LIMITS_S[quality])
    report.at_most(f"{quality}: increase of peak memory (MiB)", increase, MEMORY_LIMIT_MIB)


def _retrace(report: Report, quality: str, *, quick: bool) -> None:
    done = run_isolated("bench.job:prepare_retracing", quick=quick, quality=quality)
    share = done.result["second_cpu_s"] / done.result["first_cpu_s"]
    report.at_most(f"{quality}: retracing over tracing (CPU)", share, RETRACING_LIMIT)
    report.remarks.append(
        f"{quality}: a retracing after a change of ±{CHANGE_PERCENT:g} % took {share:.2f} of "
        f"the first tracing's CPU time; {done.result['jumps']:.0f} rays changed course."
    )


def smooth_case(
    size: Size, block_km: tuple[float, float, float] = (15.0, 15.0, 15.0)
) -> tuple[rl.SlownessModel, Events, Stations]:
    """Return the model, events, and stations at least 1.5° inside."""
    grid = box_grid(size.shape, block_km, sphere=True, top_km=TOP_KM)
    model = rl.SlownessModel.from_earth(grid, rl.ReferenceEarth("ak135"))
    halves = (grid.x_edges[-1] - LEAST_INSIDE_DEG, grid.y_edges[-1] - LEAST_INSIDE_DEG)
    stations = network(grid.frame, size.stations, halves, seed=71)
    events = distant_events(grid.frame, size.events, DISTANCES_DEG, seed=72)
    blocks = CORRELATION_KM / float(np.mean(block_km))
    return roughened(model, "smooth", 4.0, seed=73, correlation=blocks), events, stations


def prepare(quick: bool, quality: str) -> Callable[[], dict[str, Any]]:
    """Prepare one job for a process of its own."""
    model, events, stations = smooth_case(QUICK if quick else FULL)
    earth = rl.ReferenceEarth("ak135")

    def work() -> dict[str, Any]:
        rays = trace_distant(model, earth, events, stations, quality=quality, threads=THREADS)
        return {
            "values": rays.path_lengths.nnz / len(rays),
            "points": len(rays.all_points) / len(rays),
            "missing": int((~rays.traced).sum()),
        }

    return work


def prepare_retracing(quick: bool, quality: str) -> Callable[[], dict[str, Any]]:
    """Prepare a tracing and a retracing in a slightly changed model."""
    model, events, stations = smooth_case(QUICK if quick else FULL)
    changed = roughened(model, "smooth", CHANGE_PERCENT, seed=74)
    earth = rl.ReferenceEarth("ak135")
    options = {"quality": quality, "threads": THREADS}

    def work() -> dict[str, Any]:
        _, first, rays = clock(lambda: trace_distant(model, earth, events, stations, **options))
        _, second, again = clock(
            lambda: trace_distant(changed, earth, events, stations, previous=rays, **options)
        )
        return {"first_cpu_s": first, "second_cpu_s": second, "jumps": again.basin_jumps}

    return work

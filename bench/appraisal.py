"""A full appraisal: samples, probes, restorations, bootstrap and squeezing of one problem."""

from __future__ import annotations

import time
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path
from statistics import median
from typing import Any

import numpy as np

from bench.inversion import survey_of_truth
from bench.isolation import run_isolated
from bench.report import Report
from bench.stopwatch import REPEATS
from rayloom.appraisal import (
    PatternSettings,
    RowSpace,
    event_bootstrap,
    noise_repeats,
    point_spread,
    posterior_samples,
    probe_resolution,
    restore,
)
from rayloom.appraisal.compressed import compress
from rayloom.appraisal.restoration import default_regions_km
from rayloom.appraisal.squeezing import blocks_beyond, squeeze
from rayloom.inversion import InversionSettings, LinearisedProblem, invert, linearise

THREADS = 2
COUNT = 64
BOOTSTRAP = 24
PATTERNS = (
    PatternSettings(name="checkerboard", kind="checkerboard"),
    PatternSettings(name="spikes", kind="spikes"),
)


def run(*, quick: bool, output: Path) -> Report:
    """Measure each part of an appraisal."""
    shape, counts = ((22, 22, 10), (15, 20)) if quick else ((40, 40, 19), (60, 100))
    arguments = {"shape": shape, "stations": counts[0], "events": counts[1]}
    done = run_isolated("bench.appraisal:prepare", **arguments)
    report = Report(
        "Full appraisal of one inversion",
        {
            "blocks": int(np.prod(shape)),
            "residuals": done.result["rows"],
            "parameters resolved": round(done.result["resolved"]),
            "threads": THREADS,
            "increase of peak memory (MiB)": round(done.increase_mib),
        },
    )
    table = report.table(
        f"Medians of {REPEATS} repeats", "part", "wall (s)", "CPU (s)", "slowest / fastest"
    )
    walls = []
    for name, seconds in done.result["parts"].items():
        wall = [pair[0] for pair in seconds]
        walls.append(median(wall))
        table.add(name, median(wall), median(pair[1] for pair in seconds), max(wall) / min(wall))
    table.add("all of it", sum(walls), None, None)
    report.remarks += [
        "Reference rays: how they were traced does not bear on the time of an appraisal.",
        f"The bootstrap inverts {BOOTSTRAP} times one by one, each with weights of its own; "
        "samples, probes and repeats share their solves 16 at a time.",
    ]
    return report


def prepare(shape: list[int], stations: int, events: int) -> Callable[[], dict[str, Any]]:
    """Invert once; return the appraisal of the result."""
    data, model, _ = survey_of_truth(shape, stations, events)
    settings = InversionSettings(threads=THREADS, method="reference", max_iterations=2)
    problem = linearise(invert(data, model, settings), settings)

    def work() -> dict[str, Any]:
        times: dict[str, list[tuple[float, float]]] = {}
        resolved = 0.0
        with ThreadPoolExecutor(THREADS) as executor:
            parts = _parts(problem, executor)
            for _ in range(REPEATS):
                for name, part in parts.items():
                    wall, cpu = time.perf_counter(), time.process_time()
                    found = part()
                    times.setdefault(name, []).append(
                        (time.perf_counter() - wall, time.process_time() - cpu)
                    )
                    resolved = found if isinstance(found, float) else resolved
        return {"parts": times, "rows": problem.rows.count, "resolved": resolved}

    return work


def _parts(
    problem: LinearisedProblem, executor: ThreadPoolExecutor
) -> dict[str, Callable[[], object]]:
    grid = problem.model.grid
    covered = problem.model.fields["hits"] >= 5
    regions = default_regions_km(grid)
    middle = [(0.0, 0.0, float(depth)) for depth in grid.depth_centres_km[[4, 7, -2]]]

    def restorations() -> None:
        space = RowSpace.of_problem(problem)
        for pattern in PATTERNS:
            restore(pattern, problem, regions_km=regions, covered=covered, space=space)

    def squeezing() -> float:
        compressed = compress(problem)
        cut = float(grid.depth_centres_km[grid.shape[2] // 2])
        forbidden = np.broadcast_to(blocks_beyond(grid, "below", cut), grid.shape)
        squeeze(compressed, forbidden)
        return compressed.resolved

    return {
        f"{COUNT} posterior samples": lambda: posterior_samples(problem, COUNT, executor=executor),
        f"{COUNT} probes": lambda: probe_resolution(problem, COUNT, executor=executor),
        "2 restorations": restorations,
        "3 rows and columns": lambda: point_spread(problem, middle),
        f"{BOOTSTRAP} repeats with other errors": lambda: noise_repeats(
            problem, BOOTSTRAP, executor=executor
        ),
        f"bootstrap of {BOOTSTRAP}": lambda: event_bootstrap(
            problem, BOOTSTRAP, executor=executor
        ),
        "squeezing below one depth, 200 simulations": squeezing,
    }

"""An inversion of 36,000 residuals in 150,000 blocks with six retracings, stage by stage."""

from __future__ import annotations

import time
from collections import defaultdict
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np

import rayloom as rl
from bench.inversion import NOISE_S, THREADS, residual_table
from bench.isolation import run_isolated
from bench.job import FULL, QUICK, smooth_case
from bench.report import Report
from rayloom.forward import trace_distant
from rayloom.inversion import InversionSettings, invert
from rayloom.residuals import Residuals

RETRACINGS = 6
WALL_LIMIT_S = 600.0
MEMORY_LIMIT_MIB = 2048.0


class StageClock:
    """Adds up the wall time between reports of progress, stage by stage."""

    def __init__(self) -> None:
        self.seconds: dict[str, float] = defaultdict(float)
        self._stage = "preparing"
        self._since = time.perf_counter()

    def __call__(self, stage: str, done: int, total: int) -> None:
        """Hear of progress."""
        self.close()
        self._stage = stage

    def close(self) -> None:
        """Book the time since the last report."""
        now = time.perf_counter()
        self.seconds[self._stage] += now - self._since
        self._since = now


def run(*, quick: bool, output: Path) -> Report:
    """Measure one inversion in a process of its own."""
    size = QUICK if quick else FULL
    report = Report(
        "Inversion at full size, bent rays on the sphere, smooth truth of ±4 %",
        {
            "blocks": int(np.prod(size.shape)),
            "residuals": size.stations * size.events,
            "retracings": RETRACINGS,
            "threads": THREADS,
        },
    )
    done = run_isolated("bench.large_inversion:prepare", quick=quick)
    stages = report.table("Wall time", "stage", "wall (s)")
    for name, seconds in done.result["stages"].items():
        stages.add(name, seconds)
    stages.add("all", done.wall_s)
    report.at_most("wall (s)", done.wall_s, WALL_LIMIT_S)
    report.at_most("peak memory (MiB)", done.peak_mib, MEMORY_LIMIT_MIB)
    report.remarks += [
        f"{done.cpu_s:.0f} CPU s; stopped because {done.result['stopped']}.",
        "The truth's delays are those along the reference rays, since only the cost is judged.",
    ]
    return report


def prepare(quick: bool) -> Callable[[], dict[str, Any]]:
    """Make the data; return the inversion of them."""
    data, model = _survey(quick=quick)
    settings = InversionSettings(
        threads=THREADS, max_iterations=RETRACINGS, model_tolerance=1e-6, misfit_tolerance=1e-9
    )

    def work() -> dict[str, Any]:
        clock = StageClock()
        result = invert(data, model, settings, progress=clock)
        clock.close()
        return {"stages": dict(clock.seconds), "stopped": result.stopped_because}

    return work


def _survey(*, quick: bool) -> tuple[Residuals, rl.SlownessModel]:
    truth, events, stations = smooth_case(QUICK if quick else FULL)
    model = truth.with_slowness(truth.reference)
    earth = rl.ReferenceEarth("ak135")
    rays = trace_distant(model, earth, events, stations, method="reference", threads=THREADS)
    kept = np.flatnonzero(rays.traced)
    delay_s = rays.predict_s(truth.slowness_s_per_km) - rays.predict_s(truth.reference)
    noise_s = np.random.default_rng(85).normal(0.0, NOISE_S, kept.size)
    return residual_table(rays, kept, delay_s[kept] + noise_s, (earth, events, stations)), model

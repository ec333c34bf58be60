"""How cost grows with the number of blocks, rays and threads, with a plot."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import numpy as np

import rayloom as rl
from bench.isolation import Isolated, run_isolated
from bench.job import Size, smooth_case
from bench.report import Report
from bench.stopwatch import REPEATS
from rayloom.forward import trace_distant

MANY_RAYS = 100_000
EXTENT_KM = (1125.0, 750.0, 600.0)
BASE = Size((75, 50, 40), 120, 30)


@dataclass(frozen=True)
class Point:
    """One measurement: its size, threads and what it took."""

    axis: str
    blocks: int
    rays: int
    threads: int
    done: Isolated


def run(*, quick: bool, output: Path) -> Report:
    """Measure along the three axes."""
    points = [point for axis in _axes(quick=quick) for point in _measure(*axis)]
    report = Report(
        "Growth with blocks, rays and threads (standard)", {"threads": "2 unless said"}
    )
    table = report.table(
        "Growth",
        "axis",
        "blocks",
        "rays",
        "threads",
        "wall (s)",
        "CPU (s)",
        "CPU (ms per ray)",
        "increase of peak memory (MiB)",
    )
    for point in points:
        done = point.done
        per_ray = 1e3 * done.cpu_s / point.rays
        counts = point.axis, point.blocks, point.rays, point.threads
        table.add(*counts, done.wall_s, done.cpu_s, per_ray, done.increase_mib)
    for axis in ("blocks", "rays"):
        report.remarks.append(_exponent([point for point in points if point.axis == axis], axis))
    report.remarks.append(
        f"Medians of {REPEATS} runs (the median in wall time), one run above {MANY_RAYS:,} rays."
    )
    report.figures.append(_plot(points, output, quick=quick))
    return report


def _axes(*, quick: bool) -> list[tuple[str, list[tuple[Size, int]]]]:
    """Return the sizes and threads of every axis."""
    if quick:
        small = Size((20, 13, 11), 8, 12)
        return [
            ("blocks", [(small, 2), (Size((40, 26, 22), 8, 12), 2)]),
            ("rays", [(small, 2), (Size((20, 13, 11), 24, 16), 2)]),
            ("threads", [(small, 1), (small, 2)]),
        ]
    shapes = ((30, 20, 17), (48, 32, 26), (75, 50, 40), (103, 69, 56), (142, 94, 75))
    surveys = ((40, 25), (100, 100), (316, 316), (1000, 1000))
    return [
        ("blocks", [(Size(shape, BASE.stations, BASE.events), 2) for shape in shapes]),
        ("rays", [(Size(BASE.shape, *survey), 2) for survey in surveys]),
        ("threads", [(BASE, 1), (BASE, 2)]),
    ]


def _measure(axis: str, sizes: Sequence[tuple[Size, int]]) -> list[Point]:
    points = []
    for size, threads in sizes:
        rays = size.stations * size.events
        repeats = 1 if rays > MANY_RAYS else REPEATS
        runs = [
            run_isolated("bench.growth:prepare", **vars(size), threads=threads)
            for _ in range(repeats)
        ]
        runs.sort(key=lambda one: one.wall_s)
        points.append(Point(axis, int(np.prod(size.shape)), rays, threads, runs[repeats // 2]))
    return points


def prepare(
    shape: list[int], stations: int, events: int, threads: int
) -> Callable[[], dict[str, Any]]:
    """Prepare one job in a box of fixed extent for a process of its own."""
    nx, ny, nz = shape
    sides = zip(EXTENT_KM, shape, strict=True)
    block_km = tuple(extent / count for extent, count in sides)
    model, sources, receivers = smooth_case(Size((nx, ny, nz), stations, events), block_km)
    earth = rl.ReferenceEarth("ak135")

    def work() -> dict[str, Any]:
        rays = trace_distant(model, earth, sources, receivers, threads=threads)
        return {"missing": int((~rays.traced).sum())}

    return work


def _exponent(points: list[Point], axis: str) -> str:
    size = np.log([getattr(point, axis) for point in points])
    cost = np.log([point.done.cpu_s for point in points])
    whole = np.polyfit(size, cost, 1)[0]
    last = (cost[-1] - cost[-2]) / (size[-1] - size[-2])
    return f"CPU time grows as {axis}^{whole:.2f}; between the two largest ^{last:.2f}."


def _plot(points: list[Point], output: Path, *, quick: bool) -> str:
    from matplotlib.figure import Figure

    figure = Figure(figsize=(11, 3.6), layout="constrained")
    for axes, axis in zip(figure.subplots(1, 3), ("blocks", "rays", "threads"), strict=True):
        chosen = [point for point in points if point.axis == axis]
        size = [getattr(point, axis) for point in chosen]
        axes.plot(size, [point.done.wall_s for point in chosen], "o-", label="wall")
        axes.plot(size, [point.done.cpu_s for point in chosen], "s--", label="CPU")
        if axis != "threads":
            axes.set_xscale("log")
        axes.set_yscale("log")
        axes.set_xlabel(f"number of {axis}")
        axes.set_ylabel("time (s)")
        axes.grid(alpha=0.3)
        axes.legend()
    output.mkdir(parents=True, exist_ok=True)
    name = f"{datetime.now(UTC):%Y-%m-%d}-growth{'-quick' if quick else ''}.png"
    figure.savefig(output / name, dpi=130)
    return name

"""Long rays through rough models against the best of many searches.

The reference of a ray is its earliest time in `thorough` traces from either end with
other coarse graphs than the default, in `standard` with the finest coarse graph, in
`thorough` through the same medium cut into blocks of half the size, and in the tested
quality from the other end. Every time belongs to a valid path, so no reference is too
early; a basin that all searches miss stays hidden. The trace under test is never part
of its own reference.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
from numpy.typing import NDArray

import rayloom as rl
from bench.errors import ERROR_COLUMNS, summarise
from bench.models import box_grid, layered, mantle_like, random_points, roughened
from bench.report import Report, Table
from bench.stopwatch import clock
from rayloom.forward import trace

Floats = NDArray[np.float64]
BLOCK_KM = 15.0
MIDDLE_KM = 225.0
ROUGHNESS = ("smooth", "checkerboard", "independent")
LIMITS = {
    "standard": dict(zip(ROUGHNESS, (6.0, 8.0, 8.0), strict=True)),
    "thorough": dict(zip(ROUGHNESS, (2.5, 3.0, 4.0), strict=True)),
}
LATE_LIMITS = {"standard": 5.0, "thorough": 1.0}
REFERENCE_SEARCHES = (("thorough", 2), ("thorough", 4), ("standard", 4))


def run(*, quick: bool, output: Path) -> Report:
    """Measure both quality levels on all models."""
    shape = (50, 34, 40) if quick else (75, 50, 40)
    count = 6 if quick else 16
    report = Report(
        "Long rays in rough models",
        {"blocks": " × ".join(map(str, shape)), "block (km)": BLOCK_KM, "rays": count * count},
    )
    table = report.table(
        "Later than the reference",
        "frame",
        "model",
        "quality",
        "mean time (s)",
        *ERROR_COLUMNS,
        "earlier by > 0.1 ms (%)",
        "CPU (ms per ray)",
    )
    reciprocity = report.table(
        "Reciprocity", "frame", "model", "quality", "mean (ms)", "p95 (ms)", "max (ms)"
    )
    for sphere in (False, True):
        for kind in ROUGHNESS:
            _one_model(report, (table, reciprocity), shape, count, kind, sphere)
    report.remarks.append(" ".join((__doc__ or "").split("\n\n")[1].split()))
    return report


def _one_model(
    report: Report,
    tables: tuple[Table, Table],
    shape: tuple[int, int, int],
    count: int,
    kind: str,
    sphere: bool,
) -> None:
    grid = box_grid(shape, BLOCK_KM, sphere=sphere)
    model = roughened(layered(grid, mantle_like), kind, 5.0, seed=11)
    base = grid.depth_edges_km[-1]
    share = 2.0 * MIDDLE_KM / (shape[0] * BLOCK_KM)
    deep = random_points(grid, count, (base - 20.0, base - 1.0), seed=12, share=share)
    shallow = random_points(grid, count, (0.5, 0.5), seed=13, share=share)
    where = "sphere" if sphere else "flat"
    elsewhere = _reference(model, deep, shallow)
    for quality, limits in LIMITS.items():
        _, cpu, forth = clock(lambda q=quality: _times(model, deep, shallow, q, forth=True))
        back = _times(model, deep, shallow, quality, forth=False)
        reference = np.minimum(elsewhere, back)
        earlier = 100.0 * float(np.mean(forth < reference - 1e-4))
        errors = summarise(forth, np.minimum(reference, forth))
        per_ray = 1e3 * cpu / forth.size
        tables[0].add(where, kind, quality, float(forth.mean()), *errors.cells(), earlier, per_ray)
        label = f"{where}, {kind}, {quality}"
        report.at_most(f"{label}: mean (ms)", errors.mean, limits[kind])
        report.at_most(f"{label}: later than 30 ms (%)", errors.late_percent, LATE_LIMITS[quality])
        both = summarise(forth, back)
        tables[1].add(where, kind, quality, both.mean, both.p95, both.maximum)
        if kind == "smooth" and quality == "thorough":
            report.at_most(f"{label}: reciprocity, mean (ms)", both.mean, 4.0)
            report.at_most(f"{label}: reciprocity, p95 (ms)", both.p95, 20.0)


def _reference(model: rl.SlownessModel, deep: Floats, shallow: Floats) -> Floats:
    searches = [
        _times(model, deep, shallow, quality, forth=forth, face_nodes=nodes)
        for quality, nodes in REFERENCE_SEARCHES
        for forth in (True, False)
    ]
    halved = _halved(model)
    searches += [_times(halved, deep, shallow, "thorough", forth=forth) for forth in (True, False)]
    return np.asarray(np.min(searches, axis=0))


def _halved(model: rl.SlownessModel) -> rl.SlownessModel:
    """Cut every block into eight of the same slowness: the same medium."""
    grid, slowness = model.grid, model.slowness_s_per_km
    edges = [
        np.interp(np.arange(2 * len(axis) - 1) / 2, np.arange(len(axis)), axis)
        for axis in (grid.x_edges, grid.y_edges, grid.depth_edges_km)
    ]
    for axis in range(3):
        slowness = np.repeat(slowness, 2, axis=axis)
    return rl.SlownessModel(rl.BlockGrid(grid.frame, *edges), slowness)


def _times(
    model: rl.SlownessModel,
    deep: Floats,
    shallow: Floats,
    quality: str,
    *,
    forth: bool,
    face_nodes: int | None = None,
) -> Floats:
    """Trace all pairs; with equally many ends the search starts from the second ones."""
    ends = (deep, shallow) if forth else (shallow, deep)
    rays = trace(model, *ends, quality=quality, face_nodes=face_nodes)
    times = rays.time_s.reshape(len(ends[0]), len(ends[1]))
    return np.asarray((times if forth else times.T).ravel())

"""Long rays through rough models against references stored with the tests.

A reference is the earliest of several searches of the same tracer, from both ends, with
finer graphs and wider bounds than any quality level has (12 and 16 nodes along each side
of a fine face). Every time belongs to a valid path, so no reference is too early; a
course that all searches miss stays hidden.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
from numpy.typing import NDArray

import rayloom as rl
from bench.errors import ERROR_COLUMNS, summarise
from bench.long_ray_cases import BLOCK_KM, SHAPE, LongRays, build_model, read_case
from bench.report import Report, Table
from bench.stopwatch import clock
from rayloom.forward import trace

Floats = NDArray[np.float64]
ROUGHNESS = ("smooth", "checkerboard", "independent")
LIMITS = {
    "standard": dict(zip(ROUGHNESS, (6.0, 8.0, 8.0), strict=True)),
    "thorough": dict(zip(ROUGHNESS, (2.5, 3.0, 4.0), strict=True)),
}
LATE_LIMITS = {"standard": 5.0, "thorough": 1.0}
QUICK_GOALS = 2


def run(*, quick: bool, output: Path) -> Report:
    """Measure both quality levels on all models; quick: rays to few goals."""
    report = Report(
        "Long rays in rough models",
        {"blocks": " × ".join(map(str, SHAPE)), "block (km)": BLOCK_KM},
    )
    table = report.table(
        "Later than the reference",
        "frame",
        "model",
        "quality",
        "rays",
        "mean time (s)",
        *ERROR_COLUMNS,
        "earlier by > 0.1 ms (%)",
        "CPU (ms per ray)",
    )
    reciprocity = report.table(
        "Reciprocity", "frame", "model", "quality", "mean (ms)", "p95 (ms)", "max (ms)"
    )
    for frame in ("flat", "sphere"):
        for kind in ROUGHNESS:
            rays = read_case(frame, kind)
            model = build_model(frame, kind)
            chosen = rays.pairs[:, 1] < (QUICK_GOALS if quick else len(rays.goals))
            for quality in LIMITS:
                _one_level(
                    report, (table, reciprocity), model, rays, chosen, (frame, kind, quality)
                )
    report.remarks.append(" ".join((__doc__ or "").split("\n\n")[1].split()))
    return report


def _one_level(
    report: Report,
    tables: tuple[Table, Table],
    model: rl.SlownessModel,
    rays: LongRays,
    chosen: NDArray[np.bool_],
    case: tuple[str, str, str],
) -> None:
    """Trace the chosen rays of a case both ways at one quality level."""
    _, kind, quality = case
    pairs = rays.pairs[chosen]
    straight = trace(model, rays.starts, rays.goals, pairs=pairs, method="straight")
    np.testing.assert_allclose(straight.time_s, rays.straight_s[chosen], atol=1e-6)
    _, cpu, forth = clock(lambda: _times_from_goals(model, rays, pairs, quality))
    errors = summarise(forth, rays.reference_s[chosen])
    earlier = 100.0 * float(np.mean(forth < rays.reference_s[chosen] - 1e-4))
    mean, per_ray = float(forth.mean()), 1e3 * cpu / len(pairs)
    tables[0].add(*case, len(pairs), mean, *errors.cells(), earlier, per_ray)
    label = ", ".join(case)
    report.at_most(f"{label}: mean (ms)", errors.mean, LIMITS[quality][kind])
    report.at_most(f"{label}: later than 30 ms (%)", errors.late_percent, LATE_LIMITS[quality])
    if kind != "smooth":
        return
    both = summarise(forth, _times_from_starts(model, rays, pairs, quality))
    tables[1].add(*case, both.mean, both.p95, both.maximum)
    if quality == "thorough":
        report.at_most(f"{label}: reciprocity, mean (ms)", both.mean, 4.0)
        report.at_most(f"{label}: reciprocity, p95 (ms)", both.p95, 20.0)


def _times_from_goals(
    model: rl.SlownessModel, rays: LongRays, pairs: NDArray[np.int64], quality: str
) -> Floats:
    """Search from the goals, which are fewer than the starts."""
    return trace(model, rays.starts, rays.goals, pairs=pairs, quality=quality).time_s


def _times_from_starts(
    model: rl.SlownessModel, rays: LongRays, pairs: NDArray[np.int64], quality: str
) -> Floats:
    """Search from each start in turn; with one start it is the smaller side."""
    times = np.empty(len(pairs))
    for start in np.unique(pairs[:, 0]):
        rows = pairs[:, 0] == start
        times[rows] = trace(
            model, rays.starts, rays.goals, pairs=pairs[rows], quality=quality
        ).time_s
    return times

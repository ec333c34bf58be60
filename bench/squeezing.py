"""Power of squeezing and coverage of body intervals, on the geometry of the demo.

Data are made on the rays, weights and priors of an inversion of the demo's
survey: a column of given base, the demo's fast root, fresh disorder and unit errors.
"""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import Any

import numpy as np
from numpy.typing import NDArray

from bench.report import Report
from rayloom.appraisal.bodies import find_regions, measure_body, relative_to_layers, usable_blocks
from rayloom.appraisal.bodies.measures import Interval
from rayloom.appraisal.compressed import CompressedData, compress
from rayloom.appraisal.samples import Samples, posterior_samples
from rayloom.appraisal.squeezing import blocks_beyond, squeeze
from rayloom.demo import write_survey
from rayloom.demo.structure import (
    DISORDER_LENGTHS_KM,
    DISORDER_PERCENT,
    FAST_ROOT,
    SLOW_COLUMN,
    Disorder,
    TiltedColumn,
    block_positions,
)
from rayloom.inversion import LinearisedProblem, linearise, solve
from rayloom.settings import change_run_settings
from rayloom.workflow import RunFolder, Tables, initialise, run_step
from rayloom.workflow.finished import finished_inversion

Floats = NDArray[np.float64]

CUT_KM = 162.0
DEEPER_KM = 100.0
FOOTPRINT_KM = 110.0
PRIOR_PERCENT = 0.9
BODY = {"threshold_percent": 1.0, "min_volume_km3": 200_000.0}


def column_to(base_km: float) -> TiltedColumn:
    """Cut the demo's column off at a depth, its axis unchanged."""
    share = (base_km - SLOW_COLUMN.top_km[2]) / (SLOW_COLUMN.base_km[2] - SLOW_COLUMN.top_km[2])
    start, end = np.array(SLOW_COLUMN.top_km), np.array(SLOW_COLUMN.base_km)
    x, y, z = (start + share * (end - start)).tolist()
    return replace(SLOW_COLUMN, base_km=(x, y, z))


def percent_of(problem: LinearisedProblem, base_km: float, seed: int) -> Floats:
    """Column to a depth, fast root and disorder of one seed, (nx, ny, nz), percent."""
    place = block_positions(problem.model.grid)
    disorder = Disorder(DISORDER_PERCENT, DISORDER_LENGTHS_KM, np.random.default_rng(seed))
    structures = (column_to(base_km), FAST_ROOT, disorder)
    return np.asarray(sum(structure.percent(*place) for structure in structures))


def fractional(percent: Floats) -> Floats:
    return 1.0 / (1.0 + percent / 100.0) - 1.0


def rejections(
    problem: LinearisedProblem, compressed: CompressedData, cases: int
) -> dict[str, Any]:
    """p-values where nothing lies below the cut, and where the column goes 100 km deeper."""
    grid = problem.model.grid
    east, north, _ = block_positions(grid)
    near = (np.hypot(east, north) < FOOTPRINT_KM)[:, :, 0]
    forbidden = near[:, :, None] & blocks_beyond(grid, "below", CUT_KM)
    found: dict[str, list[float]] = {"ends_at_cut": [], "deeper": []}
    for case in range(cases):
        random = np.random.default_rng(900 + case)
        for name, base_km in (("ends_at_cut", CUT_KM), ("deeper", CUT_KM + DEEPER_KM)):
            percent = percent_of(problem, base_km, seed=case)
            if name == "ends_at_cut":
                percent = np.where(forbidden, 0.0, percent)
            data = fractional(percent).ravel() @ compressed.sensitivity[0]
            data = data + random.standard_normal(compressed.size)
            test = squeeze(replace(compressed, data=data), forbidden, seed=case)
            found[name].append(test.p_value)
    return found


def covered(problem: LinearisedProblem, samples: Samples, cases: int) -> dict[str, Any]:
    """How many 90 % intervals of the demo's column contain the truth, measure by measure."""
    grid = problem.model.grid
    system = problem.system
    spread = samples.fractional - samples.mean_fractional
    usable = usable_blocks(grid, samples, min_resolution=0.2, top_km=35.0)
    names = ("depth_km", "peak_percent", "mean_percent", "volume_km3", "top_km", "base_km")
    hits, errors = dict.fromkeys(names, 0), {name: [] for name in names}
    missing = 0
    for case in range(cases):
        random = np.random.default_rng(300 + case)
        truth = percent_of(problem, 230.0, seed=500 + case)
        noise = np.where(problem.active, random.standard_normal(problem.rows.count), 0.0)
        rows = system.whiten_rows(system.groups[0].matrix @ fractional(truth).ravel())
        rows = rows + system.means.project(noise)
        found = solve(system, rows, tolerance=1e-4, max_iterations=1000)
        mean = system.parameters(found.white)[0]
        percent = 100.0 * (1.0 / (1.0 + mean.reshape(grid.shape)) - 1.0)
        relative = relative_to_layers(grid, percent, usable)
        slow = [r for r in find_regions(grid, relative, usable, **BODY) if r.sign < 0]
        if not slow:
            missing += 1
            continue
        region = slow[0]
        models = 100.0 * (1.0 / (1.0 + (mean + spread).reshape(-1, *grid.shape)) - 1.0)
        models = relative_to_layers(grid, models, usable)
        rows_of = [measure_body(grid, region, model, **BODY) for model in models]
        alone = relative_to_layers(grid, truth, usable)
        true = measure_body(grid, region, alone, **BODY)
        for name in names:
            interval = Interval.of(np.concatenate([getattr(row, name) for row in rows_of]))
            value = float(getattr(true, name)[0])
            hits[name] += int(interval.low <= value <= interval.high)
            errors[name].append(interval.estimate - value)
    return {
        "cases": cases,
        "not_found": missing,
        "covered": hits,
        "mean_error": {name: float(np.mean(values)) for name, values in errors.items()},
    }


def demo_problem(folder: Path) -> LinearisedProblem:
    """Invent the demo's survey and invert it along the rays of the reference Earth."""
    survey = folder / "survey"
    write_survey(survey)
    initialise(
        folder, Tables(survey / "stations.csv", survey / "events.csv", survey / "picks.csv")
    )
    for section, values in (
        ("forward", {"method": "reference"}),
        ("inversion", {"max_iterations": 2, "prior_std_percent": PRIOR_PERCENT}),
    ):
        change_run_settings(folder / "rayloom.toml", section, values)
    run_step(folder, "residuals")
    run_step(folder, "invert")
    home = RunFolder.at(folder)
    settings = home.read_settings()
    return linearise(finished_inversion(home, settings), settings.inversion_settings())


def run(*, quick: bool, output: Path) -> Report:
    """Measure power, false alarms and coverage."""
    cases, truths, size = (10, 6, 250) if quick else (40, 40, 400)
    with TemporaryDirectory() as folder:
        problem = demo_problem(Path(folder) / "demo")
    compressed = compress(problem, size=size)
    p_values = {
        name: np.array(values) for name, values in rejections(problem, compressed, cases).items()
    }
    report = Report(
        "Squeezing and intervals of bodies at the demo's data quality",
        {
            "rows": problem.rows.count,
            "blocks": problem.model.grid.block_count,
            "prior standard deviation (%)": PRIOR_PERCENT,
            "combinations of the data": compressed.size,
            "parameters they resolve": round(compressed.resolved),
        },
    )
    table = report.table(
        f"Nothing below {CUT_KM:g} km in the column's blocks, {cases} cases each",
        "truth",
        "rejected at 5 %",
        "rejected at 1 %",
        "mean p",
    )
    for name, values in p_values.items():
        shares = [float(np.mean(values < level)) for level in (0.05, 0.01)]
        table.add(name.replace("_", " "), *shares, float(values.mean()))
    report.at_least(
        f"power at 5 % for {DEEPER_KM:g} km more", float(np.mean(p_values["deeper"] < 0.05)), 0.8
    )
    report.at_most("false alarms at 5 %", float(np.mean(p_values["ends_at_cut"] < 0.05)), 0.1)
    found = covered(problem, posterior_samples(problem, count=32), truths)
    intervals = report.table(
        f"90 % intervals of a column of -4 % down to 230 km, {truths} truths",
        "measure",
        "hold the truth",
        "mean error",
    )
    for name, hits in found["covered"].items():
        intervals.add(name, hits / truths, found["mean_error"][name])
    report.remarks += [
        "Truths are the demo's bodies with fresh disorder and unit errors, along the rays of "
        "the inversion: errors of ray theory and of blocks are not in it.",
        "The column is four times as strong as the prior expects, so that intervals of its "
        "mean and volume, which the prior shrinks, need not hold the truth; they are reported.",
        f"Truths without a slow body found: {found['not_found']}.",
    ]
    return report

"""The step ``appraise``: what the model of a run folder is worth.

:data:`APPRAISE` is the step. Its random parts are kept piece by piece in
``checkpoints/``, so that a stopped appraisal goes on where it was.
"""

from __future__ import annotations

import os
from collections.abc import Callable
from concurrent.futures import Executor, ThreadPoolExecutor
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from rayloom.appraisal import (
    AppraisalSettings,
    Checkpoints,
    Coverage,
    PatternSettings,
    PointSpread,
    Probing,
    Resampled,
    Restoration,
    RowSpace,
    Samples,
    event_bootstrap,
    event_jackknife,
    noise_repeats,
    point_spread,
    posterior_samples,
    probe_resolution,
    ray_coverage,
    restore,
    restore_through_finer_blocks,
)
from rayloom.appraisal.coverage import chord_km
from rayloom.appraisal.restoration import default_regions_km
from rayloom.errors import InputError
from rayloom.forward import Rays
from rayloom.inversion import InversionResult, LinearisedProblem, linearise
from rayloom.model import BlockGrid, SlownessModel
from rayloom.settings import RunSettings
from rayloom.workflow.appraisal_files import write_appraisal
from rayloom.workflow.finished import finished_inversion
from rayloom.workflow.folder import RunFolder
from rayloom.workflow.plan import Files, Outcome, Step
from rayloom.workflow.record import Provenance, content_hashes, fingerprint
from rayloom.workflow.reporting import Reporter


@dataclass(frozen=True)
class Appraisal:
    """All that the step works out.

    Attributes
    ----------
    result : InversionResult
        What is appraised.
    coverage : Coverage
        Rays per block.
    samples : Samples
        Posterior samples.
    repeats : Resampled
        Inversions of other errors.
    bootstrap, jackknife : Resampled or None
        Inversions of other weights of the events.
    probing : Probing
        Diagonal and smearing.
    spreads : list of PointSpread
        Rows and columns of chosen blocks.
    restorations : list of Restoration
        Structures put in and found.
    """

    result: InversionResult
    coverage: Coverage
    samples: Samples
    repeats: Resampled
    bootstrap: Resampled | None
    jackknife: Resampled | None
    probing: Probing
    spreads: list[PointSpread]
    restorations: list[Restoration]


def run_appraisal(folder: RunFolder, settings: RunSettings, reporter: Reporter) -> Outcome:
    """Appraise the inversion of a run folder and write tables, fields and figures."""
    result = finished_inversion(folder, settings)
    inversion = settings.inversion_settings()
    problem = linearise(result, inversion)
    chosen = settings.appraisal
    kept = Checkpoints(folder.checkpoints, _fingerprint(folder, settings))
    threads = settings.forward.threads or os.cpu_count() or 1
    with ThreadPoolExecutor(threads) as executor:
        samples, probing, repeats = _random_parts(problem, chosen, executor, kept, reporter)
        bootstrap, jackknife = _resampled_parts(problem, chosen, executor, kept, reporter)
    found = Appraisal(
        result=result,
        coverage=_coverage(result, chosen.period_s),
        spreads=point_spread(problem, _points(chosen, result)),
        restorations=_restorations(folder, settings, result, problem, reporter),
        samples=samples,
        probing=probing,
        repeats=repeats,
        bootstrap=bootstrap,
        jackknife=jackknife,
    )
    written = write_appraisal(folder, settings, found)
    for sentence in written.section.sentences:
        reporter.note(sentence)
    kept.clear()
    return Outcome(
        files=written.files,
        seeds={"appraisal": chosen.seed},
        remarks={f"finding_{n}": s for n, s in enumerate(written.section.sentences, start=1)},
    )


def appraisal_inputs(folder: RunFolder, settings: RunSettings) -> Files:
    """Name what the step reads."""
    models = {
        f"pattern {pattern.name}": folder.resolve(pattern.file)
        for pattern in settings.appraisal.patterns
        if pattern.file is not None
    }
    return {name: folder.file(name) for name in ("model.nc", "inversion.npz")} | models


APPRAISE: Final = Step(
    name="appraise",
    inputs=appraisal_inputs,
    settings=lambda settings: settings.model_dump(
        mode="json", include={"inversion", "appraisal", "outputs"}
    ),
    work=run_appraisal,
    builds_on=("invert",),
    on_request=True,
)
"""The step."""


def tell_appraisal(folder: RunFolder) -> list[str]:
    """Return what the last appraisal in a folder found, sentence by sentence."""
    record = Provenance(folder.provenance).steps.get(APPRAISE.name)
    return [] if record is None else list(record.remarks.values())


def _fingerprint(folder: RunFolder, settings: RunSettings) -> str:
    files = {name: folder.file(name) for name in ("model.nc", "inversion.npz")}
    obeyed = settings.model_dump(mode="json", include={"inversion"})
    return fingerprint(content_hashes(files), obeyed)


def _random_parts(
    problem: LinearisedProblem,
    chosen: AppraisalSettings,
    executor: Executor,
    kept: Checkpoints,
    reporter: Reporter,
) -> tuple[Samples, Probing, Resampled]:
    seed = chosen.seed
    samples = posterior_samples(
        problem,
        chosen.samples,
        seed,
        executor=executor,
        checkpoints=kept,
        progress=reporter.counter("posterior samples"),
    )
    probing = probe_resolution(
        problem,
        chosen.probes,
        seed + 1,
        executor=executor,
        checkpoints=kept,
        progress=reporter.counter("resolution probes"),
    )
    repeats = noise_repeats(
        problem,
        max(chosen.bootstrap, 16),
        seed + 2,
        executor=executor,
        checkpoints=kept,
        progress=reporter.counter("repeats with other errors"),
    )
    return samples, probing, repeats


def _resampled_parts(
    problem: LinearisedProblem,
    chosen: AppraisalSettings,
    executor: Executor,
    kept: Checkpoints,
    reporter: Reporter,
) -> tuple[Resampled | None, Resampled | None]:
    bootstrap = jackknife = None
    if chosen.bootstrap >= 2:
        bootstrap = event_bootstrap(
            problem,
            chosen.bootstrap,
            chosen.seed + 3,
            executor=executor,
            checkpoints=kept,
            progress=reporter.counter("event bootstrap"),
        )
    if chosen.jackknife:
        jackknife = event_jackknife(
            problem,
            executor=executor,
            checkpoints=kept,
            progress=reporter.counter("jackknife"),
        )
    return bootstrap, jackknife


def _coverage(result: InversionResult, period_s: float) -> Coverage:
    rays, rows = result.rays, result.ray_rows
    assert isinstance(rays, Rays)
    path_km = chord_km(np.asarray(result.data.distance_deg, dtype=np.float64)[rows])
    return ray_coverage(
        rays, result.model, period_s=period_s, path_km=path_km, chosen=result.used[rows]
    )


def _points(
    chosen: AppraisalSettings, result: InversionResult
) -> list[tuple[float, float, float]]:
    """Give points in the frame; by default three depths below the middle of the stations."""
    grid = result.model.grid
    if not chosen.points:
        stations = result.data.stations
        x, y = grid.frame.local_coordinates(stations.longitude_deg, stations.latitude_deg)
        edges = grid.depth_edges_km
        depths = edges[0] + np.array([0.25, 0.5, 0.75]) * (edges[-1] - edges[0])
        middle = (float(np.median(x)), float(np.median(y)))
        return [(*middle, float(depth)) for depth in depths]
    points = []
    for place in chosen.points:
        x, y = grid.frame.local_coordinates(place[0], place[1])
        if grid.locate([float(x), float(y), place[2]]) < 0:
            raise InputError(
                f"the point {list(place)} (longitude, latitude, depth_km) lies outside the blocks",
                where="appraisal.points",
            )
        points.append((float(x), float(y), place[2]))
    return points


def _restorations(
    folder: RunFolder,
    settings: RunSettings,
    result: InversionResult,
    problem: LinearisedProblem,
    reporter: Reporter,
) -> list[Restoration]:
    chosen = settings.appraisal
    grid = result.model.grid
    regions = chosen.regions_km or default_regions_km(grid)
    covered = covered_blocks(result.model, chosen.min_hits)
    space = RowSpace.of_problem(problem)
    found = []
    for number, pattern in enumerate(chosen.patterns):
        reporter.progress("restorations", number, len(chosen.patterns))
        model = _pattern_model(folder, pattern, grid)
        if chosen.restoration_times == "same_rays":
            restored = restore(
                pattern,
                problem,
                regions_km=regions,
                covered=covered,
                noise=chosen.noise,
                seed=chosen.seed,
                pattern_model=model,
                space=space,
            )
        else:
            restored = restore_through_finer_blocks(
                pattern,
                result,
                settings.inversion_settings(),
                regions_km=regions,
                covered=covered,
                noise=chosen.noise,
                seed=chosen.seed,
                pattern_model=model,
                progress=_named(reporter, pattern.name),
            )
        found.append(restored)
    reporter.progress("restorations", len(chosen.patterns), len(chosen.patterns))
    return found


def _named(reporter: Reporter, name: str) -> Callable[[str, int, int], None]:
    return lambda stage, done, total: reporter.progress(f"{name}: {stage}", done, total)


def covered_blocks(model: SlownessModel, min_hits: int) -> NDArray[np.bool_]:
    """Tell which blocks have enough rays, (nx, ny, nz)."""
    return np.asarray(model.fields["hits"] >= min_hits)


def _pattern_model(
    folder: RunFolder, pattern: PatternSettings, grid: BlockGrid
) -> SlownessModel | None:
    if pattern.file is None:
        return None
    model = SlownessModel.read_netcdf(folder.resolve(pattern.file))
    if model.grid.frame.is_flat != grid.frame.is_flat:
        raise InputError(
            "is flat where the blocks are on a sphere, or the other way round",
            where=f"appraisal.patterns, {pattern.file}",
        )
    return model

"""The step ``bodies``: where the anomalies are, how deep they reach, what could feign them.

:data:`BODIES` is the step. It takes up the posterior samples of ``appraise``.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Final

import numpy as np

from rayloom.appraisal import Samples
from rayloom.appraisal.bodies import (
    Body,
    BodyExtent,
    BodySettings,
    extent_of,
    find_bodies,
    relative_to_layers,
    usable_blocks,
)
from rayloom.appraisal.compressed import compress
from rayloom.appraisal.leak_sources import outside_sources, station_middle
from rayloom.appraisal.leaks import Leak, crust_source, leak_tests
from rayloom.appraisal.squeezing import SqueezedFirst, squeezed_first
from rayloom.inversion import InversionResult, LinearisedProblem, linearise
from rayloom.outputs import BlockField, perturbation_field
from rayloom.settings import RunSettings
from rayloom.workflow.body_files import write_bodies
from rayloom.workflow.finished import finished_inversion
from rayloom.workflow.folder import RunFolder
from rayloom.workflow.plan import Outcome, Step
from rayloom.workflow.record import Provenance
from rayloom.workflow.reporting import Reporter
from rayloom.workflow.sample_file import load_samples


@dataclass(frozen=True)
class FoundBodies:
    """All that the step works out.

    Attributes
    ----------
    result : InversionResult
        What is judged.
    field : BlockField
        The mean model relative to the regional mean, where it is resolved.
    bodies : tuple of Body
        The bodies.
    extents : dict of str to BodyExtent
        Squeezing by the name of the body.
    squeezed : SqueezedFirst or None
        The model with structure in the bodies and the crust alone, and what the
        data demand elsewhere; None without bodies.
    leaks : tuple of Leak
        Leak tests, if any.
    """

    result: InversionResult
    field: BlockField
    bodies: tuple[Body, ...]
    extents: dict[str, BodyExtent]
    squeezed: SqueezedFirst | None
    leaks: tuple[Leak, ...]


def run_bodies(folder: RunFolder, settings: RunSettings, reporter: Reporter) -> Outcome:
    """Find the bodies of a run, squeeze them, test for leaks, and write what comes of it."""
    result = finished_inversion(folder, settings)
    problem = linearise(result, settings.inversion_settings())
    samples = load_samples(folder.file("posterior_samples.npz"))
    chosen = settings.bodies
    bodies = find_bodies(
        problem,
        samples,
        threshold_percent=chosen.threshold_percent,
        min_resolution=chosen.min_resolution,
        min_volume_km3=chosen.min_volume_km3,
        top_km=chosen.top_km,
    )
    found = FoundBodies(
        result=result,
        field=_field(result, samples, chosen),
        bodies=bodies,
        extents=_extents(problem, bodies, chosen, reporter),
        squeezed=_squeezed(problem, bodies, chosen),
        leaks=_leaks(problem, result, settings, reporter) if chosen.leak_tests else (),
    )
    written = write_bodies(folder, settings, found)
    for sentence in written.section.sentences:
        reporter.note(sentence)
    return Outcome(
        files=written.files,
        seeds={"squeezing": chosen.seed},
        remarks={f"finding_{n}": s for n, s in enumerate(written.section.sentences, start=1)},
    )


BODIES: Final = Step(
    name="bodies",
    inputs=lambda folder, _: {
        name: folder.file(name) for name in ("model.nc", "inversion.npz", "posterior_samples.npz")
    },
    settings=lambda settings: settings.model_dump(
        mode="json", include={"inversion", "bodies", "outputs"}
    ),
    work=run_bodies,
    builds_on=("appraise",),
    on_request=True,
)
"""The step."""


def tell_bodies(folder: RunFolder) -> list[str]:
    """Return what the step last found in a folder, sentence by sentence."""
    record = Provenance(folder.provenance).steps.get(BODIES.name)
    return [] if record is None else list(record.remarks.values())


def _field(result: InversionResult, samples: Samples, chosen: BodySettings) -> BlockField:
    grid = result.model.grid
    usable = usable_blocks(
        grid, samples, min_resolution=chosen.min_resolution, top_km=chosen.top_km
    )
    return replace(
        perturbation_field(result.model),
        values=relative_to_layers(grid, samples.mean_percent, usable),
        shown=usable,
        hidden_label="not resolved",
    )


def _extents(
    problem: LinearisedProblem,
    bodies: tuple[Body, ...],
    chosen: BodySettings,
    reporter: Reporter,
) -> dict[str, BodyExtent]:
    if not bodies:
        return {}
    compressed = compress(
        problem,
        size=chosen.squeezing_size,
        seed=chosen.seed,
        progress=reporter.counter("combinations of the data"),
    )
    return {
        body.name: extent_of(
            compressed,
            problem.model.grid,
            body,
            most_cuts=chosen.most_cuts,
            simulations=chosen.simulations,
            seed=chosen.seed + 1000 * number,
            progress=reporter.counter(f"squeezing {body.name}"),
        )
        for number, body in enumerate(bodies, start=1)
    }


def _squeezed(
    problem: LinearisedProblem, bodies: tuple[Body, ...], chosen: BodySettings
) -> SqueezedFirst | None:
    if not bodies:
        return None
    allowed = np.logical_or.reduce([body.region.domain for body in bodies])
    below = problem.model.grid.depth_centres_km >= chosen.top_km
    return squeezed_first(problem, ~allowed & below)


def _leaks(
    problem: LinearisedProblem,
    result: InversionResult,
    settings: RunSettings,
    reporter: Reporter,
) -> tuple[Leak, ...]:
    chosen = settings.bodies
    anomaly = {
        "radius_km": chosen.leak_radius_km,
        "contrast_percent": chosen.leak_contrast_percent,
    }
    crust = crust_source(
        problem, centre=station_middle(problem, result.data), crust_km=chosen.top_km, **anomaly
    )
    outside = (
        ()
        if problem.model.grid.frame.is_flat
        else outside_sources(
            problem,
            result.data,
            threads=settings.forward.threads,
            progress=reporter.counter("tracing through larger blocks"),
            **anomaly,
        )
    )
    return leak_tests(problem, (*outside, crust), crust_km=chosen.top_km)

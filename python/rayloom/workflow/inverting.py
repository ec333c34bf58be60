"""The step ``invert``: residuals in, model and tables out, resumable after every iteration."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from rayloom.errors import InputError, RayloomError
from rayloom.forward import Rays
from rayloom.inversion import (
    InversionResult,
    InversionState,
    invert,
    load_state,
    save_state,
)
from rayloom.model import BlockGrid, SlownessModel, with_perturbation_of_file
from rayloom.outputs import write_linear_system, write_table, write_tables
from rayloom.residuals import Residuals, SummaryRays
from rayloom.settings import RunSettings
from rayloom.workflow.data import read_back_picks, read_earth, summary_of
from rayloom.workflow.folder import RunFolder
from rayloom.workflow.plan import Files, Outcome
from rayloom.workflow.reporting import Reporter
from rayloom.workflow.result_file import save_result


def run_inversion(
    folder: RunFolder, settings: RunSettings, reporter: Reporter, *, fingerprint: str
) -> Outcome:
    """Invert the residuals of a run folder and write what came of it.

    Parameters
    ----------
    folder : RunFolder
        Where ``residuals.csv`` is.
    settings : RunSettings
        The settings.
    reporter : Reporter
        Hears each stage and iteration.
    fingerprint : str
        Names what the inversion reads and obeys, so that no checkpoint of another is
        taken up.

    Returns
    -------
    Outcome
        The files written.
    """
    earth = read_earth(folder, settings.earth.model)
    picks = read_back_picks(folder, earth, settings)
    summary = summary_of(picks, settings)
    data = picks if summary is None else summary.data
    grid = BlockGrid.from_spec(settings.grid)
    wave = settings.inversion.wave
    _tell_waves(data, wave, reporter)
    _tell_summary(picks, summary, reporter)
    model = starting_model(folder, settings, SlownessModel.from_earth(grid, earth, wave=wave))
    checkpoint = folder.checkpoints / f"invert_{fingerprint}.npz"
    resume = _resumable(checkpoint, reporter)
    log = _IterationLog(checkpoint, reporter, 0 if resume is None else resume.iteration + 1)
    result = invert(
        data,
        model,
        settings.inversion_settings(),
        progress=log.progress,
        checkpoint=log.keep,
        resume=resume,
    )
    if isinstance(result.rays, Rays):
        for problem, count in result.rays.problems.items():
            reporter.note(f"{count} rays missing: {problem}")
        if result.rays.bound_check.worth_telling:
            reporter.note(str(result.rays.bound_check))
    reporter.note(f"stopped: {result.stopped_because}")
    remarks = {"stopped_because": result.stopped_because}
    if result.prior_sentence():
        remarks["prior"] = result.prior_sentence()
        reporter.note(remarks["prior"])
    if result.structure is not None:
        remarks["structure"] = result.structure.sentence()
        reporter.note(remarks["structure"])
    files = _write(folder, result, linear_system=settings.outputs.linear_system)
    if summary is not None:
        files["summary_clusters.csv"] = folder.file("summary_clusters.csv")
        write_table(files["summary_clusters.csv"], summary.members)
    _clear(folder.checkpoints)
    return Outcome(
        files=files,
        seeds={"trace_probes": settings.inversion.seed},
        remarks=remarks,
    )


def starting_model_files(folder: RunFolder, settings: RunSettings) -> Files:
    """Name the file of the starting model, if there is one."""
    named = settings.inversion.starting_model_of(settings.inversion.wave)
    return {} if named is None else {"starting_model": folder.resolve(named)}


def starting_model(
    folder: RunFolder, settings: RunSettings, reference: SlownessModel
) -> SlownessModel:
    """Give a reference model the perturbation that the iterations start from.

    Raises
    ------
    InputError
        If the file is no model of the same wave, or covers none of the blocks.
    """
    for path in starting_model_files(folder, settings).values():
        try:
            return with_perturbation_of_file(reference, path)
        except InputError as error:
            raise InputError(str(error), where=f"inversion.starting_model, {path}") from error
    return reference


def _tell_waves(data: Residuals, wave: str, reporter: Reporter) -> None:
    """Tell which residuals the model is made from."""
    aside = int(np.count_nonzero(data.wave != wave))
    if aside:
        reporter.note(f"{wave} residuals are inverted; {aside} of the other wave are left aside")


def _tell_summary(picks: Residuals, summary: SummaryRays | None, reporter: Reporter) -> None:
    if summary is None:
        return
    clusters = summary.members["cluster"].nunique()
    reporter.note(
        f"{len(picks.residual_s)} residuals of {len(summary.members)} events summed up to "
        f"{len(summary.data.residual_s)} of {clusters} clusters; {summary.downweighted} picks "
        "stand beyond three standard deviations of their cluster and count less"
    )


class _IterationLog:
    """Keeps every accepted model as a checkpoint and tells how the iterations go.

    Parameters
    ----------
    checkpoint : pathlib.Path
        The file to keep the state in.
    reporter : Reporter
        Hears it.
    iteration : int
        Number of the iteration at work.
    """

    def __init__(self, checkpoint: Path, reporter: Reporter, iteration: int) -> None:
        self._checkpoint = checkpoint
        self._reporter = reporter
        self._iteration = iteration
        checkpoint.parent.mkdir(parents=True, exist_ok=True)

    def progress(self, stage: str, done: int, total: int) -> None:
        """Hear that a stage moves on."""
        name = f"iteration {self._iteration}" if self._iteration else "starting model"
        self._reporter.progress(f"{name}, {stage}", done, total)

    def keep(self, state: InversionState) -> None:
        """Keep an accepted model."""
        save_state(self._checkpoint, state)
        row = state.history[-1]
        self._iteration = row.iteration + 1
        name = f"iteration {row.iteration}" if row.iteration else "starting model"
        self._reporter.note(
            f"{name}: rms {row.rms_kept_s:.3f} s, variance reduction "
            f"{row.variance_reduction_percent:.0f} %, model rms {row.model_rms_percent:.2f} %"
        )


def _resumable(checkpoint: Path, reporter: Reporter) -> InversionState | None:
    if not checkpoint.exists():
        return None
    try:
        state = load_state(checkpoint)
    except RayloomError:
        reporter.note("the checkpoint cannot be read; starting afresh")
        return None
    reporter.note(f"resuming after iteration {state.iteration}")
    return state


def _write(folder: RunFolder, result: InversionResult, *, linear_system: bool) -> Files:
    files = {path.name: path for path in write_tables(folder.path, result)}
    files |= {name: folder.file(name) for name in ("model.nc", "inversion.npz")}
    result.model.write_netcdf(files["model.nc"])
    save_result(files["inversion.npz"], result)
    if linear_system:
        written = write_linear_system(folder.linear_system, result)
        files |= {f"linear_system/{path.name}": path for path in written}
    return files


def _clear(checkpoints: Path) -> None:
    for leftover in checkpoints.glob("invert_*.npz*"):
        leftover.unlink(missing_ok=True)
    if checkpoints.is_dir() and not any(checkpoints.iterdir()):
        checkpoints.rmdir()

"""From residuals to a model: the call behind ``rayloom.invert``."""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING

from threadpoolctl import threadpool_limits  # type: ignore[import-untyped]

from rayloom.inversion.assembly import build_problem
from rayloom.inversion.collect import collect_result
from rayloom.inversion.finishing import finish
from rayloom.inversion.forward_map import ForwardMap, Report
from rayloom.inversion.outer import run_outer_loop
from rayloom.inversion.result import InversionResult
from rayloom.inversion.settings import InversionSettings
from rayloom.inversion.state import InversionState
from rayloom.model import SlownessModel

if TYPE_CHECKING:
    from rayloom.residuals import Residuals


def invert(
    data: Residuals,
    model: SlownessModel,
    settings: InversionSettings | None = None,
    *,
    progress: Report | None = None,
    checkpoint: Callable[[InversionState], None] | None = None,
    resume: InversionState | None = None,
    forward: ForwardMap | None = None,
) -> InversionResult:
    """Find the model that explains residuals of distant events.

    Each round traces the rays, weighs the residuals robustly, eliminates the
    means of all (event, phase) groups exactly, solves for the total model with
    its station terms and event shifts, and halves the step while the objective
    rises. Results do not depend on the order of the rows nor on the number of
    threads, not even in their last bits. After Ctrl-C the last checkpoint holds
    the last accepted model.

    Parameters
    ----------
    data : Residuals
        Residuals, late positive, s.
    model : SlownessModel
        Blocks, reference and starting model; its wave type chooses the rows.
    settings : InversionSettings, optional
        Defaults if not given.
    progress : callable, optional
        Told (stage, done, total) with stage "tracing", "solving" or "errors of
        station terms"; total 0 means unknown.
    checkpoint : callable, optional
        Given the :class:`InversionState` after each accepted model.
    resume : InversionState, optional
        State to go on from.
    forward : ForwardMap, optional
        Another source of rays than :func:`rayloom.trace_distant`: one ray per
        usable row, in the order of the table.

    Returns
    -------
    InversionResult
        Not converging is a reason in it, not an exception.

    Raises
    ------
    InputError
        If no row can be used, a value is not finite, or the state to resume
        belongs to another problem.
    """
    settings = settings if settings is not None else InversionSettings()
    with threadpool_limits(limits=1):
        problem = build_problem(data, model, settings, forward=forward, report=progress)
        outcome = run_outer_loop(problem, resume=resume, report=progress, checkpoint=checkpoint)
        return collect_result(data, outcome, finish(outcome, progress))

"""Doing the steps of a run folder: all that are still to do, or one."""

from __future__ import annotations

from dataclasses import replace
from itertools import product
from pathlib import Path
from typing import Final

from rayloom.errors import InputError
from rayloom.outputs import write_text
from rayloom.settings import RunSettings, run_settings_text
from rayloom.workflow.folder import RunFolder
from rayloom.workflow.plan import Plan, Scope, Step
from rayloom.workflow.reporting import Reporter
from rayloom.workflow.steps import STEPS
from rayloom.workflow.waves import earlier_results, wave_parts

_USED_HEADING: Final = """\
Every setting as the last run took it, defaults included.
Written by rayloom; to change anything edit rayloom.toml.
"""


def run(path: str | Path, *, reporter: Reporter | None = None) -> list[str]:
    """Do everything still to do in a run folder.

    A step is done when its results are missing, or when the contents of its input files
    or its settings are no longer those it was done with.

    Parameters
    ----------
    path : str or pathlib.Path
        The run folder, or its part of one wave (``DIR/P``).
    reporter : Reporter, optional
        Hears what happens.

    Returns
    -------
    list of str
        Names of the steps done, with the wave where the run inverts both; empty if
        everything was up to date.

    Raises
    ------
    InputError
        If anything is wrong with the settings or the tables.
    """
    reporter = reporter or Reporter()
    folder, settings = _opened(path)
    done = Plan(folder.run, settings, _steps("run")).do_all(reporter)
    parts = wave_parts(folder, settings)
    remark = earlier_results(folder, parts)
    if remark is not None:
        reporter.note(remark)
    for part in parts:
        done += Plan(part.folder, part.settings, _steps("run", "wave")).do_all(reporter)
    if len(parts) > 1:
        done += Plan(folder, settings, _steps("waves")).do_all(reporter)
    return done


def run_step(
    path: str | Path, name: str, *, again: bool = False, reporter: Reporter | None = None
) -> bool:
    """Do one step of a run folder.

    Parameters
    ----------
    path : str or pathlib.Path
        The run folder, or its part of one wave (``DIR/P``). In the run folder a step of
        the waves is done for each.
    name : str
        The step; :data:`rayloom.workflow.steps.STEPS` lists them.
    again : bool
        Do it although its results still hold.
    reporter : Reporter, optional
        Hears what happens.

    Returns
    -------
    bool
        Whether anything had to be done.

    Raises
    ------
    InputError
        If an earlier step is still to do, or anything is wrong with settings or tables.
    """
    reporter = reporter or Reporter()
    folder, settings = _opened(path)
    step = next(step for step in STEPS if step.name == name)
    if step.scope == "run":
        return Plan(folder.run, settings, _steps("run")).do_one(name, reporter, again=again)
    parts = wave_parts(folder.run if step.scope == "waves" else folder, settings)
    plans = [Plan(part.folder, part.settings, _steps("run", "wave")) for part in parts]
    if step.scope == "wave":
        return any([plan.do_one(name, reporter, again=again) for plan in plans])
    if len(parts) == 1:
        raise InputError(
            f"'{name}' sets both waves side by side; this run inverts one (inversion.wave)"
        )
    for plan, earlier in product(plans, step.builds_on):
        plan.require(earlier, name)
    joint = Plan(folder.run, settings, (replace(step, builds_on=()),))
    return joint.do_one(name, reporter, again=again)


def _opened(path: str | Path) -> tuple[RunFolder, RunSettings]:
    folder = RunFolder.at(path)
    settings = folder.read_settings()
    _write_settings_used(folder, settings)
    return folder, settings


def _steps(*scopes: Scope) -> tuple[Step, ...]:
    return tuple(step for step in STEPS if step.scope in scopes)


def _write_settings_used(folder: RunFolder, settings: RunSettings) -> None:
    text = run_settings_text(settings, heading=_USED_HEADING, comments=False)
    known = folder.settings_used
    if not known.exists() or known.read_bytes() != text.encode():
        write_text(known, text)

"""Doing the steps of a run folder: all that are still to do, or one."""

from __future__ import annotations

from pathlib import Path
from typing import Final

from rayloom.outputs import write_text
from rayloom.settings import RunSettings, run_settings_text
from rayloom.workflow.folder import RunFolder
from rayloom.workflow.plan import Plan
from rayloom.workflow.reporting import Reporter
from rayloom.workflow.steps import STEPS

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
        The run folder.
    reporter : Reporter, optional
        Hears what happens.

    Returns
    -------
    list of str
        Names of the steps done; empty if everything was up to date.

    Raises
    ------
    InputError
        If anything is wrong with the settings or the tables.
    """
    return _plan(path).do_all(reporter or Reporter())


def run_step(
    path: str | Path, name: str, *, again: bool = False, reporter: Reporter | None = None
) -> bool:
    """Do one step of a run folder.

    Parameters
    ----------
    path : str or pathlib.Path
        The run folder.
    name : {"residuals", "invert", "export"}
        The step.
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
    return _plan(path).do_one(name, reporter or Reporter(), again=again)


def _plan(path: str | Path) -> Plan:
    folder = RunFolder(Path(path))
    settings = folder.read_settings()
    _write_settings_used(folder, settings)
    return Plan(folder, settings, STEPS)


def _write_settings_used(folder: RunFolder, settings: RunSettings) -> None:
    text = run_settings_text(settings, heading=_USED_HEADING, comments=False)
    known = folder.settings_used
    if not known.exists() or known.read_bytes() != text.encode():
        write_text(known, text)

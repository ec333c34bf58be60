"""Which steps are still to do, and why.

The main types are :class:`Step` and :class:`Plan`.
"""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from rayloom.errors import InputError
from rayloom.settings import RunSettings
from rayloom.workflow.folder import RunFolder
from rayloom.workflow.record import (
    Provenance,
    StepRecord,
    content_hash,
    content_hashes,
    machine,
    versions,
)
from rayloom.workflow.reporting import Reporter

Files = dict[str, Path]


@dataclass(frozen=True)
class Outcome:
    """What a step leaves behind.

    Parameters
    ----------
    files : dict of pathlib.Path
        The files written, by their names in the run folder.
    seeds : dict of int
        Seeds of random numbers, by use.
    remarks : dict of str
        What else is worth remembering of the step.
    """

    files: Files
    seeds: Mapping[str, int] = field(default_factory=dict)
    remarks: Mapping[str, str] = field(default_factory=dict)


@dataclass(frozen=True)
class Step:
    """One step of the job.

    Parameters
    ----------
    name : str
        The word of the command line.
    inputs : callable
        Gives the files that the step reads.
    settings : callable
        Gives the settings that bear on its result, by section.
    work : callable
        Does the step.
    """

    name: str
    inputs: Callable[[RunFolder, RunSettings], Files]
    settings: Callable[[RunSettings], dict[str, Any]]
    work: Callable[[RunFolder, RunSettings, Reporter], Outcome]


class Plan:
    """The steps of one run folder in their order, each done only when it has to be.

    Parameters
    ----------
    folder : RunFolder
        Where the run lives.
    settings : RunSettings
        What the person asks for.
    steps : sequence of Step
        In the order of the work.
    """

    def __init__(self, folder: RunFolder, settings: RunSettings, steps: tuple[Step, ...]) -> None:
        self.folder = folder
        self.settings = settings
        self.steps = steps
        self.provenance = Provenance(folder.provenance)

    def reason(self, step: Step) -> str | None:
        """Say why a step has to be done, or return None where its results still hold."""
        record = self.provenance.steps.get(step.name)
        if record is None:
            return "not done yet"
        for name in record.outputs:
            if not (self.folder.path / name).exists():
                return f"{name} is missing"
        changed = _changed_settings(record.settings, step.settings(self.settings))
        if changed:
            return changed
        return _changed_inputs(record.inputs, step.inputs(self.folder, self.settings))

    def do_all(self, reporter: Reporter) -> list[str]:
        """Do every step that is still to do.

        Returns
        -------
        list of str
            The names of the steps done.
        """
        done = []
        for step in self.steps:
            reason = self.reason(step)
            if reason is not None:
                self.do(step, reason, reporter)
                done.append(step.name)
        return done

    def do_one(self, name: str, reporter: Reporter, *, again: bool = False) -> bool:
        """Do one step, provided that the steps before it are done.

        Parameters
        ----------
        name : str
            The step.
        reporter : Reporter
            Hears what happens.
        again : bool
            Do it although its results still hold.

        Returns
        -------
        bool
            Whether anything had to be done.

        Raises
        ------
        InputError
            If an earlier step is still to do.
        """
        for step in self.steps:
            reason = self.reason(step)
            if step.name == name:
                if reason is None and not again:
                    return False
                self.do(step, reason or "asked for again", reporter)
                return True
            if reason is not None:
                raise InputError(
                    f"'{name}' builds on '{step.name}', which is still to do ({reason}); "
                    f"do it with: rayloom {step.name} {self.folder.path}, "
                    f"or everything with: rayloom run {self.folder.path}"
                )
        raise KeyError(name)

    def do(self, step: Step, reason: str, reporter: Reporter) -> None:
        """Do a step and record what it read, obeyed and wrote."""
        reporter.begin(step.name, reason)
        started = time.monotonic()
        inputs = content_hashes(step.inputs(self.folder, self.settings))
        obeyed = step.settings(self.settings)
        outcome = step.work(self.folder, self.settings, reporter)
        seconds = time.monotonic() - started
        record = StepRecord(
            inputs=inputs,
            settings=obeyed,
            outputs=content_hashes(outcome.files),
            seeds=dict(outcome.seeds),
            remarks=dict(outcome.remarks),
            versions=versions(),
            machine=machine(),
            finished=datetime.now(UTC).isoformat(timespec="seconds"),
            seconds=round(seconds, 3),
        )
        self._remove_stale(step.name, record)
        self.provenance.store(step.name, record)
        reporter.finish(step.name, seconds)

    def _remove_stale(self, name: str, record: StepRecord) -> None:
        """Remove what the step wrote before and no longer writes, unless it was changed since."""
        before = self.provenance.steps.get(name)
        for file, digest in (before.outputs if before else {}).items():
            path = self.folder.path / file
            if file not in record.outputs and path.exists() and content_hash(path) == digest:
                path.unlink()


def _changed_settings(before: Mapping[str, Any], now: Mapping[str, Any]) -> str | None:
    old, new = dict(_leaves(before)), dict(_leaves(now))
    changed = [key for key in {**old, **new} if old.get(key) != new.get(key)]
    if not changed:
        return None
    key = changed[0]
    more = f" and {len(changed) - 1} more" if len(changed) > 1 else ""
    change = f"{key} changed from {_shown(old.get(key))} to {_shown(new.get(key))}"
    return f"{change}{more}"


def _leaves(settings: Mapping[str, Any], path: str = "") -> Iterator[tuple[str, Any]]:
    for key, value in settings.items():
        if isinstance(value, Mapping):
            yield from _leaves(value, f"{path}{key}.")
        else:
            yield f"{path}{key}", value


def _shown(value: object) -> str:
    text = "nothing" if value is None else str(value)
    return text if len(text) <= 40 else f"{text[:37]}…"


def _changed_inputs(before: Mapping[str, str], files: Files) -> str | None:
    if set(before) != set(files):
        return "it reads other files than before"
    now = content_hashes(files)
    changed = [name for name, digest in now.items() if before[name] != digest]
    return f"{' and '.join(changed)} changed" if changed else None

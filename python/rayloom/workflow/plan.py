"""Which steps are still to do, and why.

The main types are :class:`Step` and :class:`Plan`.
"""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field
from datetime import UTC, datetime
from pathlib import Path
from typing import Any, Literal

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

Scope = Literal["run", "wave", "waves"]
"""Once for the run, once for each wave, or once for all waves when they are done."""


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
    builds_on : tuple of str
        Steps that must be done before.
    on_request : bool
        Whether only its own command does it; a run of everything leaves it out.
    scope : {"wave", "run", "waves"}
        Whether it is done for each wave, in the folder of its results; once for the run
        before anything is done for a wave; or once after all waves, where a run inverts
        both. The settings that a step of a wave is given name that wave
        (``settings.inversion.wave``).
    """

    name: str
    inputs: Callable[[RunFolder, RunSettings], Files]
    settings: Callable[[RunSettings], dict[str, Any]]
    work: Callable[[RunFolder, RunSettings, Reporter], Outcome]
    builds_on: tuple[str, ...] = ()
    on_request: bool = False
    scope: Scope = "wave"


class Plan:
    """The steps of one run folder in their order, each done only when it has to be.

    Parameters
    ----------
    folder : RunFolder
        Where results go: the run folder, or its part of one wave. Steps that are done once
        for the run keep to the run folder.
    settings : RunSettings
        What the person asks for.
    steps : sequence of Step
        In the order of the work.
    """

    def __init__(self, folder: RunFolder, settings: RunSettings, steps: tuple[Step, ...]) -> None:
        self.folder = folder
        self.settings = settings
        self.steps = steps
        homes = {folder, folder.run}
        self._records = {home: Provenance(home.provenance) for home in homes}

    def home(self, step: Step) -> RunFolder:
        """Return the folder in which a step works."""
        return self.folder if step.scope == "wave" else self.folder.run

    def label(self, step: Step) -> str:
        """Name a step, and its wave where the run inverts several."""
        wave = self.home(step).wave
        return step.name if wave is None else f"{step.name} {wave}"

    def reason(self, step: Step) -> str | None:
        """Say why a step has to be done, or return None where its results still hold."""
        home = self.home(step)
        record = self._records[home].steps.get(step.name)
        if record is None:
            return "not done yet"
        for name in record.outputs:
            if not (home.path / name).exists():
                return f"{name} is missing"
        changed = _changed_settings(record.settings, step.settings(self.settings))
        if changed:
            return changed
        return _changed_inputs(record.inputs, step.inputs(home, self.settings))

    def do_all(self, reporter: Reporter) -> list[str]:
        """Do every step that is still to do, but for those done on request only.

        Results of the latter that no longer hold are mentioned.

        Returns
        -------
        list of str
            The steps done, as :meth:`label` names them.
        """
        done = []
        for step in self.steps:
            reason = self.reason(step)
            if reason is None:
                continue
            if not step.on_request:
                self.do(step, reason, reporter)
                done.append(self.label(step))
            elif step.name in self._records[self.home(step)].steps:
                reporter.note(
                    f"the results of '{self.label(step)}' no longer hold ({reason}); "
                    f"renew them with: rayloom {step.name} {self.folder.path}"
                )
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
        step = self.step(name)
        for earlier in step.builds_on:
            self.require(earlier, step.name)
        reason = self.reason(step)
        if reason is None and not again:
            return False
        self.do(step, reason or "asked for again", reporter)
        return True

    def step(self, name: str) -> Step:
        """Return a step by its name."""
        return next(step for step in self.steps if step.name == name)

    def require(self, name: str, later: str) -> None:
        """See to it that a step and those before it are done.

        Parameters
        ----------
        name : str
            The step.
        later : str
            The step that builds on it.

        Raises
        ------
        InputError
            If one of them is still to do.
        """
        step = self.step(name)
        for earlier in step.builds_on:
            self.require(earlier, name)
        reason = self.reason(step)
        if reason is not None:
            raise InputError(
                f"'{later}' builds on '{self.label(step)}', which is still to do ({reason}); "
                f"do it with: rayloom {name} {self.home(step).path}, "
                f"or everything with: rayloom run {self.folder.run.path}"
            )

    def do(self, step: Step, reason: str, reporter: Reporter) -> None:
        """Do a step and record what it read, obeyed and wrote."""
        home = self.home(step)
        reporter.begin(self.label(step), reason)
        started = time.monotonic()
        inputs = content_hashes(step.inputs(home, self.settings))
        obeyed = step.settings(self.settings)
        outcome = step.work(home, self.settings, reporter)
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
        self._remove_stale(step, record)
        self._records[home].store(step.name, record)
        reporter.finish(self.label(step), seconds)

    def _remove_stale(self, step: Step, record: StepRecord) -> None:
        """Remove what the step wrote before and no longer writes, unless it was changed since."""
        home = self.home(step)
        before = self._records[home].steps.get(step.name)
        for file, digest in (before.outputs if before else {}).items():
            path = home.path / file
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

"""What a run folder remembers of the steps that made it: ``provenance.json``.

The main types are :class:`StepRecord` and :class:`Provenance`. Steps are judged by
the contents of files, never by their dates, so that copying a folder changes nothing.
"""

from __future__ import annotations

import hashlib
import importlib.metadata
import json
import os
import platform
from collections.abc import Iterable, Mapping
from contextlib import suppress
from dataclasses import asdict, dataclass, field
from pathlib import Path
from typing import Any

from rayloom.errors import FileAccessError
from rayloom.survey.text_table import unreadable
from rayloom.writing import replacing

_PACKAGES = ("rayloom", "numpy", "scipy", "pandas", "xarray", "h5netcdf", "pydantic")


@dataclass(frozen=True)
class StepRecord:
    """What one finished step read, obeyed and wrote.

    Parameters
    ----------
    inputs : dict of str
        SHA-256 of each file read, by its name.
    settings : dict
        The settings that bear on the step, by section.
    outputs : dict of str
        SHA-256 of each file written, by its name.
    seeds : dict of int
        Seeds of random numbers, by use.
    remarks : dict of str
        What else is worth remembering of the step.
    versions : dict of str
        Versions of the program and of the libraries under it.
    machine : dict
        Processor features and operating system: results are the same to the last
        bit only where these agree.
    finished : str
        When the step ended, ISO 8601 UTC.
    seconds : float
        How long it took.
    """

    inputs: dict[str, str]
    settings: dict[str, Any]
    outputs: dict[str, str]
    seeds: dict[str, int] = field(default_factory=dict)
    remarks: dict[str, str] = field(default_factory=dict)
    versions: dict[str, str] = field(default_factory=dict)
    machine: dict[str, Any] = field(default_factory=dict)
    finished: str = ""
    seconds: float = 0.0


class Provenance:
    """The records of a run folder, kept in one JSON file.

    Parameters
    ----------
    path : pathlib.Path
        ``provenance.json``. A missing file means that nothing was done yet.

    Raises
    ------
    FileAccessError
        If the file is there and cannot be read.
    """

    def __init__(self, path: Path) -> None:
        self.path = path
        self.steps = _read_steps(path)

    def store(self, step: str, record: StepRecord) -> None:
        """Remember a finished step and write the file."""
        self.steps[step] = record
        contents = {"steps": {name: asdict(entry) for name, entry in self.steps.items()}}
        with replacing(self.path) as temporary:
            Path(temporary).write_text(
                json.dumps(contents, indent=2, ensure_ascii=False) + "\n", encoding="utf-8"
            )


def content_hash(path: Path) -> str:
    """Return the SHA-256 of a file's bytes, or of all files in a folder, in hexadecimal.

    Raises
    ------
    FileAccessError
        If the file cannot be read.
    """
    try:
        if path.is_dir():
            inside = sorted(file for file in path.iterdir() if file.is_file())
            return fingerprint([(file.name, content_hash(file)) for file in inside])
        with path.open("rb") as stream:
            return hashlib.file_digest(stream, "sha256").hexdigest()
    except OSError as error:
        raise unreadable(path, error) from error


def content_hashes(files: Mapping[str, Path]) -> dict[str, str]:
    """Return the SHA-256 of each named file."""
    return {name: content_hash(path) for name, path in files.items()}


def fingerprint(*parts: object) -> str:
    """Return a short hash of anything that JSON can hold."""
    text = json.dumps(parts, sort_keys=True, default=str)
    return hashlib.sha256(text.encode()).hexdigest()[:16]


def versions(packages: Iterable[str] = _PACKAGES) -> dict[str, str]:
    """Return the versions of Python and of the packages that shape the numbers."""
    found = {name: importlib.metadata.version(name) for name in packages}
    with suppress(importlib.metadata.PackageNotFoundError):
        found["obspy"] = importlib.metadata.version("obspy")
    return {"python": platform.python_version(), **found}


def machine() -> dict[str, Any]:
    """Describe the processor and operating system."""
    import numpy as np

    simd = np.show_config(mode="dicts")["SIMD Extensions"]
    return {
        "system": f"{platform.system()} {platform.release()}",
        "processor": platform.machine(),
        "cpu_features": [*simd.get("baseline", []), *simd.get("found", [])],
        "cpu_count": os.cpu_count(),
    }


def _read_steps(path: Path) -> dict[str, StepRecord]:
    if not path.exists():
        return {}
    try:
        contents = json.loads(path.read_text(encoding="utf-8"))
        return {name: StepRecord(**entry) for name, entry in contents["steps"].items()}
    except (OSError, ValueError, KeyError, TypeError, AttributeError) as error:
        raise FileAccessError(
            f"{path}: cannot be read as the record of earlier steps ({error}). "
            "Delete it to do every step again"
        ) from error

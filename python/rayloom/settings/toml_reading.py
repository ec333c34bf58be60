"""Settings read from TOML, every problem named on a line of its own.

The main function is :func:`read_settings`.
"""

from __future__ import annotations

import tomllib
from pathlib import Path
from typing import TypeVar

from pydantic import BaseModel, ValidationError

from rayloom.errors import FileAccessError, FileProblemsError, InputError
from rayloom.settings.problems import describe_problems

Settings = TypeVar("Settings", bound=BaseModel)


def read_settings(path: Path, kind: type[Settings]) -> Settings:
    """Read a settings file.

    Parameters
    ----------
    path : pathlib.Path
        A TOML file.
    kind : type of pydantic.BaseModel
        The class that the file must satisfy.

    Returns
    -------
    pydantic.BaseModel
        An instance of ``kind``.

    Raises
    ------
    FileAccessError
        If the file cannot be read.
    InputError
        If it is not TOML.
    FileProblemsError
        If keys are unknown or missing or values out of range: all in one go.
    """
    text = _read_text(path)
    try:
        values = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise InputError(
            f"not valid TOML: {error}. Texts stand in quotes, lists in square brackets, "
            "every key = value on its own line",
            where=str(path),
        ) from error
    try:
        return kind.model_validate(values)
    except ValidationError as error:
        raise FileProblemsError(str(path), describe_problems(error, kind, text)) from error


def _read_text(path: Path) -> str:
    try:
        return path.read_text(encoding="utf-8")
    except UnicodeDecodeError as error:
        raise InputError("not a text file in UTF-8", where=str(path)) from error
    except OSError as error:
        raise FileAccessError(f"{path}: cannot be read: {error.strerror}") from error

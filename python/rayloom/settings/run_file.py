"""The settings of a run from and to its file."""

from __future__ import annotations

from pathlib import Path

from rayloom.settings.run import TRACING_KEYS, RunSettings
from rayloom.settings.toml_reading import read_settings
from rayloom.settings.toml_writing import settings_text


def read_run_settings(path: str | Path) -> RunSettings:
    """Read the settings of a run.

    Parameters
    ----------
    path : str or pathlib.Path
        ``rayloom.toml``.

    Returns
    -------
    RunSettings

    Raises
    ------
    FileAccessError
        If the file cannot be read.
    InputError
        If it is not TOML, or with every unknown or missing key and wrong value.
    """
    return read_settings(Path(path), RunSettings)


def run_settings_text(settings: RunSettings, *, heading: str, comments: bool = True) -> str:
    """Write the settings of a run as TOML.

    Parameters
    ----------
    settings : RunSettings
        The settings.
    heading : str
        Text set above everything as a comment.
    comments : bool
        Whether each key carries its description.

    Returns
    -------
    str
        TOML.
    """
    hidden = {"inversion": TRACING_KEYS}
    return settings_text(settings, heading=heading, comments=comments, hidden=hidden)

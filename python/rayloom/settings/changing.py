"""Single keys of a settings file changed, everything else left as the person wrote it.

The main function is :func:`change_run_settings`.
"""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import tomlkit
from tomlkit.items import Table

from rayloom.errors import InputError
from rayloom.outputs import write_text
from rayloom.settings.run_file import read_run_settings


def change_run_settings(path: str | Path, section: str, values: Mapping[str, Any]) -> None:
    """Set keys of one section; comments, order and all other keys stay.

    Parameters
    ----------
    path : str or pathlib.Path
        ``rayloom.toml``.
    section : str
        The section, made if it is not there.
    values : mapping
        New values by key.

    Raises
    ------
    FileAccessError
        If the file cannot be read or written.
    InputError
        If it is not in order as it stands, or the section is no table.
    """
    path = Path(path)
    read_run_settings(path)
    document = tomlkit.parse(path.read_text(encoding="utf-8"))
    table = document.setdefault(section, tomlkit.table())
    if not isinstance(table, Table):
        raise InputError(
            f"write the section as [{section}] with its keys below, then try again",
            where=str(path),
        )
    for key, value in values.items():
        table[key] = list(value) if isinstance(value, tuple) else value
    write_text(path, tomlkit.dumps(document))

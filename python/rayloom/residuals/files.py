"""Writing tables as CSV, whole or not at all."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

from rayloom.errors import FileAccessError

if TYPE_CHECKING:
    import pandas as pd


def write_frame(frame: pd.DataFrame, path: str | Path) -> None:
    """Write a data frame as CSV under a temporary name, then rename it.

    Raises
    ------
    FileAccessError
        If the file cannot be written.
    """
    target = Path(path)
    partial = target.with_name(f".{target.name}.partial")
    try:
        frame.to_csv(partial, index=False)
        partial.replace(target)
    except OSError as error:
        partial.unlink(missing_ok=True)
        reason = error.strerror or str(error)
        raise FileAccessError(f"{path}: cannot be written ({reason}); check the folder") from error

"""Writing so that no half file ever bears a final name."""

from __future__ import annotations

import secrets
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path
from typing import TYPE_CHECKING

from rayloom.errors import FileAccessError

if TYPE_CHECKING:
    import pandas as pd


@contextmanager
def replacing(path: str | Path) -> Iterator[Path]:
    """Give a temporary name to write to, and rename it when all went well.

    The temporary file lies in the same folder and keeps the suffix, so that
    writers which choose a format by suffix work unchanged. Missing folders are
    created. When the body raises, the temporary file is removed and a file
    that already bears the final name stays as it was.

    Parameters
    ----------
    path : str or Path
        The final name.

    Yields
    ------
    Path
        The temporary name.

    Raises
    ------
    FileAccessError
        The folder cannot be created, or the file cannot be written or renamed.
    """
    final = Path(path)
    temporary = final.with_name(f".{final.stem}.{secrets.token_hex(4)}{final.suffix}")
    try:
        final.parent.mkdir(parents=True, exist_ok=True)
        yield temporary
        temporary.replace(final)
    except OSError as error:
        reason = error.strerror or str(error)
        raise FileAccessError(
            f"{final}: cannot be written ({reason}); "
            "check that the folder exists, is writable and has room"
        ) from error
    finally:
        with suppress(OSError):
            temporary.unlink()


def write_text(path: str | Path, text: str) -> None:
    """Write a text file in UTF-8, all of it or nothing.

    Parameters
    ----------
    path : str or Path
        The final name.
    text : str
        The content.

    Raises
    ------
    FileAccessError
        The file cannot be written.
    """
    with replacing(path) as temporary:
        temporary.write_text(text, encoding="utf-8")


def write_frame(frame: pd.DataFrame, path: str | Path) -> None:
    """Write a data frame as CSV, all of it or nothing.

    Parameters
    ----------
    frame : pandas.DataFrame
        The table; its index is left out.
    path : str or Path
        The final name.

    Raises
    ------
    FileAccessError
        The file cannot be written.
    """
    with replacing(path) as temporary:
        frame.to_csv(temporary, index=False)

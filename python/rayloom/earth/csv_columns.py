"""Columns of numbers from a CSV file, every fault with its line: :func:`read_columns`."""

from __future__ import annotations

import csv
import difflib
import io
import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from rayloom.errors import FileAccessError, FileProblemsError

_BINARY = "not a text file; expected CSV in UTF-8"


@dataclass(frozen=True)
class Columns:
    """Columns of a file.

    Attributes
    ----------
    values : tuple of ndarray, shape (n,)
        One per name asked for, in that order.
    labels : tuple of str
        ``line 4`` for each row.
    """

    values: tuple[NDArray[np.float64], ...]
    labels: tuple[str, ...]


def read_columns(path: str | Path, names: Sequence[str]) -> Columns:
    """Read columns of numbers.

    Parameters
    ----------
    path : path
        CSV in UTF-8 with a header; lines that start with ``#`` are comments, further
        columns are ignored.
    names : sequence of str
        The columns, as the header spells them.

    Returns
    -------
    Columns

    Raises
    ------
    FileAccessError
        If the file cannot be read.
    FileProblemsError
        With every cell that is no finite number.
    """
    text = _text(path)
    try:
        rows = list(_rows(text))
    except csv.Error as error:
        raise FileProblemsError(str(path), [f"not a CSV table ({error})"]) from error
    if not rows:
        raise FileProblemsError(str(path), ["no header; expected " + ",".join(names)])
    places = _places(rows[0], names, str(path))
    problems: list[str] = []
    values: list[list[float]] = []
    for line, cells in rows[1:]:
        row = []
        for name, place in zip(names, places, strict=True):
            cell = cells[place].strip() if place < len(cells) else ""
            number = _number(cell)
            if not math.isfinite(number):
                shown = repr(cell if len(cell) <= 40 else f"{cell[:37]}…")
                problems.append(f"line {line}, {name}: expected a number, got {shown}")
            row.append(number)
        values.append(row)
    if problems:
        raise FileProblemsError(str(path), problems)
    table = np.array(values, dtype=np.float64).reshape(-1, len(names))
    return Columns(
        values=tuple(np.ascontiguousarray(column) for column in table.T),
        labels=tuple(f"line {line}" for line, _ in rows[1:]),
    )


def _text(path: str | Path) -> str:
    try:
        content = Path(path).read_bytes()
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        raise FileProblemsError(str(path), [_BINARY]) from error
    except OSError as error:
        reason = error.strerror or str(error)
        raise FileAccessError(f"{path}: cannot be read: {reason}") from error
    except ValueError as error:
        raise FileAccessError(f"{path!r}: not a file name ({error}); check the path") from error
    if "\0" in text:
        raise FileProblemsError(str(path), [_BINARY])
    return text


def _rows(text: str) -> Iterator[tuple[int, list[str]]]:
    reader = csv.reader(io.StringIO(text, newline=""))
    start = 1
    for cells in reader:
        if any(cell.strip() for cell in cells) and not cells[0].lstrip().startswith("#"):
            yield start, cells
        start = reader.line_num + 1


def _places(header: tuple[int, list[str]], names: Sequence[str], source: str) -> list[int]:
    line, cells = header
    found = [cell.strip() for cell in cells]
    problems = []
    for name in names:
        if found.count(name) > 1:
            problems.append(f"line {line}: column {name} stands {found.count(name)} times")
    missing = [name for name in names if name not in found]
    if missing:
        unused = [cell for cell in found if cell and cell not in names]
        close = difflib.get_close_matches(missing[0], unused, n=1)
        hint = f"; did you mean {missing[0]!r} by {close[0]!r}?" if close else ""
        problems.append(f"line {line}: column {', '.join(missing)} missing from the header{hint}")
    if problems:
        raise FileProblemsError(source, problems)
    return [found.index(name) for name in names]


def _number(cell: str) -> float:
    """Return the number a cell holds, NaN if none (Python's digit underscores are refused)."""
    if "_" in cell or not cell.isascii():
        return math.nan
    try:
        return float(cell)
    except ValueError:
        return math.nan

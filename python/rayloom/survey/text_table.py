"""A CSV file as columns of text, each row with its line number."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Final

from rayloom.errors import FileAccessError, FileProblemsError

if TYPE_CHECKING:
    import pandas as pd

CELL_LIMIT: Final = 131_072
_WANTED: Final = "expected a CSV table in UTF-8 text; export it as CSV and try again"
_OTHER_FORMATS: Final = {
    b"PK\x03\x04": "a spreadsheet or zip archive",
    b"\xd0\xcf\x11\xe0": "an old spreadsheet",
    b"\x1f\x8b": "a gzip archive",
    b"\x89HDF": "an HDF5 or NetCDF file",
    b"CDF": "a NetCDF file",
    b"%PDF": "a PDF document",
    b"\xff\xfe": "text in UTF-16",
    b"\xfe\xff": "text in UTF-16",
}


@dataclass
class Problems:
    """Everything wrong with one table, gathered before any of it is raised.

    Parameters
    ----------
    source : str
        The file, or what else the table comes from.
    place : str
        What a row number counts: lines of a file or rows of a data frame.
    """

    source: str
    place: str = "line"
    _found: list[tuple[int, str]] = field(default_factory=list)

    def add(self, line: int, text: str) -> None:
        """Note a problem at a line; line 0 stands for the whole file."""
        self._found.append((line, f"{self.place} {line}, {text}" if line else text))

    def __bool__(self) -> bool:
        return bool(self._found)

    def raise_if_any(self) -> None:
        """Raise all problems, in the order of their lines.

        Raises
        ------
        FileProblemsError
            If there is any.
        """
        if self._found:
            ordered = sorted(self._found, key=lambda found: found[0])
            raise FileProblemsError(self.source, [text for _, text in ordered])


@dataclass(frozen=True)
class TextTable:
    """The cells of a table as text, stripped of surrounding blanks.

    Parameters
    ----------
    columns : dict of str to list of str
        The cells by column name (lower case).
    lines : list of int
        Line of the file at which each row starts.
    problems : Problems
        What is wrong so far; readers add to it.
    """

    columns: dict[str, list[str]]
    lines: list[int]
    problems: Problems

    @property
    def source(self) -> str:
        """The file, or what else the table comes from."""
        return self.problems.source

    def __len__(self) -> int:
        return len(self.lines)


def read_text_table(path: str | Path) -> TextTable:
    """Read a CSV file with a header into columns of text.

    A byte-order mark and any line ending are accepted; blank rows are skipped.

    Raises
    ------
    FileAccessError
        If the file cannot be read.
    FileProblemsError
        If it is empty, not text in UTF-8, or not a table.
    """
    try:
        content = Path(path).read_bytes()
    except OSError as error:
        reason = error.strerror or str(error)
        raise FileAccessError(f"{path}: cannot be read ({reason}); check the path") from error
    except ValueError as error:
        raise FileAccessError(f"{path!r}: not a file name ({error}); check the path") from error
    problems = Problems(str(path))
    return _table_of_text(_decoded(content, problems), problems)


def text_table_of_frame(frame: pd.DataFrame, source: str) -> TextTable:
    """Take a pandas data frame as a table of text, so that the same checks apply."""
    problems = Problems(source, place="row")
    table = _table_of_text(frame.to_csv(index=False), problems)
    return TextTable(table.columns, [line - 1 for line in table.lines], problems)


def _decoded(content: bytes, problems: Problems) -> str:
    if not content.strip():
        problems.add(0, "the file is empty; expected a header line and one line per row")
        problems.raise_if_any()
    for start, kind in _OTHER_FORMATS.items():
        if content.startswith(start):
            problems.add(0, f"the file is {kind}; {_WANTED}")
            problems.raise_if_any()
    if b"\x00" in content:
        line = content[: content.index(b"\x00")].count(b"\n") + 1
        problems.add(line, f"a zero byte: the file is binary; {_WANTED}")
        problems.raise_if_any()
    try:
        return content.decode("utf-8-sig")
    except UnicodeDecodeError:
        _note_encoding(content, problems)
        problems.raise_if_any()
        raise


def _note_encoding(content: bytes, problems: Problems) -> None:
    for number, line in enumerate(content.split(b"\n"), start=1):
        try:
            line.decode("utf-8")
        except UnicodeDecodeError as error:
            shown = line[error.start]
            problems.add(
                number,
                f"byte 0x{shown:02X} at position {error.start + 1} is not UTF-8; "
                "save the file with the encoding UTF-8",
            )


def _table_of_text(text: str, problems: Problems) -> TextTable:
    rows, lines = _rows(text, problems)
    if not rows:
        problems.add(0, "the file is empty; expected a header line and one line per row")
        problems.raise_if_any()
    header = [name.lower() for name in rows[0]]
    _check_header(header, text, problems)
    kept, kept_lines = _even_rows(rows[1:], lines[1:], len(header), problems)
    if not kept and not problems:
        problems.add(0, "the table has a header and no rows; expected one line per row")
    if not kept:
        problems.raise_if_any()
    columns = {
        name: list(cells) for name, cells in zip(header, zip(*kept, strict=True), strict=True)
    }
    return TextTable(columns, kept_lines, problems)


def _rows(text: str, problems: Problems) -> tuple[list[list[str]], list[int]]:
    """Split text into stripped cells; a row starts after the line the last one ended on."""
    reader = csv.reader(io.StringIO(text, newline=""), strict=True)
    rows: list[list[str]] = []
    lines: list[int] = []
    start = 1
    try:
        for cells in reader:
            stripped = [cell.strip() for cell in cells]
            if any(stripped):
                rows.append(stripped)
                lines.append(start)
            start = reader.line_num + 1
    except csv.Error as error:
        hint = f"more than {CELL_LIMIT} characters in a cell, or a quotation mark left open"
        problems.add(start, f"not a CSV row ({error}); look for {hint}")
        problems.raise_if_any()
    return rows, lines


def _check_header(header: list[str], text: str, problems: Problems) -> None:
    for sign, name in ((";", "semicolons"), ("\t", "tabs"), ("|", "vertical bars")):
        if len(header) == 1 and sign in header[0]:
            problems.add(1, f"the columns are separated by {name}; expected commas")
            problems.raise_if_any()
    if text.lstrip().startswith("<"):
        problems.add(1, "the file is XML; expected a CSV table with a header line")
        problems.raise_if_any()
    for name in sorted({name for name in header if name and header.count(name) > 1}):
        problems.add(1, f"column {name} stands {header.count(name)} times; expected it once")


def _even_rows(
    rows: Iterable[list[str]], lines: Iterable[int], width: int, problems: Problems
) -> tuple[list[list[str]], list[int]]:
    """Keep the rows that have a cell for every column; extra blank cells at the end are cut."""
    kept: list[list[str]] = []
    kept_lines: list[int] = []
    for cells, line in zip(rows, lines, strict=True):
        if len(cells) < width or any(cells[width:]):
            problems.add(
                line,
                f"{len(cells)} cells where the header names {width} columns; expected one cell "
                "per column (decimal commas and commas in text split a cell)",
            )
            continue
        kept.append(cells[:width])
        kept_lines.append(line)
    return kept, kept_lines

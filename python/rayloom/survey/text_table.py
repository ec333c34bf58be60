"""A table file as columns of text, each row with its line number."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Final

from rayloom.errors import FileAccessError
from rayloom.survey.notices import Notice
from rayloom.survey.problems import Problems

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
    remarks : list of Notice
        What was done to the file's contents before they became this table.
    """

    columns: dict[str, list[str]]
    lines: list[int]
    problems: Problems
    remarks: list[Notice] = field(default_factory=list)

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
    return csv_table(read_bytes(path), Problems(str(path)))


def read_bytes(path: str | Path, limit: int = -1) -> bytes:
    """Read a file, or its first ``limit`` bytes.

    Raises
    ------
    FileAccessError
        If it cannot be read.
    """
    try:
        with Path(path).open("rb") as stream:
            return stream.read(limit)
    except OSError as error:
        raise unreadable(path, error) from error
    except ValueError as error:
        raise FileAccessError(f"{path!r}: not a file name ({error}); check the path") from error


def unreadable(path: str | Path, error: OSError) -> FileAccessError:
    """Make the error that tells why a file or folder cannot be read."""
    reason = error.strerror or str(error)
    return FileAccessError(f"{path}: cannot be read ({reason}); check the path")


def csv_table(content: bytes, problems: Problems) -> TextTable:
    """Take the bytes of a CSV file as a table.

    Raises
    ------
    FileProblemsError
        If they are empty, not text in UTF-8, or not a table.
    """
    return table_of_text(decoded(content, problems), problems)


def text_table_of_frame(frame: pd.DataFrame, source: str) -> TextTable:
    """Take a pandas data frame as a table of text, so that the same checks apply."""
    from pandas.api.types import is_datetime64_any_dtype

    problems = Problems(source, place="row")
    written = frame.copy(deep=False)
    for number, kind in enumerate(frame.dtypes):
        if is_datetime64_any_dtype(kind):
            times = frame.iloc[:, number].map(lambda time: time.isoformat(), na_action="ignore")
            written.isetitem(number, times.tolist())
    table = table_of_text(written.to_csv(index=False), problems)
    return TextTable(table.columns, [line - 1 for line in table.lines], problems)


def decoded(content: bytes, problems: Problems) -> str:
    """Return the text of a table's bytes in UTF-8, without a byte-order mark.

    Raises
    ------
    FileProblemsError
        If they are empty, of another kind of file, or not UTF-8.
    """
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


def table_of_text(text: str, problems: Problems, *, separator: str = ",") -> TextTable:
    """Split text into a table: its first row names the columns (in lower case).

    Parameters
    ----------
    text : str
        The table.
    problems : Problems
        Gets uneven rows and repeated columns.
    separator : str
        What stands between cells. Quotation marks enclose cells only with commas.

    Raises
    ------
    FileProblemsError
        If there is no row.
    """
    rows, lines = _rows(text, problems, separator)
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


def _rows(text: str, problems: Problems, separator: str) -> tuple[list[list[str]], list[int]]:
    """Split text into stripped cells; a row starts after the line the last one ended on."""
    reader = csv.reader(
        io.StringIO(text, newline=""),
        delimiter=separator,
        quoting=csv.QUOTE_MINIMAL if separator == "," else csv.QUOTE_NONE,
        strict=True,
    )
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

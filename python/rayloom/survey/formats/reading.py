"""One table from files of any format: single, several, or a folder of them."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Final, TypeAlias, TypeGuard

from rayloom.errors import FileAccessError, InputError
from rayloom.survey.formats.fdsn_text import read_fdsn_events, read_fdsn_stations
from rayloom.survey.formats.parsing import Advance
from rayloom.survey.formats.quake_ml import read_quake_ml_events, read_quake_ml_picks
from rayloom.survey.formats.recognition import (
    HEAD_BYTES,
    Content,
    Format,
    contents_of,
    recognise,
)
from rayloom.survey.formats.station_xml import read_station_xml
from rayloom.survey.notices import Notice, few
from rayloom.survey.problems import FileLine, Problems
from rayloom.survey.text_table import (
    TextTable,
    csv_table,
    read_bytes,
    text_table_of_frame,
    unreadable,
)

if TYPE_CHECKING:
    import pandas as pd

Paths = str | Path | Sequence[str | Path]
"""A file, a folder of files, or several of either."""

Source: TypeAlias = "Paths | pd.DataFrame"
"""What a table is read from: files, or a data frame with the columns of a file."""

Progress = Callable[[int, int], None]
"""Hears the bytes read and the bytes in all."""

Fit = Callable[[TextTable], TextTable]
"""Leaves out the rows of a foreign catalogue that do not concern the survey."""

_HIGHEST_KM: Final = 9.0
_EXPECTED: Final[dict[Content, str]] = {
    "stations": "stations as CSV, StationXML or FDSN station text",
    "events": "events as CSV, QuakeML or FDSN event text",
    "picks": "picks as CSV or QuakeML",
    "residuals": "residuals as CSV",
}


def read_table(
    paths: Source, content: Content, *, fit: Fit | None = None, progress: Progress | None = None
) -> TextTable:
    """Read stations, events, picks or residuals as one table of text.

    Of a folder, the files that hold such content count, told by what stands in
    them; subfolders and hidden files do not.

    Parameters
    ----------
    paths : path, sequence of paths or DataFrame
        Files or folders; or a data frame with the columns of the CSV file.
    content : {"stations", "events", "picks", "residuals"}
        What they hold.
    fit : callable, optional
        Applied to each table that comes from a catalogue (QuakeML).
    progress : callable, optional
        Called with the bytes read and the bytes in all.

    Raises
    ------
    FileAccessError
        If a file cannot be read, or a folder holds nothing of the kind.
    FileProblemsError
        With what is wrong with the first file that cannot be understood at all.
    MissingExtraError
        If a file is XML and obspy is not installed.
    """
    if _is_frame(paths):
        return text_table_of_frame(paths, f"{content} frame")
    files, passed_over = _files(paths, content)
    sizes = [_size(file) for file in files]
    tables = []
    for number, file in enumerate(files):
        before, size = sum(sizes[:number]), sizes[number]
        tables.append(_one_table(file, content, fit, _share(progress, before, size, sum(sizes))))
        if progress is not None:
            progress(before + size, sum(sizes))
    table = tables[0] if len(tables) == 1 else _joined(tables)
    if not len(table) and not table.problems:
        told = "".join(f" ({notice.detail})" for notice in table.remarks)
        table.problems.add(0, f"no {content} are left{told}")
        table.problems.raise_if_any()
    table.remarks.extend(passed_over)
    return table


def _is_frame(source: Source) -> TypeGuard[pd.DataFrame]:
    return not isinstance(source, str | Path | Sequence) and hasattr(source, "to_csv")


def total_bytes(paths: Source, content: Content) -> int:
    """Return how many bytes :func:`read_table` is going to read."""
    if _is_frame(paths):
        return 0
    return sum(_size(file) for file in _files(paths, content)[0])


def _one_table(file: str | Path, content: Content, fit: Fit | None, advance: Advance) -> TextTable:
    data = read_bytes(file)
    problems = Problems(str(file))
    form = recognise(data[:HEAD_BYTES])
    if form == "CSV":
        return csv_table(data, problems)
    if form == "StationXML" and content == "stations":
        return read_station_xml(data, problems, advance)
    if form == "QuakeML" and content == "events":
        return _at_or_below_sea_level(read_quake_ml_events(data, problems, advance))
    if form == "QuakeML" and content == "picks":
        table = read_quake_ml_picks(data, problems, advance)
        return fit(table) if fit is not None else table
    held = contents_of(form, data[:HEAD_BYTES])
    if form == "FDSN text" and content == "events" and "events" in held:
        return _at_or_below_sea_level(read_fdsn_events(data, problems))
    if form == "FDSN text" and content == "stations" and "events" not in held:
        return read_fdsn_stations(data, problems)
    raise _misplaced(problems, form, held, content, data)


def _misplaced(
    problems: Problems, form: Format, held: Sequence[Content], content: Content, data: bytes
) -> Exception:
    """Tell that a file holds something else."""
    kind = f"{form} of {' and '.join(held)}" if held else form
    declares = form == "XML" and b"<!DOCTYPE" in data[:HEAD_BYTES].replace(b"\0", b"")
    hint = " without a document type (DOCTYPE)" if declares else ""
    problems.add(0, f"the file is {kind}; expected {_EXPECTED[content]}{hint}")
    return problems.error()


def _at_or_below_sea_level(table: TextTable) -> TextTable:
    """Bring hypocentres above sea level down to it, with a notice."""
    above = []
    for row, cell in enumerate(table.columns.get("depth_km", [])):
        try:
            is_above = float(cell) < 0.0
        except ValueError:
            continue
        if is_above and float(cell) >= -_HIGHEST_KM:
            above.append(table.columns["event"][row] if "event" in table.columns else cell)
            table.columns["depth_km"][row] = "0"
    if above:
        detail = (
            f"{len(above)} events of {table.source} lie above sea level ({few(above)}); "
            "taken at depth 0"
        )
        table.remarks.append(Notice("info", "events_above_sea_level", table.source, detail))
    return table


def _joined(tables: list[TextTable]) -> TextTable:
    """Set tables of several files one below the other."""
    names = list(dict.fromkeys(name for table in tables for name in table.columns))
    problems = Problems(f"{len(tables)} files")
    columns: dict[str, list[str]] = {name: [] for name in names}
    lines: list[int] = []
    for number, table in enumerate(tables):
        problems.adopt(table.problems, number)
        lines += [FileLine(line, number, table.source) for line in table.lines]
        for name in names:
            columns[name] += table.columns.get(name) or [""] * len(table)
    remarks = [notice for table in tables for notice in table.remarks]
    return TextTable(columns, lines, problems, remarks)


def _files(paths: Source, content: Content) -> tuple[list[str | Path], list[Notice]]:
    """List the files to read and remark on those of a folder that are passed over."""
    if not isinstance(paths, str | Path | Sequence):
        raise InputError(
            f"a {type(paths).__name__} is no table; expected {_EXPECTED[content]}, "
            "or a data frame",
            where=content,
        )
    named = [paths] if isinstance(paths, str | Path) else list(paths)
    if not named:
        raise FileAccessError(f"no file is given; expected {_EXPECTED[content]}")
    files: list[str | Path] = []
    notices = []
    for path in named:
        if not _is_folder(path):
            files.append(path)
            continue
        inside = _listed(path)
        if not inside:
            raise FileAccessError(f"{path}: the folder is empty; expected {_EXPECTED[content]}")
        fitting = [file for file in inside if content in _held(file)]
        if not fitting:
            raise FileAccessError(
                f"{path}: the folder cannot be read as {content}: none of its {len(inside)} "
                f"files holds {_EXPECTED[content]}"
            )
        files += fitting
        others = [file.name for file in inside if file not in fitting]
        if others:
            detail = f"{len(others)} files of {path} hold no {content} ({few(others)}); not read"
            notices.append(Notice("info", "files_passed_over", str(path), detail))
    return files, notices


def _held(file: Path) -> Iterable[Content]:
    head = read_bytes(file, HEAD_BYTES)
    return contents_of(recognise(head), head)


def _listed(folder: str | Path) -> list[Path]:
    try:
        inside = sorted(Path(folder).iterdir())
    except OSError as error:
        raise unreadable(folder, error) from error
    return [file for file in inside if file.is_file() and not file.name.startswith(".")]


def _is_folder(path: str | Path) -> bool:
    try:
        return Path(path).is_dir()
    except (OSError, ValueError):
        return False


def _size(file: str | Path) -> int:
    try:
        return Path(file).stat().st_size
    except (OSError, ValueError):
        return 0


def _share(progress: Progress | None, before: int, size: int, total: int) -> Advance:
    """Turn shares of one file into bytes of all."""

    def advance(share: float) -> None:
        if progress is not None:
            progress(before + round(share * size), total)

    return advance

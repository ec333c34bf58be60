"""Parts of the report that steps done on request add to it.

Main type: :class:`ReportSection`. A step leaves its section as a JSON file beside
its results; the report shows every section that is there.
"""

from __future__ import annotations

import json
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import Any

from rayloom.errors import InputError
from rayloom.writing import write_text


@dataclass(frozen=True)
class SectionTable:
    """A table of a section.

    Attributes
    ----------
    caption : str
        What it shows.
    names : tuple of str
        Column names.
    rows : tuple of tuple of str
        Cells.
    numbers : tuple of int
        Columns to align on the right.
    """

    caption: str
    names: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]
    numbers: tuple[int, ...] = ()


@dataclass(frozen=True)
class SectionFigure:
    """A figure of a section.

    Attributes
    ----------
    paths : tuple of str
        The files, one per format, relative to the folder of the report.
    caption : str
        What it shows and how to read it.
    """

    paths: tuple[str, ...]
    caption: str


@dataclass(frozen=True)
class ReportSection:
    """What one step has to say.

    Attributes
    ----------
    title : str
        Heading.
    sentences : tuple of str
        Paragraphs.
    tables : tuple of SectionTable
        Shown after them.
    figures : tuple of SectionFigure
        Shown last.
    """

    title: str
    sentences: tuple[str, ...] = ()
    tables: tuple[SectionTable, ...] = ()
    figures: tuple[SectionFigure, ...] = ()

    def write(self, path: str | Path) -> None:
        """Write the section as JSON.

        Raises
        ------
        FileAccessError
            If the file cannot be written.
        """
        write_text(path, json.dumps(asdict(self), ensure_ascii=False, indent=1) + "\n")

    @classmethod
    def read(cls, path: str | Path) -> ReportSection:
        """Read a section that a step has left.

        Raises
        ------
        InputError
            If the file holds no section.
        """
        try:
            held: dict[str, Any] = json.loads(Path(path).read_text(encoding="utf-8"))
            tables = tuple(
                SectionTable(
                    caption=table["caption"],
                    names=tuple(table["names"]),
                    rows=tuple(tuple(row) for row in table["rows"]),
                    numbers=tuple(table["numbers"]),
                )
                for table in held["tables"]
            )
            figures = tuple(
                SectionFigure(tuple(figure["paths"]), figure["caption"])
                for figure in held["figures"]
            )
            return cls(held["title"], tuple(held["sentences"]), tables, figures)
        except (OSError, ValueError, KeyError, TypeError) as error:
            raise InputError(
                f"cannot be read as a section of the report ({error}); delete it, or do its step "
                "again",
                where=str(path),
            ) from error

"""What is wrong with a table, each problem with its line."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Final

from rayloom.errors import FileProblemsError

_LINES_PER_FILE: Final = 10**12


class FileLine(int):
    """Line of one of several files: sorts by file, then line, and names both in text.

    Parameters
    ----------
    line : int
        Line, 1 for the first.
    file_number : int
        Place of the file among the others.
    file_name : str
        How the file is named in messages.
    """

    line: int
    file_name: str

    def __new__(cls, line: int, file_number: int, file_name: str) -> FileLine:
        """Make the line."""
        made = super().__new__(cls, file_number * _LINES_PER_FILE + line)
        made.line = line
        made.file_name = file_name
        return made

    def __str__(self) -> str:
        return f"{self.line} of {self.file_name}"


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
        self._found.append((line, text))

    def adopt(self, other: Problems, file_number: int) -> None:
        """Take over what is wrong with one of several files."""
        for line, text in other._found:
            self.add(FileLine(line, file_number, other.source), text)

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
            raise self.error()

    def error(self) -> FileProblemsError:
        """Make the error that lists all problems in the order of their lines."""
        ordered = sorted(self._found, key=lambda found: found[0])
        return FileProblemsError(self.source, [self._told(*found) for found in ordered])

    def _told(self, line: int, text: str) -> str:
        if isinstance(line, FileLine) and not line.line:
            return f"{line.file_name}: {text}"
        return f"{self.place} {line}, {text}" if line else text

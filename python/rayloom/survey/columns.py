"""From columns of text to arrays, with every bad cell noted."""

from __future__ import annotations

import difflib
import math
import re
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np

from rayloom.survey.notices import Notice
from rayloom.survey.tables import BoolArray, FloatArray, TextArray, TimeArray
from rayloom.survey.text_table import TextTable

_TIME: Final = re.compile(
    r"(?P<day>(?P<year>\d{4})-\d\d-\d\d)"
    r"(?:[T ](?P<clock>\d\d:\d\d(?::\d\d(?:\.\d{1,9})?)?)"
    r"(?P<zone>Z|[+-](?:0\d|1[0-4]):?[0-5]\d)?)?",
    re.ASCII,
)
_FIRST_YEAR: Final = 1700
_LAST_YEAR: Final = 2261
_NO_TIME: Final = np.datetime64("NaT", "ns")
_CODE_LENGTH: Final = 64
_CODE: Final = f"a code of at most {_CODE_LENGTH} printable characters"
_MOMENT: Final = "a UTC time such as 2021-03-07T04:05:06.78Z"
_DAY: Final = "a UTC day or time such as 2021-03-07 or 2021-03-07T04:05:06Z"


@dataclass(frozen=True)
class Span:
    """What a number may be.

    Parameters
    ----------
    low, high : float
        Smallest and largest value, in the unit of the column.
    unit : str
        The unit, as it is written after the number.
    hint : str
        What may have gone wrong with a number outside.
    above : bool
        Whether ``low`` itself is excluded.
    """

    low: float
    high: float
    unit: str
    hint: str = ""
    above: bool = False

    def holds(self, values: FloatArray) -> BoolArray:
        """Whether each value lies within."""
        low = values > self.low if self.above else values >= self.low
        return np.asarray(low & (values <= self.high))

    def __str__(self) -> str:
        if math.isinf(self.high):
            return f"a finite number of {self.unit}"
        start = "above" if self.above else "from"
        return f"a number {start} {self.low:g} to {self.high:g} {self.unit}"


class ColumnReader:
    """Reads the columns of one table and gathers what is wrong with them.

    Parameters
    ----------
    table : TextTable
        The table; its ``problems`` grow as columns are read.
    """

    def __init__(self, table: TextTable) -> None:
        self.table = table
        self.problems = table.problems

    def has(self, name: str) -> bool:
        """Whether the table has the column."""
        return name in self.table.columns

    def text(self, name: str) -> TextArray:
        """Return a column of codes; a blank or odd cell is a problem.

        Returns
        -------
        (n,) str array
        """
        cells = self._cells(name)
        if self.has(name):
            good = np.array([_is_code(cell) for cell in cells], dtype=bool)
            self._note_bad(name, cells, good, lambda _cell: _CODE)
        return np.array([cell[:_CODE_LENGTH] for cell in cells], dtype=np.str_)

    def number(
        self, name: str, span: Span, *, optional: bool = False, missing: float = math.nan
    ) -> FloatArray:
        """Return a column of numbers within a span; blank cells become ``missing`` if optional.

        Returns
        -------
        (n,) float array
        """
        cells = self._cells(name)
        blank = np.array([not cell for cell in cells], dtype=bool)
        values = np.array([_number(cell) for cell in cells], dtype=np.float64)
        good = np.isfinite(values) & span.holds(values)
        if optional:
            values[blank] = missing
            good |= blank
        if self.has(name):
            self._note_bad(name, cells, good, lambda cell: f"{span}{_number_hint(cell, span)}")
        return values

    def time(self, name: str, *, optional: bool = False, day_alone: bool = False) -> TimeArray:
        """Return a column of UTC times; blank cells become NaT if optional.

        A time beyond the last that the type can hold is NaT where optional,
        since it stands for an open end.

        Returns
        -------
        (n,) datetime64[ns] array
        """
        cells = self._cells(name)
        values = np.array([_moment(cell, day_alone) for cell in cells], dtype="datetime64[ns]")
        good = ~np.isnat(values)
        if optional:
            good |= np.array([not cell or _is_far_future(cell) for cell in cells], dtype=bool)
        if self.has(name):
            self._note_bad(name, cells, good, lambda _cell: _DAY if day_alone else _MOMENT)
        return values

    def misspelt(self, optional: Sequence[str], known: Sequence[str]) -> list[Notice]:
        """Point at unused columns whose names come close to an absent optional one."""
        guesses = self._guesses(optional, known, cutoff=0.7)
        return [
            Notice(
                "warning",
                "unused_column",
                self.table.source,
                f"column {close!r} of {self.table.source} is not used; did you mean {name!r}?",
            )
            for name, close in guesses.items()
        ]

    def require(self, names: Sequence[str], known: Sequence[str]) -> None:
        """Note each missing column, with the unused one that comes closest."""
        guesses = self._guesses(names, known, cutoff=0.5)
        found = ", ".join(self.table.columns)
        for name in names:
            if not self.has(name):
                guess = f"; did you mean {name!r} by {guesses[name]!r}?" if name in guesses else ""
                self.problems.add(1, f"column {name} is missing{guess} (found: {found})")

    def _guesses(
        self, names: Sequence[str], known: Sequence[str], *, cutoff: float
    ) -> dict[str, str]:
        """Pair absent columns with unused ones, closest pair first, each used once."""
        pairs = [
            (_closeness(name, other), name, other)
            for name in names
            if not self.has(name)
            for other in self.table.columns
            if other not in known
        ]
        guesses: dict[str, str] = {}
        for closeness, name, other in sorted(pairs, reverse=True):
            if closeness >= cutoff and name not in guesses and other not in guesses.values():
                guesses[name] = other
        return guesses

    def _cells(self, name: str) -> list[str]:
        return self.table.columns.get(name) or [""] * len(self.table)

    def _note_bad(
        self,
        name: str,
        cells: list[str],
        good: BoolArray,
        expected: Callable[[str], str],
    ) -> None:
        for row in np.flatnonzero(~good):
            cell = cells[row]
            shown = repr(cell) if len(cell) <= 60 else f"{cell[:57]!r}…"
            value = shown if cell else "blank"
            self.problems.add(
                self.table.lines[row], f"column {name}: {value}; expected {expected(cell)}"
            )


def _closeness(name: str, other: str) -> float:
    """Likeness of two column names, 0 to 1; an abbreviation of three letters or more is 1."""
    if len(other) >= 3 and name.startswith(other):
        return 1.0
    return difflib.SequenceMatcher(None, name, other).ratio()


def _is_code(cell: str) -> bool:
    return 0 < len(cell) <= _CODE_LENGTH and cell.isprintable()


def _number(cell: str) -> float:
    """Return the number a cell holds, NaN if none (Python's digit underscores are refused)."""
    if "_" in cell or not cell.isascii():
        return math.nan
    try:
        return float(cell)
    except ValueError:
        return math.nan


def _number_hint(cell: str, span: Span) -> str:
    if "," in cell and math.isfinite(_number(cell.replace(",", "."))):
        return " (write the decimal sign as a point)"
    if span.hint and math.isfinite(_number(cell)):
        return f" ({span.hint})"
    return ""


def _moment(cell: str, day_alone: bool) -> np.datetime64:
    match = _TIME.fullmatch(cell)
    if not match or not (match["clock"] or day_alone):
        return _NO_TIME
    if not _FIRST_YEAR <= int(match["year"]) <= _LAST_YEAR:
        return _NO_TIME
    try:
        moment = np.datetime64(f"{match['day']}T{match['clock'] or '00:00'}", "ns")
    except ValueError:
        return _NO_TIME
    zone = match["zone"]
    if zone in (None, "Z"):
        return moment
    minutes = 60 * int(zone[1:3]) + int(zone[-2:])
    east = np.timedelta64(minutes, "m")
    return moment + east if zone[0] == "-" else moment - east


def _is_far_future(cell: str) -> bool:
    match = _TIME.fullmatch(cell)
    return bool(match) and int(cell[:4]) > _LAST_YEAR

"""What was left out, pick by pick, with the reason."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Final

import numpy as np

from rayloom.survey.tables import BoolArray, ColumnTable, TextArray
from rayloom.writing import write_frame

if TYPE_CHECKING:
    import pandas as pd


def _no_text() -> TextArray:
    return np.empty(0, dtype=np.str_)


@dataclass(frozen=True, eq=False)
class Exclusions(ColumnTable):
    """Picks left out, one row each.

    Parameters
    ----------
    event, network, station, phase : (n,) str arrays
        The pick.
    reason : (n,) str array
        Code: ``dropped_by_settings``, ``unknown_phase``, ``outside_distance_window``,
        ``no_arrival``, ``too_few_picks``, ``conflicting_rows`` or ``gross_residual``.
    detail : (n,) str array
        The reason in words, with its numbers.
    """

    event: TextArray = field(default_factory=_no_text)
    network: TextArray = field(default_factory=_no_text)
    station: TextArray = field(default_factory=_no_text)
    phase: TextArray = field(default_factory=_no_text)
    reason: TextArray = field(default_factory=_no_text)
    detail: TextArray = field(default_factory=_no_text)

    def counts(self) -> dict[str, int]:
        """Return how many picks each reason took, most first.

        Returns
        -------
        dict of int
            Picks by reason.
        """
        return dict(Counter(self.reason.tolist()).most_common())

    def to_frame(self) -> pd.DataFrame:
        """Return a data frame with one row per pick left out.

        Returns
        -------
        DataFrame
            One row per pick left out.
        """
        import pandas as pd

        return pd.DataFrame({name: getattr(self, name) for name in self.column_names()})

    def write_csv(self, path: str | Path) -> None:
        """Write the table as CSV.

        Parameters
        ----------
        path : str or Path
            The file.

        Raises
        ------
        FileAccessError
            If the file cannot be written.
        """
        write_frame(self.to_frame(), path)


OVERRIDABLE: Final = ("outside_distance_window", "gross_residual")
"""Reasons that do not count for what a person asks to keep."""


class Selection:
    """Which rows are still in, and why the others are not.

    Parameters
    ----------
    count : int
        Number of rows.
    """

    def __init__(self, count: int) -> None:
        self.kept: BoolArray = np.ones(count, dtype=bool)
        self.reason: list[str] = [""] * count
        self.detail: list[str] = [""] * count
        self.protected: BoolArray = np.zeros(count, dtype=bool)

    def protect(self, rows: BoolArray) -> None:
        """Keep rows from being left out for a limit that a person may override.

        Parameters
        ----------
        rows : (n,) bool array
            The rows. Reasons of :data:`OVERRIDABLE` pass them by.
        """
        self.protected = self.protected | rows

    def leave_out(self, rows: BoolArray, reason: str, detail: list[str]) -> None:
        """Leave out rows that are still in.

        Parameters
        ----------
        rows : (n,) bool array
            The rows; those already out keep their first reason.
        reason : str
            Code of the reason.
        detail : list of str
            One sentence for each row marked.
        """
        spared = self.protected & (reason in OVERRIDABLE)
        for row, text in zip(np.flatnonzero(rows).tolist(), detail, strict=True):
            if self.kept[row] and not spared[row]:
                self.reason[row] = reason
                self.detail[row] = text
                self.kept[row] = False

"""Rows that give the same event, station and phase more than once."""

from __future__ import annotations

from collections.abc import Iterable, Sequence

import numpy as np

from rayloom.survey.notices import Notice, few
from rayloom.survey.tables import BoolArray, FloatArray
from rayloom.survey.text_table import TextTable


def drop_repeats(
    keys: Iterable[tuple[int, int, str]],
    names: Sequence[str],
    values: FloatArray,
    table: TextTable,
    notices: list[Notice],
) -> BoolArray:
    """Mark the rows to keep: repeats with the same values go, different ones stay.

    Both are told with their lines. Which of several different ones is used is
    decided where their residuals are known.

    Parameters
    ----------
    keys : iterable of (event row, station row, phase)
        What each row is about.
    names : (n,) sequence of str
        Each row in words, for the notices.
    values : (n, k) float array
        What makes rows of one key the same.
    table : TextTable
        Lines and source of the rows.
    notices : list of Notice
        Gets one notice on all equal repeats, and one on each different one.
    """
    kept = np.ones(len(values), dtype=bool)
    first: dict[tuple[int, int, str], int] = {}
    equal: list[str] = []
    place = table.problems.place
    for row, key in enumerate(keys):
        other = first.setdefault(key, row)
        if other == row:
            continue
        pair = f"{table.lines[other]} and {table.lines[row]}"
        if np.array_equal(values[row], values[other]):
            kept[row] = False
            equal.append(pair)
        else:
            detail = (
                f"{names[row]}: {place}s {pair} of {table.source} differ; the one closer to its "
                "event's median residual will be used"
            )
            notices.append(Notice("warning", "conflicting_rows", names[row], detail))
    if equal:
        detail = (
            f"{len(equal)} rows of {table.source} repeat earlier ones and are dropped "
            f"({place}s {few(equal)})"
        )
        notices.append(Notice("info", "repeated_rows", table.source, detail))
    return kept

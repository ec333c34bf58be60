"""Groups of rows that share an origin: one per event and phase."""

from __future__ import annotations

import numpy as np

from rayloom.survey.tables import FloatArray, IndexArray, TextArray


def group_numbers(event_index: IndexArray, phase: TextArray) -> IndexArray:
    """Return the group (event, phase) of each row, numbered from 0, by event, then phase.

    Parameters
    ----------
    event_index : (n,) int array
        Row of the event of each pick.
    phase : (n,) str array
        Phase of each pick.

    Returns
    -------
    (n,) int array
        Group of each row.
    """
    names, phase_number = np.unique(phase, return_inverse=True)
    _, numbers = np.unique(event_index * len(names) + phase_number, return_inverse=True)
    return np.asarray(numbers, dtype=np.int64)


def group_medians_s(values_s: FloatArray, group: IndexArray) -> FloatArray:
    """Return the median of the values of each group, in s, shape (groups,).

    Parameters
    ----------
    values_s : (n,) float array
        Values in s.
    group : (n,) int array
        Group of each, numbered from 0 without gaps.
    """
    ordered = values_s[np.lexsort((values_s, group))]
    counts = np.bincount(group)
    starts = np.cumsum(counts) - counts
    lower = ordered[starts + (counts - 1) // 2]
    upper = ordered[starts + counts // 2]
    return np.asarray(0.5 * (lower + upper))


def relative_to_median_s(values_s: FloatArray, group: IndexArray) -> FloatArray:
    """Return each value minus the median of its group, in s, shape (n,)."""
    if not len(values_s):
        return values_s
    return np.asarray(values_s - group_medians_s(values_s, group)[group])

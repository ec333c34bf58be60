"""The column table that stations, events, picks and residuals share."""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import Any, Final, Self, TypeAlias

import numpy as np
from numpy.typing import NDArray

from rayloom.errors import InputError

FloatArray: TypeAlias = NDArray[np.float64]
IndexArray: TypeAlias = NDArray[np.int64]
TextArray: TypeAlias = NDArray[np.str_]
TimeArray: TypeAlias = NDArray[np.datetime64]
BoolArray: TypeAlias = NDArray[np.bool_]

_COLUMN_TYPES: Final[dict[str, Any]] = {
    "FloatArray": np.float64,
    "IndexArray": np.int64,
    "TextArray": np.str_,
    "TimeArray": "datetime64[ns]",
}


@dataclass(frozen=True, eq=False)
class ColumnTable:
    """Base of frozen tables: one read-only array per column, all equally long.

    The annotation of a field (``FloatArray``, ``IndexArray``, ``TextArray`` or
    ``TimeArray``) makes it a column and fixes its element type.

    Raises
    ------
    InputError
        If the columns differ in length or hold values of the wrong type.
    """

    def __post_init__(self) -> None:
        names = self.column_names()
        for name, kind in names.items():
            object.__setattr__(self, name, _frozen_column(name, getattr(self, name), kind))
        lengths = {name: len(getattr(self, name)) for name in names}
        if len(set(lengths.values())) > 1:
            listed = ", ".join(f"{name} {length}" for name, length in lengths.items())
            raise InputError(
                f"the columns of {type(self).__name__} differ in length ({listed}); "
                "give every column one value per row"
            )

    @classmethod
    def column_names(cls) -> dict[str, str]:
        """Name and kind of every column, in order."""
        return {f.name: str(f.type) for f in fields(cls) if str(f.type) in _COLUMN_TYPES}

    def __len__(self) -> int:
        return len(getattr(self, next(iter(self.column_names()))))

    def select(self, rows: BoolArray | IndexArray) -> Self:
        """Return the table of some rows.

        Parameters
        ----------
        rows : (n,) bool or (k,) int array
            Mask over the rows, or their numbers.
        """
        return type(self)(**{name: getattr(self, name)[rows] for name in self.column_names()})


def _frozen_column(name: str, values: Any, kind: str) -> NDArray[Any]:
    try:
        column = np.array(values, dtype=_COLUMN_TYPES[kind])
    except (TypeError, ValueError) as error:
        raise InputError(f"column {name} cannot be read as an array: {error}") from error
    if column.ndim != 1:
        raise InputError(f"column {name} has {column.ndim} dimensions; expected one value per row")
    column.setflags(write=False)
    return column


def no_floats() -> FloatArray:
    """Stand for an optional column of numbers that is not given."""
    return np.empty(0, dtype=np.float64)


def no_times() -> TimeArray:
    """Stand for an optional column of times that is not given."""
    return np.empty(0, dtype="datetime64[ns]")


def seconds_between(earlier: TimeArray, later: TimeArray) -> FloatArray:
    """Return later minus earlier in s, NaN where either is NaT, shape (n,)."""
    gap_ns = (later - earlier).astype("timedelta64[ns]")
    return np.where(np.isnat(gap_ns), np.nan, gap_ns.astype(np.float64) * 1e-9)

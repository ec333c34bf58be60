"""The uncertainty of picks: stated, by quality class, or by default."""

from __future__ import annotations

from typing import Final

import numpy as np

from rayloom.survey.columns import ColumnReader, Span
from rayloom.survey.notices import Notice
from rayloom.survey.settings import SurveySettings
from rayloom.survey.tables import FloatArray

UNCERTAINTY: Final = Span(0.0, 60.0, "s", "a standard deviation in seconds", above=True)


def read_uncertainty(
    reader: ColumnReader, settings: SurveySettings, notices: list[Notice]
) -> FloatArray:
    """Return the uncertainty of each row in seconds, shape (n,).

    A stated ``uncertainty_s`` goes first, then the ``quality`` class, then the
    default, whose uses are counted in a notice. One of the two columns must be
    there.
    """
    table = reader.table
    if not reader.has("quality"):
        reader.require(["uncertainty_s"], ["event", "network", "station", "phase", "time"])
    values = reader.number("uncertainty_s", UNCERTAINTY, optional=True)
    if reader.has("quality"):
        values = _fill_by_quality(reader, values, settings)
    cells = table.columns.get("uncertainty_s")
    stated = np.array([bool(cell) for cell in cells] if cells else [False] * len(table))
    missing = np.isnan(values) & ~stated
    if missing.any():
        detail = (
            f"{int(missing.sum())} of {len(table)} rows of {table.source} state no uncertainty; "
            f"they take default_uncertainty_s = {settings.default_uncertainty_s:g} s"
        )
        notices.append(Notice("info", "default_uncertainty", table.source, detail))
    return np.where(missing, settings.default_uncertainty_s, values)


def _fill_by_quality(
    reader: ColumnReader, values: FloatArray, settings: SurveySettings
) -> FloatArray:
    """Fill rows without a number by their quality class; an unknown class is one problem."""
    table = reader.table
    stated = table.columns.get("uncertainty_s") or [""] * len(table)
    filled = values.copy()
    unknown: dict[str, list[int]] = {}
    for row, (quality, number) in enumerate(zip(table.columns["quality"], stated, strict=True)):
        if number or not quality:
            continue
        seconds = settings.quality_uncertainty_s.get(quality)
        if seconds is None:
            unknown.setdefault(quality, []).append(table.lines[row])
        else:
            filled[row] = seconds
    classes = ", ".join(settings.quality_uncertainty_s) or "none"
    for quality, lines in unknown.items():
        rest = f" (and {len(lines) - 1} more {table.problems.place}s)" if len(lines) > 1 else ""
        table.problems.add(
            lines[0],
            f"column quality: {quality!r}; expected a class that quality_uncertainty_s in the "
            f"survey settings maps to seconds (it names: {classes}){rest}",
        )
    return filled

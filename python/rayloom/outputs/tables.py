"""Tables of a run as CSV files."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from rayloom.outputs.atomic import replacing

if TYPE_CHECKING:
    import pandas as pd

    from rayloom.inversion import InversionResult
    from rayloom.residuals import Residuals


def write_table(path: str | Path, table: pd.DataFrame) -> None:
    """Write a data frame as CSV: UTF-8, nine digits, missing values blank.

    Parameters
    ----------
    path : str or Path
        The file.
    table : DataFrame
        The rows; the index is left out.

    Raises
    ------
    FileAccessError
        The file cannot be written.
    """
    with replacing(path) as temporary:
        table.to_csv(
            temporary,
            index=False,
            float_format="%.9g",
            date_format="%Y-%m-%dT%H:%M:%S.%fZ",
            lineterminator="\n",
            encoding="utf-8",
        )


def write_history_csv(path: str | Path, result: InversionResult) -> None:
    """Write the course of an inversion, one row per iteration.

    Parameters
    ----------
    path : str or Path
        The file.
    result : InversionResult
        The inversion.

    Raises
    ------
    FileAccessError
        The file cannot be written.
    """
    write_table(path, result.history_frame())


def residual_table(data: Residuals, result: InversionResult | None = None) -> pd.DataFrame:
    """Gather residuals before and after an inversion, one row per pick.

    Parameters
    ----------
    data : Residuals
        n residuals.
    result : InversionResult, optional
        The inversion of the same residuals; adds ``predicted_residual_s``,
        ``residual_after_s``, ``weight`` (robust, relative to the given
        uncertainty) and ``suspected_outlier`` (true or false).

    Returns
    -------
    DataFrame
        n rows, in data order; its first columns are those of a residuals file,
        so that it can serve as input again.
    """
    table = data.to_frame()
    if result is not None:
        table = table.assign(
            predicted_residual_s=result.predicted_s,
            residual_after_s=result.residual_after_s,
            weight=result.weights,
            suspected_outlier=np.where(result.suspected_outlier, "true", "false"),
        )
    return table


def write_residuals_csv(
    path: str | Path, data: Residuals, result: InversionResult | None = None
) -> None:
    """Write the table of :func:`residual_table`.

    Parameters
    ----------
    path : str or Path
        The file.
    data : Residuals
        n residuals.
    result : InversionResult, optional
        The inversion of the same residuals.

    Raises
    ------
    FileAccessError
        The file cannot be written.
    """
    write_table(path, residual_table(data, result))


def write_exclusions_csv(path: str | Path, data: Residuals) -> None:
    """Write what was left out, with the reasons.

    Parameters
    ----------
    path : str or Path
        The file.
    data : Residuals
        Their ``excluded`` picks are written.

    Raises
    ------
    FileAccessError
        The file cannot be written.
    """
    with replacing(path) as temporary:
        data.excluded.write_csv(temporary)

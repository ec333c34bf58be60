"""Tables of a run as CSV files."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Final

import numpy as np

from rayloom.writing import replacing

if TYPE_CHECKING:
    import pandas as pd

    from rayloom.inversion.result import InversionResult
    from rayloom.residuals import Residuals

LEFT_OUT_OF_INVERSION: Final = "left_out_of_inversion"
"""Reason in the list of exclusions of rows that only the inversion leaves out."""


def write_table(path: str | Path, table: pd.DataFrame) -> None:
    """Write a data frame as CSV: UTF-8, nine digits, missing values blank, true or false.

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
    flags = table.select_dtypes("bool").columns
    spelt = {name: np.where(table[name], "true", "false") for name in flags}
    with replacing(path) as temporary:
        table.assign(**spelt).to_csv(
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
        ``residual_after_s``, ``standardised`` (over the uncertainty), ``weight``
        (robust), ``suspected_outlier`` (bool) and ``left_out_because``.

    Returns
    -------
    DataFrame
        n rows, in data order; its first columns are those of a residuals file,
        so that it can serve as input again.
    """
    table = data.to_frame()
    if result is None:
        return table
    return table.assign(
        predicted_residual_s=result.predicted_s,
        residual_after_s=result.residual_after_s,
        standardised=result.standardised,
        weight=result.weights,
        suspected_outlier=result.suspected_outlier,
        left_out_because=result.left_out_because,
    )


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


def exclusion_table(data: Residuals, result: InversionResult | None = None) -> pd.DataFrame:
    """List what was left out with the reasons.

    Parameters
    ----------
    data : Residuals
        Their excluded picks come first.
    result : InversionResult, optional
        Adds the rows that the inversion left out, with the reason
        ``left_out_of_inversion``.

    Returns
    -------
    DataFrame
        Columns event, network, station, phase, reason, detail.
    """
    import pandas as pd

    excluded = data.excluded.to_frame()
    if result is None:
        return excluded
    rows = np.flatnonzero(~result.used)
    columns = ["event", "network", "station", "phase"]
    later = (
        data.to_frame()
        .iloc[rows][columns]
        .assign(reason=LEFT_OUT_OF_INVERSION, detail=result.left_out_because[rows])
    )
    return pd.concat([excluded, later], ignore_index=True) if rows.size else excluded


def write_exclusions_csv(
    path: str | Path, data: Residuals, result: InversionResult | None = None
) -> None:
    """Write the table of :func:`exclusion_table`.

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
    write_table(path, exclusion_table(data, result))


def write_station_terms_csv(path: str | Path, result: InversionResult) -> None:
    """Write the station terms and their standard errors, one row per station and phase.

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
    write_table(path, result.station_term_frame())


def write_mislocations_csv(path: str | Path, result: InversionResult) -> None:
    """Write the shifts of the events: event, east_km, north_km, down_km.

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
    write_table(path, result.mislocation_frame())

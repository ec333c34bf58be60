"""The crust correction of each station, as a table."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from rayloom.earth import column_delay_s
from rayloom.residuals.crust import StationCrust
from rayloom.residuals.table import Residuals
from rayloom.units import M_PER_KM

if TYPE_CHECKING:
    import pandas as pd


def crust_frame(data: Residuals, crust: StationCrust) -> pd.DataFrame:
    """List what the local crust adds to the predicted times at each station.

    Parameters
    ----------
    data : Residuals
        Residuals whose predictions contain the crust.
    crust : StationCrust
        The crust.

    Returns
    -------
    DataFrame
        One row per row of the stations table that has a crust: network, station,
        ``crust_thickness_km`` or ``column``, ``moho_km`` (below sea level),
        ``vertical_p_s`` and ``vertical_s_s`` (of a vertical wave), ``mean_p_s`` and
        ``mean_s_s`` (over the residuals there, NaN without any), ``picks_p``, ``picks_s``.
    """
    import pandas as pd

    rows = crust.rows_of(data.stations)
    listed = [
        _row(data, crust, index, int(rows[index])) for index in np.flatnonzero(rows >= 0).tolist()
    ]
    return pd.DataFrame(listed, columns=_COLUMNS)


_COLUMNS = (
    "network",
    "station",
    "crust_thickness_km",
    "column",
    "moho_km",
    "vertical_p_s",
    "vertical_s_s",
    "mean_p_s",
    "picks_p",
    "mean_s_s",
    "picks_s",
)


def _row(data: Residuals, crust: StationCrust, index: int, row: int) -> tuple[object, ...]:
    stations = data.stations
    surface_km = float(-stations.elevation_m[index] / M_PER_KM)
    local = crust.local_column(row, data.earth, surface_km)
    vertical, means = [], []
    for wave in ("P", "S"):
        sensor_km = float(stations.depth_km[index])
        vertical.append(float(column_delay_s(data.earth, local, wave, 0.0, sensor_km=sensor_km)))
        here = (data.station_index == index) & (data.wave == wave)
        means += [float(data.crust_s[here].mean()) if here.any() else np.nan, int(here.sum())]
    return (
        stations.network[index],
        stations.station[index],
        crust.crust_thickness_km[row],
        crust.column[row],
        local.moho_km,
        *vertical,
        *means,
    )

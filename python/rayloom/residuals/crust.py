"""Crust below each station in place of that of the reference Earth.

The main type is :class:`StationCrust`; :func:`read_crust` makes one from a table.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Final

import numpy as np

from rayloom.earth import (
    LARGEST_VS_OVER_VP,
    LocalColumn,
    ReferenceEarth,
    column_delay_s,
    phase_wave,
)
from rayloom.errors import FileAccessError, FileProblemsError
from rayloom.survey import Notice, Stations
from rayloom.survey.columns import ColumnReader, Span
from rayloom.survey.notices import few
from rayloom.survey.tables import (
    BoolArray,
    ColumnTable,
    FloatArray,
    IndexArray,
    TextArray,
)
from rayloom.survey.text_table import TextTable, read_text_table, text_table_of_frame
from rayloom.units import M_PER_KM

if TYPE_CHECKING:
    import pandas as pd

THICKNESS: Final = Span(1.0, 120.0, "km", "from the ground surface to the mantle, in km")
VP: Final = Span(1.0, 8.6, "km/s", "mean P velocity of the crust, in km/s")
VS: Final = Span(0.3, 5.2, "km/s", "mean S velocity of the crust, in km/s")

_REQUIRED: Final = ("network", "station")
_OPTIONAL: Final = ("crust_thickness_km", "vp_km_s", "vs_km_s", "column")


@dataclass(frozen=True, eq=False)
class StationCrust(ColumnTable):
    """What is known of the crust below stations, one row per station.

    Parameters
    ----------
    network, station : (n,) str arrays
        Codes; a row holds for all epochs of the station.
    crust_thickness_km : (n,) float array
        From the ground surface to the mantle, km; NaN where a column is named.
    vp_km_s, vs_km_s : (n,) float arrays
        Uniform velocities of that crust, km/s; NaN where the reference crust is
        stretched instead (:meth:`rayloom.earth.LocalColumn.of_crust`).
    column : (n,) str array
        Name of a column in `columns`; empty where a thickness is given.
    columns : mapping of str to LocalColumn
        Velocities with depth, by name.
    """

    network: TextArray
    station: TextArray
    crust_thickness_km: FloatArray
    vp_km_s: FloatArray
    vs_km_s: FloatArray
    column: TextArray
    columns: Mapping[str, LocalColumn] = field(default_factory=dict)

    def rows_of(self, stations: Stations) -> IndexArray:
        """Return the row of each station of a table, -1 where it has none, (stations,)."""
        rows = {name: row for row, name in enumerate(zip(self.network, self.station, strict=True))}
        names = zip(stations.network, stations.station, strict=True)
        return np.array([rows.get(name, -1) for name in names], dtype=np.int64)

    def local_column(self, row: int, earth: ReferenceEarth, surface_km: float) -> LocalColumn:
        """Return the velocities below a station.

        Parameters
        ----------
        row : int
            Row of this table.
        earth : ReferenceEarth
            The reference Earth.
        surface_km : float
            Depth of the ground surface at the station, km; negative above sea level.

        Raises
        ------
        InputError
            If the reference Earth shows no boundary between crust and mantle.
        """
        if self.column[row]:
            return self.columns[str(self.column[row])]
        speeds = (self.vp_km_s[row], self.vs_km_s[row])
        vp_km_s, vs_km_s = (None if np.isnan(speed) else float(speed) for speed in speeds)
        return LocalColumn.of_crust(
            earth,
            float(self.crust_thickness_km[row]),
            surface_km=surface_km,
            vp_km_s=vp_km_s,
            vs_km_s=vs_km_s,
        )

    def delay_s(
        self,
        earth: ReferenceEarth,
        stations: Stations,
        station_index: IndexArray,
        phase: str,
        ray_parameter_s: FloatArray,
    ) -> FloatArray:
        """Return how much later a phase arrives through the local crust.

        Parameters
        ----------
        earth : ReferenceEarth
            The reference Earth.
        stations : Stations
            The stations table.
        station_index : (n,) int array
            Station of each arrival.
        phase : str
            The phase; its wave type at the station counts. What the crust does at the
            source, or where pP and sP are reflected, is left as it is.
        ray_parameter_s : (n,) float array
            Ray parameter of each arrival, s/rad.

        Returns
        -------
        (n,) float array
            Seconds, 0 for stations without a row; see
            :func:`rayloom.earth.column_delay_s`.

        Raises
        ------
        InputError
            If the reference Earth shows no boundary between crust and mantle.
        """
        wave = phase_wave(phase)
        row = self.rows_of(stations)
        delay_s = np.zeros(len(station_index))
        for index in np.unique(station_index[row[station_index] >= 0]).tolist():
            here = station_index == index
            column = self.local_column(int(row[index]), earth, _surface_km(stations, index))
            delay_s[here] = column_delay_s(
                earth,
                column,
                wave,
                ray_parameter_s[here],
                sensor_km=float(stations.depth_km[index]),
            )
        return delay_s


def read_crust(
    source: str | Path | pd.DataFrame,
    stations: Stations,
    *,
    folder: str | Path | None = None,
    notices: list[Notice] | None = None,
) -> StationCrust:
    """Read what is known of the crust below stations.

    Columns: network, station, and in each row either crust_thickness_km (optionally
    with vp_km_s and vs_km_s of the crust) or column, the name of a CSV file with
    depth_km, vp_km_s, vs_km_s (:meth:`rayloom.earth.LocalColumn.from_csv`).

    Parameters
    ----------
    source : path or DataFrame
        The table.
    stations : Stations
        The stations of the survey.
    folder : path, optional
        Where the column files are; that of the table by default.
    notices : list of Notice, optional
        Remarks are appended here.

    Returns
    -------
    StationCrust

    Raises
    ------
    FileAccessError
        If a file cannot be read.
    FileProblemsError
        With every problem of the table, or of a column file.
    """
    if isinstance(source, str | Path):
        table, base = read_text_table(source), Path(source).parent
    else:
        table, base = text_table_of_frame(source, "crust frame"), Path()
    crust = _crust(table)
    base = base if folder is None else Path(folder)
    columns = _columns(crust, table, base)
    table.problems.raise_if_any()
    crust = StationCrust(
        **{name: getattr(crust, name) for name in StationCrust.column_names()}, columns=columns
    )
    if notices is not None:
        notices += [*table.remarks, *_remarks(crust, stations, table.source)]
    return crust


def crust_files(path: str | Path) -> dict[str, Path]:
    """Return a table of crust and the column files that it names.

    Raises
    ------
    FileAccessError, FileProblemsError
        If the table cannot be read.
    """
    path = Path(path)
    names = read_text_table(path).columns.get("column", [])
    return {"crust": path} | {
        f"crust column {name}": path.parent / name for name in sorted({*names} - {""})
    }


def _crust(table: TextTable) -> StationCrust:
    reader = ColumnReader(table)
    reader.require(_REQUIRED, (*_REQUIRED, *_OPTIONAL))
    table.remarks.extend(reader.misspelt(_OPTIONAL, (*_REQUIRED, *_OPTIONAL)))
    if not reader.has("crust_thickness_km") and not reader.has("column"):
        table.problems.add(
            1, "column crust_thickness_km or column is missing; expected one of them"
        )
    crust = StationCrust(
        network=reader.text("network"),
        station=reader.text("station"),
        crust_thickness_km=reader.number("crust_thickness_km", THICKNESS, optional=True),
        vp_km_s=reader.number("vp_km_s", VP, optional=True),
        vs_km_s=reader.number("vs_km_s", VS, optional=True),
        column=np.array(table.columns.get("column") or [""] * len(table), dtype=np.str_),
    )
    _check_rows(crust, table)
    return crust


def _check_rows(crust: StationCrust, table: TextTable) -> None:
    """Note rows that say too little or too much, impossible velocities and repeats."""
    thick = np.array([bool(cell) for cell in table.columns.get("crust_thickness_km", [])])
    thick = thick if thick.size else np.zeros(len(table), dtype=bool)
    named = crust.column != ""
    fast = np.isfinite(crust.vp_km_s) | np.isfinite(crust.vs_km_s)
    found: list[tuple[BoolArray, str]] = [
        (
            np.asarray(thick == named),
            "expected either crust_thickness_km or column, one of them",
        ),
        (np.asarray(named & fast), "vp_km_s and vs_km_s stand in the column file; leave them out"),
        (
            np.asarray(crust.vs_km_s >= LARGEST_VS_OVER_VP * crust.vp_km_s),
            f"column vs_km_s: expected less than {LARGEST_VS_OVER_VP:.3f} of vp_km_s (swapped?)",
        ),
    ]
    if table.columns.get("network") and table.columns.get("station"):
        labels = np.array(
            [f"{net}.{sta}" for net, sta in zip(crust.network, crust.station, strict=True)]
        )
        first = np.unique(labels, return_index=True)[1]
        repeated = np.ones(len(labels), dtype=bool)
        repeated[first] = False
        found.append((repeated, "the station stands in an earlier row already; give it once"))
    for rows, text in found:
        for row in np.flatnonzero(rows).tolist():
            table.problems.add(table.lines[row], text)


def _columns(crust: StationCrust, table: TextTable, folder: Path) -> dict[str, LocalColumn]:
    """Read each column file once; what is wrong with one stands at the row that names it."""
    columns = {}
    for name in sorted({*crust.column.tolist()} - {""}):
        try:
            columns[name] = LocalColumn.from_csv(folder / name)
        except (FileAccessError, FileProblemsError) as error:
            row = int(np.flatnonzero(crust.column == name)[0])
            problems = getattr(error, "problems", [str(error)])
            for problem in problems:
                table.problems.add(table.lines[row], f"column {name}: {problem}")
    return columns


def _remarks(crust: StationCrust, stations: Stations, source: str) -> list[Notice]:
    of_survey = {*stations.labels.tolist()}
    listed = [f"{net}.{sta}" for net, sta in zip(crust.network, crust.station, strict=True)]
    unknown = [label for label in listed if label not in of_survey]
    without = sorted(of_survey - {*listed})
    remarks = []
    if unknown:
        detail = (
            f"{len(unknown)} of {len(listed)} stations of {source} are not in the stations table "
            f"({few(unknown)}); not used"
        )
        remarks.append(Notice("warning", "crust_of_unknown_station", source, detail))
    if without:
        detail = (
            f"{len(without)} of {len(of_survey)} stations have no row in {source} "
            f"({few(without)}); they keep the reference crust"
        )
        remarks.append(Notice("warning", "station_without_crust", source, detail))
    return remarks


def _surface_km(stations: Stations, index: int) -> float:
    """Depth of the ground surface at a station, km below sea level."""
    return float(-stations.elevation_m[index] / M_PER_KM)

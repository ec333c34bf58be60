"""The table of a radial Earth model: :class:`ModelTable` and its CSV form."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from importlib import resources
from pathlib import Path
from typing import Final

import numpy as np
from numpy.typing import ArrayLike, NDArray

from rayloom.earth.csv_columns import read_columns
from rayloom.errors import FileProblemsError, InputError
from rayloom.units import EARTH_RADIUS_KM

COLUMNS: Final = ("depth_km", "vp_km_s", "vs_km_s", "density")
"""Columns of a model file; density in g/cm³."""

PLAUSIBLE: Final = {
    "vp_km_s": (0.2, 20.0, "km/s"),
    "vs_km_s": (0.05, 12.0, "km/s"),
    "density": (0.5, 20.0, "g/cm³"),
}
"""Least and largest value of each column and its unit: anything in the Earth, from loose
soil to the inner core, with room to spare."""

LARGEST_VS_OVER_VP: Final = 0.75**0.5
"""What vs/vp must stay below, the bulk modulus ρ(vp² − 4/3 vs²) being positive."""

PUBLISHED: Final = ("ak135", "iasp91")
"""Models that come with the package."""


@dataclass(frozen=True, eq=False)
class ModelTable:
    """Velocities and density at tabulated depths, linear in radius between.

    A depth given twice is a discontinuity. The S velocity is 0 in the fluid
    core.

    Attributes
    ----------
    depth_km : ndarray, shape (n,)
        Depth below sea level, from 0 to the Earth's centre.
    vp_km_s, vs_km_s : ndarray, shape (n,)
        Velocities.
    density_g_cm3 : ndarray, shape (n,)
        Density.
    """

    depth_km: NDArray[np.float64]
    vp_km_s: NDArray[np.float64]
    vs_km_s: NDArray[np.float64]
    density_g_cm3: NDArray[np.float64]

    @classmethod
    def from_arrays(
        cls,
        depth_km: ArrayLike,
        vp_km_s: ArrayLike,
        vs_km_s: ArrayLike,
        density_g_cm3: ArrayLike,
    ) -> ModelTable:
        """Check four equally long columns and keep read-only copies of them.

        Parameters
        ----------
        depth_km, vp_km_s, vs_km_s, density_g_cm3 : array_like, shape (n,)
            The columns.

        Returns
        -------
        ModelTable

        Raises
        ------
        InputError
            If the columns differ in length or cannot be a model of the Earth.
        """
        columns = [
            np.array(column, dtype=np.float64)
            for column in (depth_km, vp_km_s, vs_km_s, density_g_cm3)
        ]
        shapes = [column.shape for column in columns]
        if any(len(shape) != 1 or shape != shapes[0] for shape in shapes):
            raise InputError(f"columns of a model: expected four of one length, got {shapes}")
        problems = _problems(columns, [f"row {row + 1}" for row in range(len(columns[0]))])
        if problems:
            raise InputError("; ".join(problems), where="model table")
        return cls(*(_read_only(column) for column in columns))

    @classmethod
    def from_csv(cls, path: str | Path) -> ModelTable:
        """Read a model file.

        Parameters
        ----------
        path : path
            CSV with the columns of :data:`COLUMNS`; lines that start with ``#``
            are comments, further columns are ignored.

        Returns
        -------
        ModelTable

        Raises
        ------
        FileAccessError
            If the file cannot be read.
        FileProblemsError
            With every line that is wrong.
        """
        columns = read_columns(path, COLUMNS)
        problems = _problems(columns.values, columns.labels)
        if problems:
            raise FileProblemsError(str(path), problems)
        return cls(*(_read_only(column) for column in columns.values))

    @classmethod
    def published(cls, name: str) -> ModelTable:
        """Read a model that comes with the package.

        Parameters
        ----------
        name : str
            One of :data:`PUBLISHED`.

        Returns
        -------
        ModelTable

        Raises
        ------
        InputError
            If there is no such model.
        """
        if name not in PUBLISHED:
            raise InputError(
                f"no Earth model {name!r}; expected {', '.join(PUBLISHED)} or the name of a CSV "
                "file, ending in .csv (in Python: ReferenceEarth.from_csv)"
            )
        with resources.as_file(resources.files(__package__) / "models" / f"{name}.csv") as path:
            return cls.from_csv(path)

    @property
    def core_depth_km(self) -> float:
        """Depth of the boundary between mantle and core, km."""
        return float(self.depth_km[np.flatnonzero(self.vs_km_s == 0.0)[0]])

    @property
    def discontinuities_km(self) -> NDArray[np.float64]:
        """Depths at which a velocity jumps, km, rising."""
        twice = np.diff(self.depth_km) == 0.0
        jumps = (np.diff(self.vp_km_s) != 0.0) | (np.diff(self.vs_km_s) != 0.0)
        depths: NDArray[np.float64] = self.depth_km[1:][twice & jumps]
        return depths


def _read_only(column: NDArray[np.float64]) -> NDArray[np.float64]:
    column.flags.writeable = False
    return column


def _problems(columns: Sequence[NDArray[np.float64]], labels: Sequence[str]) -> list[str]:
    """List what keeps four columns from being a model of the Earth."""
    depth, vp, vs, density = columns
    if len(depth) < 2:
        return [f"expected two rows or more, got {len(depth)}"]
    found = _value_problems((vp, vs, density), labels)
    found += _depth_problems(depth, labels)
    if not found:
        found += _core_problems(depth, vs, labels)
    return found


def _value_problems(columns: Sequence[NDArray[np.float64]], labels: Sequence[str]) -> list[str]:
    found = []
    for name, column in zip(COLUMNS[1:], columns, strict=True):
        low, high, unit = PLAUSIBLE[name]
        fluid = name == "vs_km_s"
        good = np.isfinite(column) & ((column >= 0.0) if fluid else (column > 0.0))
        expected = "0 (fluid) or more" if fluid else "a positive number"
        found += [
            f"{labels[row]}, {name}: expected {expected}, got {column[row]}"
            for row in np.flatnonzero(~good).tolist()
        ]
        odd = good & ~((column >= low) & (column <= high) | (fluid & (column == 0.0)))
        found += [
            f"{labels[row]}, {name}: expected {low:g} to {high:g} {unit}, got {column[row]:g}"
            for row in np.flatnonzero(odd).tolist()
        ]
    return found or _ratio_problems(columns[0], columns[1], labels)


def _ratio_problems(
    vp: NDArray[np.float64], vs: NDArray[np.float64], labels: Sequence[str]
) -> list[str]:
    """Find rows that no elastic body can have."""
    return [
        f"{labels[row]}, vs_km_s: expected less than {LARGEST_VS_OVER_VP:.3f} of vp_km_s "
        f"({vp[row]:g}), got {vs[row]:g} (columns swapped?)"
        for row in np.flatnonzero(vs >= LARGEST_VS_OVER_VP * vp).tolist()
    ]


def _depth_problems(depth: NDArray[np.float64], labels: Sequence[str]) -> list[str]:
    found = []
    if depth[0] != 0.0:
        found.append(f"{labels[0]}, depth_km: expected 0 in the first row, got {depth[0]}")
    # Written so that a NaN counts as wrong.
    found += [
        f"{labels[row]}, depth_km: expected {depth[row - 1]} or more, got {depth[row]}"
        for row in range(1, len(depth))
        if not depth[row] >= depth[row - 1]
    ]
    found += [
        f"{labels[row]}, depth_km: {depth[row]} given three times; twice makes a discontinuity"
        for row in range(2, len(depth))
        if depth[row] == depth[row - 2]
    ]
    if not abs(depth[-1] - EARTH_RADIUS_KM) < 1e-6:
        found.append(
            f"{labels[-1]}, depth_km: expected the Earth's centre, {EARTH_RADIUS_KM}, "
            f"in the last row, got {depth[-1]}"
        )
    return found


def _core_problems(
    depth: NDArray[np.float64], vs: NDArray[np.float64], labels: Sequence[str]
) -> list[str]:
    fluid = np.flatnonzero(vs == 0.0)
    if len(fluid) == 0:
        return ["vs_km_s: expected 0 in the fluid core, found it nowhere"]
    row = int(fluid[0])
    if row < 2:
        return [f"{labels[row]}, vs_km_s: expected a solid surface without water, got 0"]
    if depth[row] != depth[row - 1]:
        return [
            f"{labels[row]}, vs_km_s: 0 must begin at a discontinuity; "
            f"give the depth {depth[row]} twice"
        ]
    return []

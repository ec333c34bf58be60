"""Velocity below one station in place of the reference Earth's crust.

The main type is :class:`LocalColumn`; :func:`column_delay_s` gives the time by which a
rising wave is later in it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Final, Self

import numpy as np
from numpy.typing import ArrayLike, NDArray

from rayloom.earth.csv_columns import read_columns
from rayloom.earth.model_table import LARGEST_VS_OVER_VP, PLAUSIBLE
from rayloom.earth.structure import HIGHEST_KM, EarthStructure
from rayloom.errors import FileProblemsError, InputError
from rayloom.units import EARTH_RADIUS_KM

Floats = NDArray[np.float64]

COLUMNS: Final = ("depth_km", "vp_km_s", "vs_km_s")

DEEPEST_KM: Final = 400.0
"""How deep a local column may reach, km."""

MANTLE_VP_KM_S: Final = 7.6
"""P velocity from which a rock below a discontinuity counts as mantle (common practice)."""

_POINTS, _WEIGHTS = np.polynomial.legendre.leggauss(8)


@dataclass(frozen=True, eq=False)
class LocalColumn:
    """Velocities below one station; below its last row the reference Earth continues.

    Attributes
    ----------
    depth_km : ndarray, shape (n,)
        Depth below sea level, not falling; a depth given twice is a discontinuity. Above
        the first row the first velocities continue.
    vp_km_s, vs_km_s : ndarray, shape (n,)
        Velocities, linear in depth between rows.
    moho_km : float
        Depth of the discontinuity between crust and mantle; NaN where the column tells
        none.
    """

    depth_km: Floats
    vp_km_s: Floats
    vs_km_s: Floats
    moho_km: float

    @classmethod
    def from_csv(cls, path: str | Path) -> Self:
        """Read a column.

        Parameters
        ----------
        path : path
            CSV with depth_km, vp_km_s, vs_km_s, from sea level or higher (negative) down.

        Returns
        -------
        LocalColumn

        Raises
        ------
        FileAccessError
            If the file cannot be read.
        FileProblemsError
            With every line that is wrong.
        """
        read = read_columns(path, COLUMNS)
        depth, vp, vs = read.values
        problems = _depth_problems(depth, read.labels)
        problems += _speed_problems(vp, vs, read.labels)
        if problems:
            raise FileProblemsError(str(path), problems)
        return cls(depth, vp, vs, _moho_km(depth, vp))

    @classmethod
    def of_crust(
        cls,
        earth: EarthStructure,
        thickness_km: float,
        *,
        surface_km: float = 0.0,
        vp_km_s: float | None = None,
        vs_km_s: float | None = None,
    ) -> Self:
        """Build the column of a crust of given thickness.

        Parameters
        ----------
        earth : EarthStructure
            The reference Earth.
        thickness_km : float
            From the ground surface to the mantle, km.
        surface_km : float
            Depth of the ground surface below sea level, km; negative above.
        vp_km_s, vs_km_s : float, optional
            Uniform velocities of the crust. A velocity not given is that of the
            reference crust, its layers stretched in proportion to the thickness.

        Returns
        -------
        LocalColumn
            Where the crust is thinner than that of the reference, the uppermost mantle
            of the reference continues up to it.

        Raises
        ------
        InputError
            If the reference Earth shows no boundary between crust and mantle.
        """
        reference_moho = moho_km(earth)
        moho = surface_km + thickness_km
        table = earth.table
        crust = slice(0, int(np.flatnonzero(table.depth_km == reference_moho)[0]) + 1)
        depth = surface_km + table.depth_km[crust] * (thickness_km / reference_moho)
        speeds = []
        for given, column, wave in (
            (vp_km_s, table.vp_km_s, "P"),
            (vs_km_s, table.vs_km_s, "S"),
        ):
            within = column[crust] if given is None else np.full(len(depth), given)
            below = float(earth.velocity_km_s(reference_moho, wave))
            lid = [below, below] if moho < reference_moho else []
            speeds.append(np.array([*within, *lid]))
        lid_km = [moho, reference_moho] if moho < reference_moho else []
        return cls(np.array([*depth, *lid_km]), speeds[0], speeds[1], moho)

    @property
    def bottom_km(self) -> float:
        """Depth from which the reference Earth continues, km."""
        return float(self.depth_km[-1])

    def speed_km_s(self, wave: str) -> Floats:
        """Velocities of one wave at the rows, (n,), km/s."""
        return self.vp_km_s if wave == "P" else self.vs_km_s


def moho_km(earth: EarthStructure) -> float:
    """Return the depth of the boundary between crust and mantle, km.

    It is the first discontinuity with a P velocity of :data:`MANTLE_VP_KM_S` or more
    below it.

    Parameters
    ----------
    earth : EarthStructure
        The Earth.

    Raises
    ------
    InputError
        If there is none.
    """
    depth = _moho_km(earth.table.depth_km, earth.table.vp_km_s)
    if np.isnan(depth):
        raise InputError(
            f"the Earth model {earth.name} has no discontinuity with a P velocity of "
            f"{MANTLE_VP_KM_S:g} km/s or more below it, so its crust cannot be replaced; give "
            "its Moho as a depth that stands twice"
        )
    return depth


def column_delay_s(
    earth: EarthStructure,
    column: LocalColumn,
    wave: str,
    ray_parameter_s: ArrayLike,
    *,
    sensor_km: float = 0.0,
) -> Floats:
    """Return how much later a rising wave arrives through a local column.

    Parameters
    ----------
    earth : EarthStructure
        The reference Earth.
    column : LocalColumn
        What replaces it below the station.
    wave : {"P", "S"}
        Wave type at the station.
    ray_parameter_s : array_like
        Ray parameter dT/dΔ, s/rad.
    sensor_km : float
        Depth of the sensor below sea level, km; negative above.

    Returns
    -------
    ndarray
        Seconds, of the shape of `ray_parameter_s`.

    Notes
    -----
    The delay is

        ∫ √(1/v_local² − p²/r²) dz − ∫ √(1/v_reference² − p²/r²) dz,

    both from the sensor down to a depth below which the two columns agree; above sea
    level either continues with its topmost velocity, as the elevation correction does.
    At a fixed ray parameter this is the change of the intercept time τ(p) = T − pΔ, and
    since dτ = −Δ dp, a change of the column changes T at a fixed distance by just as
    much, to first order in the change [1]_. Velocity is linear in depth between knots;
    8-point Gauss–Legendre quadrature in each interval.

    References
    ----------
    .. [1] Buland, R. & Chapman, C. H. (1983), The computation of seismic travel times,
       Bulletin of the Seismological Society of America 73, 1271-1302.
    """
    parameter = np.asarray(ray_parameter_s, dtype=np.float64)
    bottom = max(column.bottom_km, sensor_km)
    known = earth.table.depth_km[earth.table.depth_km < bottom]
    knots = np.unique(np.concatenate([known, column.depth_km, [sensor_km, bottom]]))
    knots = knots[(knots >= sensor_km) & (knots <= bottom)]
    half = 0.5 * np.diff(knots)
    depth = (0.5 * (knots[1:] + knots[:-1]))[:, None] + half[:, None] * _POINTS
    weight = (half[:, None] * _WEIGHTS).ravel()
    depth = depth.ravel()
    local = np.interp(depth, column.depth_km, column.speed_km_s(wave))
    reference = earth.velocity_km_s(depth, wave)
    flat = (parameter.reshape(-1, 1) / (EARTH_RADIUS_KM - depth)) ** 2
    later = np.sqrt(np.maximum(1.0 / local**2 - flat, 0.0))
    usual = np.sqrt(np.maximum(1.0 / reference**2 - flat, 0.0))
    return np.asarray(((later - usual) @ weight).reshape(parameter.shape))


def _moho_km(depth: Floats, vp: Floats) -> float:
    jump = (np.diff(depth) == 0.0) & (np.diff(vp) > 0.0) & (vp[1:] >= MANTLE_VP_KM_S)
    return float(depth[1:][jump][0]) if jump.any() else float("nan")


def _depth_problems(depth: Floats, labels: Sequence[str]) -> list[str]:
    if len(depth) < 2:
        return [f"expected two rows or more, got {len(depth)}"]
    found = []
    if not -HIGHEST_KM <= depth[0] <= 0.0:
        found.append(
            f"{labels[0]}, depth_km: expected 0 in the first row, or less for a column that "
            f"begins above sea level, got {depth[0]:g}"
        )
    found += [
        f"{labels[row]}, depth_km: expected {depth[row - 1]:g} or more, got {depth[row]:g}"
        for row in range(1, len(depth))
        if not depth[row] >= depth[row - 1]
    ]
    found += [
        f"{labels[row]}, depth_km: {depth[row]:g} given three times; twice makes a discontinuity"
        for row in range(2, len(depth))
        if depth[row] == depth[row - 2]
    ]
    if depth[-1] > DEEPEST_KM:
        found.append(
            f"{labels[-1]}, depth_km: expected a column of the crust and uppermost mantle, to "
            f"{DEEPEST_KM:g} km at most, got {depth[-1]:g}"
        )
    if depth[-1] <= 0.0:
        found.append(f"{labels[-1]}, depth_km: expected a depth below sea level")
    return found


def _speed_problems(vp: Floats, vs: Floats, labels: Sequence[str]) -> list[str]:
    found = []
    for name, speed in (("vp_km_s", vp), ("vs_km_s", vs)):
        low, high, unit = PLAUSIBLE[name]
        found += [
            f"{labels[row]}, {name}: expected {low:g} to {high:g} {unit}, got {speed[row]:g}"
            for row in np.flatnonzero(~((speed >= low) & (speed <= high))).tolist()
        ]
    found += [
        f"{labels[row]}, vs_km_s: expected less than {LARGEST_VS_OVER_VP:.3f} of vp_km_s "
        f"({vp[row]:g}), got {vs[row]:g} (columns swapped?)"
        for row in np.flatnonzero(vs >= LARGEST_VS_OVER_VP * vp).tolist()
    ]
    return found

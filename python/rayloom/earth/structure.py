"""What a radial Earth consists of: :class:`EarthStructure`."""

from __future__ import annotations

from pathlib import Path
from typing import Any, Final, Literal, Self

import numpy as np
from numpy.typing import ArrayLike, NDArray

from rayloom._core import LayeredEarth, RadialModel
from rayloom.earth.checks import broadcast, require_range
from rayloom.earth.model_table import ModelTable
from rayloom.errors import InputError
from rayloom.units import EARTH_RADIUS_KM

HIGHEST_KM: Final = 12.0
"""How far above sea level the topmost velocity continues, km."""


class EarthStructure:
    """Velocities, density and ellipticity of a spherical Earth.

    Velocities are linear in radius between tabulated depths. Objects cannot be
    changed; they compare by content and can be pickled.

    Parameters
    ----------
    name : {"ak135", "iasp91"}
        Published model. Others: :meth:`from_csv`, :meth:`from_table`.

    Raises
    ------
    InputError
        If there is no such model.
    """

    __slots__ = ("_core", "_mantles", "_name", "_table")

    _name: str
    _table: ModelTable
    _core: LayeredEarth
    _mantles: dict[str, RadialModel]

    def __init__(self, name: str = "ak135") -> None:
        self._assemble(name, ModelTable.published(name))

    def _assemble(self, name: str, table: ModelTable) -> None:
        core = LayeredEarth(
            table.depth_km, table.vp_km_s, table.vs_km_s, table.density_g_cm3, EARTH_RADIUS_KM
        )
        object.__setattr__(self, "_name", name)
        object.__setattr__(self, "_table", table)
        object.__setattr__(self, "_core", core)
        object.__setattr__(self, "_mantles", {wave: core.mantle(wave) for wave in ("P", "S")})

    @classmethod
    def from_table(cls, table: ModelTable, *, name: str = "custom") -> Self:
        """Build a model from a table of velocities and densities.

        Parameters
        ----------
        table : ModelTable
            Made by :meth:`ModelTable.from_arrays` or :meth:`ModelTable.from_csv`.
        name : str
            What to call it in reports.

        Returns
        -------
        Self
        """
        earth = cls.__new__(cls)
        earth._assemble(name, table)
        return earth

    @classmethod
    def from_csv(cls, path: str | Path) -> Self:
        """Read a model of one's own.

        Parameters
        ----------
        path : path
            CSV with the columns depth_km, vp_km_s, vs_km_s, density (g/cm³),
            from the surface to the centre; a depth given twice is a
            discontinuity.

        Returns
        -------
        Self
            Named after the file.

        Raises
        ------
        FileAccessError
            If the file cannot be read.
        FileProblemsError
            With every line that is wrong.
        """
        return cls.from_table(ModelTable.from_csv(path), name=Path(path).stem)

    def __setattr__(self, name: str, value: object) -> None:
        raise AttributeError(f"an Earth model cannot be changed (tried to set {name!r})")

    def __delattr__(self, name: str) -> None:
        raise AttributeError(f"an Earth model cannot be changed (tried to delete {name!r})")

    def __reduce__(self) -> tuple[Any, ...]:
        return _restore, (type(self), self._name, self._table)

    def __eq__(self, other: object) -> bool:
        if not isinstance(other, EarthStructure):
            return NotImplemented
        return self._name == other._name and all(
            np.array_equal(mine, theirs)
            for mine, theirs in zip(self._columns(), other._columns(), strict=True)
        )

    def __hash__(self) -> int:
        return hash((self._name, *(column.tobytes() for column in self._columns())))

    def __repr__(self) -> str:
        return f"{type(self).__name__}({self._name!r})"

    def _columns(self) -> tuple[NDArray[np.float64], ...]:
        table = self._table
        return table.depth_km, table.vp_km_s, table.vs_km_s, table.density_g_cm3

    @property
    def name(self) -> str:
        """Name of the model."""
        return self._name

    @property
    def table(self) -> ModelTable:
        """The model's table."""
        return self._table

    @property
    def radius_km(self) -> float:
        """Radius at sea level, km."""
        return EARTH_RADIUS_KM

    @property
    def core_depth_km(self) -> float:
        """Depth of the boundary between mantle and core, km."""
        return self._table.core_depth_km

    @property
    def discontinuities_km(self) -> NDArray[np.float64]:
        """Depths at which the P or S velocity jumps, km, rising."""
        return self._table.discontinuities_km

    @property
    def layered_earth(self) -> LayeredEarth:
        """The whole Earth, as the numerical core takes it."""
        return self._core

    def mantle_model(self, wave: str = "P") -> RadialModel:
        """Velocity of one wave type above the core, as the numerical core takes it.

        Parameters
        ----------
        wave : {"P", "S"}
            Wave type.

        Returns
        -------
        RadialModel

        Raises
        ------
        InputError
            If the wave type is unknown.
        """
        if wave not in self._mantles:
            raise InputError(f"wave: expected 'P' or 'S', got {wave!r}")
        return self._mantles[wave]

    def velocity_km_s(
        self, depth_km: ArrayLike, wave: str = "P", *, side: Literal["above", "below"] = "below"
    ) -> NDArray[np.float64]:
        """Velocity in crust and mantle.

        Parameters
        ----------
        depth_km : array_like
            Depth; above sea level (negative) the topmost velocity continues.
        wave : {"P", "S"}
            Wave type.
        side : {"below", "above"}
            Which velocity counts at a discontinuity.

        Returns
        -------
        ndarray
            km/s, of the shape of `depth_km`.

        Raises
        ------
        InputError
            If a depth lies in the core or too high, or a name is unknown.
        """
        if side not in ("above", "below"):
            raise InputError(f"side: expected 'above' or 'below', got {side!r}")
        model = self.mantle_model(wave)
        (depth,) = broadcast(depth_km=depth_km)
        self._require_depth("depth_km", depth)
        return model.velocity_km_s(depth.ravel(), below=side == "below").reshape(depth.shape)

    def mean_slowness_s_per_km(
        self, depth_edges_km: ArrayLike, wave: str = "P"
    ) -> NDArray[np.float64]:
        """Mean of 1/v between neighbouring depths, exact across discontinuities.

        Parameters
        ----------
        depth_edges_km : array_like, shape (n + 1,)
            Rising depths; negative above sea level.
        wave : {"P", "S"}
            Wave type.

        Returns
        -------
        ndarray, shape (n,)
            s/km.

        Raises
        ------
        InputError
            If the depths do not rise or leave crust and mantle.
        """
        model = self.mantle_model(wave)
        (edges,) = broadcast(depth_edges_km=depth_edges_km)
        if edges.ndim != 1 or len(edges) < 2 or not np.all(np.diff(edges) > 0.0):
            raise InputError("depth_edges_km: expected two or more rising depths")
        self._require_depth("depth_edges_km", edges)
        return model.mean_slowness_s_per_km(edges)

    def ellipticity(self, radius_km: ArrayLike) -> NDArray[np.float64]:
        """Hydrostatic ellipticity of the surface of equal density at a radius.

        Parameters
        ----------
        radius_km : array_like
            Mean radius of the surface, 0 to the Earth's radius.

        Returns
        -------
        ndarray
            (a − c)/a, of the same shape.

        Raises
        ------
        InputError
            If a radius is out of range.
        """
        (radius,) = broadcast(radius_km=radius_km)
        require_range("radius_km", radius, 0.0, EARTH_RADIUS_KM, unit="km")
        return self._core.ellipticity(radius.ravel()).reshape(radius.shape)

    def _require_depth(self, name: str, depth: NDArray[np.float64]) -> None:
        require_range(name, depth, -HIGHEST_KM, self.core_depth_km, unit="km")


def _restore(kind: type[EarthStructure], name: str, table: ModelTable) -> EarthStructure:
    return kind.from_table(table, name=name)

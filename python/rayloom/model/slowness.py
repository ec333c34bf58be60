"""The slowness model: one slowness per block, beside its reference."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any, Literal, Self, cast

import numpy as np
from numpy.typing import ArrayLike, NDArray

from rayloom.errors import InputError
from rayloom.model.fields import check_field_name
from rayloom.model.grid import BlockGrid

if TYPE_CHECKING:
    import xarray

    from rayloom.earth import ReferenceEarth

Floats = NDArray[np.float64]
Wave = Literal["P", "S"]


class SlownessModel:
    """Slowness of one wave type in the blocks of a grid.

    A model does not change: the ``with_…`` methods return new ones and all arrays
    are read-only.

    Parameters
    ----------
    grid : BlockGrid
        The blocks.
    slowness_s_per_km : array_like, shape (nx, ny, nz)
        Slowness of each block, s/km, positive.
    reference : array_like, shape (nx, ny, nz), optional
        Slowness of the reference model in the same blocks, s/km; by default the
        slowness given, so that the perturbation is zero.
    wave : {"P", "S"}, optional
        Wave type.

    Raises
    ------
    InputError
        If a shape differs from the grid's, a slowness is not finite and positive, or
        the wave is neither P nor S.
    """

    def __init__(
        self,
        grid: BlockGrid,
        slowness_s_per_km: ArrayLike,
        reference: ArrayLike | None = None,
        wave: str = "P",
    ) -> None:
        if wave not in ("P", "S"):
            raise InputError(f'expected "P" or "S", got {wave!r}', where="wave")
        self._grid = grid
        self._wave = cast(Wave, wave)
        self._slowness = _slowness("slowness_s_per_km", slowness_s_per_km, grid)
        self._reference = (
            self._slowness if reference is None else _slowness("reference", reference, grid)
        )
        self._fields: dict[str, Floats] = {}

    def __repr__(self) -> str:
        nx, ny, nz = self.grid.shape
        fields = f", fields {sorted(self._fields)}" if self._fields else ""
        return f"SlownessModel({self.wave}, {nx} × {ny} × {nz} blocks{fields})"

    @property
    def grid(self) -> BlockGrid:
        """The blocks."""
        return self._grid

    @property
    def wave(self) -> Wave:
        """Wave type, "P" or "S"."""
        return self._wave

    @property
    def slowness_s_per_km(self) -> Floats:
        """Slowness of the blocks, shape (nx, ny, nz), s/km."""
        return self._slowness

    @property
    def reference(self) -> Floats:
        """Slowness of the reference model in the blocks, shape (nx, ny, nz), s/km."""
        return self._reference

    @property
    def velocity_km_s(self) -> Floats:
        """Velocity of the blocks, shape (nx, ny, nz), km/s."""
        return np.asarray(1.0 / self._slowness)

    @property
    def reference_velocity_km_s(self) -> Floats:
        """Velocity of the reference model in the blocks, shape (nx, ny, nz), km/s."""
        return np.asarray(1.0 / self._reference)

    @property
    def perturbation_percent(self) -> Floats:
        """Velocity perturbation dV = 100 (s_ref / s − 1), shape (nx, ny, nz); slow is negative."""
        return np.asarray(100.0 * (self._reference / self._slowness - 1.0))

    @property
    def fields(self) -> dict[str, Floats]:
        """Further quantities per block by name (``hits``, …), each of shape (nx, ny, nz)."""
        return dict(self._fields)

    @classmethod
    def from_earth(cls, grid: BlockGrid, earth: ReferenceEarth, wave: str = "P") -> Self:
        """Fill the blocks with a one-dimensional Earth.

        Parameters
        ----------
        grid : BlockGrid
            The blocks, on a sphere or flat.
        earth : ReferenceEarth
            The one-dimensional model.
        wave : {"P", "S"}, optional
            Wave type.

        Returns
        -------
        SlownessModel
            Each block holds the mean of the slowness over its depth range, which is
            its reference too.

        Raises
        ------
        InputError
            If the wave is neither P nor S, or the wave does not exist at a depth.
        """
        layers = np.asarray(earth.mean_slowness_s_per_km(grid.depth_edges_km, wave))
        return cls(grid, np.broadcast_to(layers, grid.shape), wave=wave)

    def with_slowness(self, slowness_s_per_km: ArrayLike) -> Self:
        """Return a model with another slowness and the same reference.

        Parameters
        ----------
        slowness_s_per_km : array_like, shape (nx, ny, nz)
            Slowness of each block, s/km.

        Returns
        -------
        SlownessModel
            Without fields, since they described the former slowness.

        Raises
        ------
        InputError
            If the shape differs or a slowness is not finite and positive.
        """
        return type(self)(self.grid, slowness_s_per_km, self._reference, self.wave)

    def with_fields(self, **arrays: ArrayLike) -> Self:
        """Return the same model with further quantities per block.

        Parameters
        ----------
        **arrays : array_like, shape (nx, ny, nz)
            Quantities by name, NaN where unknown; a name already there is replaced.

        Returns
        -------
        SlownessModel
            With the former fields and the new ones.

        Raises
        ------
        InputError
            If a shape differs from the grid's or a name belongs to the model itself.
        """
        model = type(self)(self.grid, self._slowness, self._reference, self.wave)
        for name, values in {**self._fields, **arrays}.items():
            check_field_name(name)
            model._fields[name] = _block_array(f"field {name!r}", values, self.grid)
        return model

    def to_dataset(self) -> xarray.Dataset:
        """Return the model as an xarray dataset with CF-1.8 metadata.

        Returns
        -------
        xarray.Dataset
            Dimensions (depth, y, x); see :mod:`rayloom.model.dataset`.
        """
        from rayloom.model.dataset import dataset_of

        return dataset_of(self)

    @classmethod
    def from_dataset(cls, dataset: xarray.Dataset) -> SlownessModel:
        """Rebuild a model from the dataset of :meth:`to_dataset`.

        Parameters
        ----------
        dataset : xarray.Dataset
            As :meth:`to_dataset` makes it.

        Returns
        -------
        SlownessModel

        Raises
        ------
        InputError
            If a variable is missing or contradicts another.
        """
        from rayloom.model.dataset import model_of

        return model_of(dataset)

    def write_netcdf(self, path: str | Path) -> None:
        """Write the model to a netCDF file, whole or not at all.

        Parameters
        ----------
        path : str or Path
            The file.

        Raises
        ------
        FileAccessError
            If the file cannot be written.
        """
        from rayloom.model.netcdf import write

        write(self, Path(path))

    @classmethod
    def read_netcdf(cls, path: str | Path) -> SlownessModel:
        """Read a model written by :meth:`write_netcdf`, bit for bit.

        Parameters
        ----------
        path : str or Path
            The file.

        Returns
        -------
        SlownessModel

        Raises
        ------
        FileAccessError
            If the file cannot be read.
        InputError
            If it is not a model.
        """
        from rayloom.model.netcdf import read

        return read(Path(path))


def _block_array(where: str, values: Any, grid: BlockGrid) -> Floats:
    try:
        array = np.array(values, dtype=np.float64, order="C")
    except (TypeError, ValueError) as error:
        raise InputError(f"expected an array of numbers ({error})", where=where) from error
    if array.shape != grid.shape:
        raise InputError(
            f"expected the grid's shape {grid.shape} (nx, ny, nz), got {array.shape}", where=where
        )
    array.flags.writeable = False
    return array


def _slowness(where: str, values: ArrayLike, grid: BlockGrid) -> Floats:
    array = _block_array(where, values, grid)
    bad = ~(np.isfinite(array) & (array > 0.0))
    if np.any(bad):
        first = np.unravel_index(int(np.argmax(bad)), grid.shape)
        block = ", ".join(str(int(i)) for i in first)
        raise InputError(
            f"slowness must be finite and positive (s/km); {int(bad.sum())} of {bad.size} "
            f"blocks are not, first block ({block}) with {array[first]}",
            where=where,
        )
    return array

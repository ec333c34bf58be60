"""Model files: the dataset of a model as netCDF-4, written whole or not at all."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

from rayloom.errors import FileAccessError, InputError
from rayloom.model.dataset import dataset_of, model_of
from rayloom.model.slowness import SlownessModel
from rayloom.writing import replacing

if TYPE_CHECKING:
    import xarray

ENGINE: Final = "h5netcdf"


def write(model: SlownessModel, path: Path) -> None:
    """Write a model under a temporary name, then give it its own.

    Parameters
    ----------
    model : SlownessModel
        The model.
    path : Path
        The file, replaced if there.

    Raises
    ------
    FileAccessError
        If the file cannot be written.
    """
    write_dataset(dataset_of(model), path)


def write_dataset(dataset: xarray.Dataset, path: Path) -> None:
    """Write a dataset of blocks under a temporary name, then give it its own.

    Parameters
    ----------
    dataset : xarray.Dataset
        As :func:`rayloom.model.dataset.block_dataset` makes it.
    path : Path
        The file, replaced if there.

    Raises
    ------
    FileAccessError
        If the file cannot be written.
    """
    packed = {"zlib": True, "complevel": 4, "shuffle": True}
    encoding: dict[Any, dict[str, Any]] = {
        name: {"_FillValue": None, **(packed if variable.ndim == 3 else {})}
        for name, variable in dataset.variables.items()
    }
    with replacing(path) as temporary:
        dataset.to_netcdf(temporary, engine=ENGINE, encoding=encoding)


def read(path: Path) -> SlownessModel:
    """Read a model file.

    Parameters
    ----------
    path : Path
        The file.

    Returns
    -------
    SlownessModel
        The same bits that were written.

    Raises
    ------
    FileAccessError
        If the file is missing or not netCDF-4.
    InputError
        If it is netCDF-4 but not a model.
    """
    dataset = load_dataset(path)
    try:
        return model_of(dataset)
    except InputError as error:
        raise InputError(str(error), where=str(path)) from error


def load_dataset(path: Path) -> xarray.Dataset:
    """Read a netCDF file into memory.

    Parameters
    ----------
    path : Path
        The file.

    Raises
    ------
    FileAccessError
        If the file is missing, damaged or not netCDF-4.
    """
    if not path.is_file():
        raise FileAccessError(f"{path}: there is no such file")
    try:
        return _loaded(path)
    except Exception as error:  # a damaged file makes the libraries raise almost anything
        raise FileAccessError(
            f"{path}: cannot be read as netCDF-4 ({error}); is it whole?"
        ) from error


def _loaded(path: Path) -> xarray.Dataset:
    import h5py  # type: ignore[import-untyped]
    import xarray

    def touch(_name: str, item: Any) -> None:
        dict(item.attrs)

    # A reader that fails half-way complains on the screen; damage is found here before.
    with h5py.File(path, "r") as file:
        touch("/", file)
        file.visititems(touch)
    with xarray.open_dataset(path, engine=ENGINE, decode_times=False) as dataset:
        return dataset.load()

"""A model vector of another solver, taken into a run folder: :func:`import_model`."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from rayloom.errors import FileAccessError, InputError
from rayloom.inversion import InversionResult, adopt_model
from rayloom.model import BlockGrid, SlownessModel
from rayloom.outputs import write_tables
from rayloom.outputs.results import write_model_files
from rayloom.workflow.data import read_back_residuals, read_earth
from rayloom.workflow.folder import RunFolder
from rayloom.workflow.reporting import Reporter
from rayloom.workflow.result_file import save_result
from rayloom.workflow.waves import wave_parts

Floats = NDArray[np.float64]

QUANTITIES: Final = {
    "percent": "perturbation_percent",
    "slowness": "slowness_s_per_km",
    "slowness-change": "slowness_change_s_per_km",
}
"""What a vector may hold, and the column of a CSV that does."""


@dataclass(frozen=True)
class ImportedModel:
    """What became of a model vector.

    Attributes
    ----------
    folder : pathlib.Path
        Where the files are.
    result : InversionResult
        The model and what it explains.
    """

    folder: Path
    result: InversionResult


def import_model(
    path: str | Path,
    vector: str | Path,
    *,
    quantity: str = "percent",
    name: str = "imported",
    reporter: Reporter | None = None,
) -> ImportedModel:
    """Trace a model that another solver found and write what it explains.

    Parameters
    ----------
    path : str or pathlib.Path
        The run folder, or its part of one wave; it keeps its own results.
    vector : str or pathlib.Path
        One value per block, in the order of the columns of G: ``.npy``, or a CSV with a
        column ``perturbation_percent``, ``slowness_s_per_km`` or
        ``slowness_change_s_per_km`` and, if the rows are in another order, ``block``.
    quantity : {"percent", "slowness", "slowness-change"}
        What a ``.npy`` holds: velocity perturbation in percent, slowness in s/km, or
        slowness less that of the reference.
    name : str
        Sub-folder for the files.
    reporter : Reporter, optional
        Hears how it goes.

    Returns
    -------
    ImportedModel

    Raises
    ------
    InputError
        If the vector does not fit the blocks, or the run inverts two waves.
    FileAccessError
        If a file cannot be read or written.
    """
    reporter = reporter or Reporter()
    home = RunFolder.at(path)
    parts = wave_parts(home, home.read_settings())
    if len(parts) > 1:
        raise InputError(
            f"the run has a model for each wave; name one of them: {parts[0].folder.path}",
            where=str(path),
        )
    folder, settings = parts[0].folder, parts[0].settings
    if Path(name).name != name or name in ("", ".", ".."):
        raise InputError(f"'{name}' is no name of a sub-folder", where="name")
    earth = read_earth(folder, settings.earth.model)
    data = read_back_residuals(folder, earth, settings)
    grid = BlockGrid.from_spec(settings.grid)
    model = SlownessModel.from_earth(grid, earth, wave=settings.inversion.wave)
    result = adopt_model(
        data,
        read_block_vector(vector, model, quantity=quantity),
        settings.inversion_settings(),
        progress=reporter.progress,
    )
    target = folder.path / name
    write_tables(target, result)
    result.model.write_netcdf(target / "model.nc")
    save_result(target / "inversion.npz", result)
    write_model_files(target, result)
    return ImportedModel(folder=target, result=result)


def read_block_vector(
    path: str | Path, model: SlownessModel, *, quantity: str = "percent"
) -> SlownessModel:
    """Read one value per block and make a model of it.

    Parameters
    ----------
    path : str or pathlib.Path
        As for :func:`import_model`.
    model : SlownessModel
        Blocks and reference.
    quantity : {"percent", "slowness", "slowness-change"}
        What a ``.npy`` holds.

    Raises
    ------
    InputError
        If the values do not fit the blocks or are not finite.
    FileAccessError
        If the file cannot be read.
    """
    path = Path(path)
    try:
        if path.suffix == ".npy":
            values = np.asarray(np.load(path, allow_pickle=False), dtype=np.float64)
        else:
            values, quantity = _from_csv(path, model.grid.block_count)
    except OSError as error:
        raise FileAccessError(f"{path}: cannot be read ({error.strerror or error})") from error
    except InputError:
        raise
    except ValueError as error:
        raise InputError(
            f"cannot be read as one value per block ({error})", where=str(path)
        ) from error
    shape = model.grid.shape
    if values.shape not in ((model.grid.block_count,), shape):
        raise InputError(
            f"has the shape {values.shape}; expected one value for each of "
            f"{model.grid.block_count} blocks, in the order of blocks.csv",
            where=str(path),
        )
    if not np.all(np.isfinite(values)):
        block = int(np.argmin(np.isfinite(values.ravel())))
        raise InputError(f"block {block} has no finite value", where=str(path))
    return _as_model(path, model, values.reshape(shape), quantity)


def _as_model(path: Path, model: SlownessModel, values: Floats, quantity: str) -> SlownessModel:
    if quantity == "percent":
        if np.any(values <= -100.0):
            raise InputError(
                "a perturbation of -100 % or less leaves no velocity", where=str(path)
            )
        return model.with_slowness(model.reference / (1.0 + values / 100.0))
    slowness = values if quantity == "slowness" else model.reference + values
    if np.any(slowness <= 0.0):
        raise InputError(
            f"block {int(np.argmin(slowness.ravel()))} would have a slowness of "
            f"{slowness.min():.4g} s/km; expected positive ones",
            where=str(path),
        )
    return model.with_slowness(slowness)


def _from_csv(path: Path, blocks: int) -> tuple[Floats, str]:
    import pandas as pd

    table = pd.read_csv(path)
    found = [key for key, column in QUANTITIES.items() if column in table.columns]
    if len(found) != 1:
        raise InputError(
            f"has the columns {', '.join(map(str, table.columns))}; expected one of "
            f"{', '.join(QUANTITIES.values())}",
            where=str(path),
        )
    values: Any = table[QUANTITIES[found[0]]].to_numpy(dtype=np.float64)
    if "block" in table.columns:
        block = table["block"].to_numpy()
        if not np.array_equal(np.sort(block), np.arange(blocks)):
            raise InputError(
                f"the column block does not name each of 0 to {blocks - 1} once", where=str(path)
            )
        values = values[np.argsort(block)]
    return values, found[0]

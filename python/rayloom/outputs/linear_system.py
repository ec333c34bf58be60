"""The linear system of the last model, for people who bring their own solver."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import numpy.typing as npt

from rayloom.errors import InputError
from rayloom.outputs.tables import residual_table, write_table
from rayloom.writing import replacing

if TYPE_CHECKING:
    import pandas as pd

    from rayloom.inversion.result import InversionResult
    from rayloom.model import BlockGrid, SlownessModel

Array = npt.NDArray[Any]


def write_linear_system(folder: str | Path, result: InversionResult) -> list[Path]:
    """Write path lengths, rows, right-hand side and blocks of the last model.

    The system is G (s − s_ref) ≈ d: G holds the path lengths (km) of the rays of
    the last model, s the slowness of the blocks (s/km), and d what that
    difference should explain, station terms, shifts of events and means already
    removed: d = ``residual_after_s`` + G (s_last − s_ref).

    Parameters
    ----------
    folder : str or Path
        Where to write; made if missing.
    result : InversionResult
        The inversion.

    Returns
    -------
    list of Path
        ``G.npz`` (as `scipy.sparse.load_npz` reads it, rows × blocks),
        ``rows.csv`` (one line per row of G), ``d.csv`` and ``blocks.csv`` (one
        line per column of G: index, middle, edges, both slownesses).

    Raises
    ------
    InputError
        No ray is in use.
    FileAccessError
        A file cannot be written.
    """
    from scipy.sparse import csr_array, save_npz

    kept = np.flatnonzero(result.used[result.ray_rows] & result.rays.traced)
    if kept.size == 0:
        raise InputError("no ray is in use, so there is no linear system to write")
    rows = result.ray_rows[kept]
    lengths_km = csr_array(result.rays.path_lengths[kept])
    model = result.model
    change = (model.slowness_s_per_km - model.reference).ravel()
    explained_s = result.residual_after_s[rows] + lengths_km @ change
    base = Path(folder)
    with replacing(base / "G.npz") as temporary:
        save_npz(temporary, lengths_km)
    write_table(base / "rows.csv", _rows(result, rows))
    write_table(base / "d.csv", _frame({"d_s": explained_s}))
    write_table(base / "blocks.csv", block_table(model))
    return [base / name for name in ("G.npz", "rows.csv", "d.csv", "blocks.csv")]


def _rows(result: InversionResult, rows: npt.NDArray[np.int64]) -> pd.DataFrame:
    table = residual_table(result.data, result).iloc[rows]
    columns = ["event", "network", "station", "phase", "uncertainty_s", "weight"]
    used_s = result.uncertainty_s[rows]
    return table[columns].assign(uncertainty_s=used_s, residual_row=rows)


def block_table(model: SlownessModel) -> pd.DataFrame:
    """List the blocks of a model in the order of the columns of G.

    Parameters
    ----------
    model : SlownessModel
        The model.

    Returns
    -------
    DataFrame
        ``block``, ``ix``, ``iy``, ``iz``; middle ``x``, ``y`` (degrees, or km in a
        flat frame), ``depth_km``; ``longitude``, ``latitude`` (not in a flat
        frame); ``top_km``, ``bottom_km``; ``slowness_s_per_km``,
        ``reference_slowness_s_per_km``.
    """
    grid = model.grid
    ix, iy, iz = np.unravel_index(np.arange(grid.block_count), grid.shape)
    x, y, depth = grid.centres.T
    columns: dict[str, Array] = {
        "block": np.arange(grid.block_count),
        "ix": ix,
        "iy": iy,
        "iz": iz,
    }
    columns |= {"x": x, "y": y, "depth_km": depth} | _geography(grid, x, y)
    columns |= {
        "top_km": grid.depth_edges_km[iz],
        "bottom_km": grid.depth_edges_km[iz + 1],
        "slowness_s_per_km": model.slowness_s_per_km.ravel(),
        "reference_slowness_s_per_km": model.reference.ravel(),
    }
    return _frame(columns)


def _geography(grid: BlockGrid, x: Array, y: Array) -> dict[str, Array]:
    if grid.frame.is_flat:
        return {}
    longitude, latitude = grid.frame.geographic_coordinates(x, y)
    return {"longitude": longitude, "latitude": latitude}


def _frame(columns: dict[str, Array]) -> pd.DataFrame:
    import pandas as pd

    return pd.DataFrame(columns)

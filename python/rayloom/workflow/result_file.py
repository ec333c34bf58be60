"""A whole inversion result on disk, so that later steps can take it up.

:func:`save_result` writes what the tables and ``model.nc`` of a run folder do not hold to
the last bit; :func:`load_result` joins it with them again.
"""

from __future__ import annotations

from dataclasses import astuple, fields
from pathlib import Path
from typing import Any

import numpy as np
from scipy.sparse import csr_array

from rayloom.errors import InputError
from rayloom.forward import BoundCheck, Rays
from rayloom.inversion import (
    Counts,
    InversionResult,
    InversionState,
    Iteration,
    LeftOutGroup,
    PriorStrength,
    StructureDemand,
)
from rayloom.model import BlockGrid, SlownessModel
from rayloom.outputs import replacing
from rayloom.residuals import Residuals

_ROW_ARRAYS = (
    "mislocation_km",
    "predicted_s",
    "residual_after_s",
    "weights",
    "standardised",
    "suspected_outlier",
    "used",
    "left_out_because",
    "ray_rows",
)
_RAY_ARRAYS = ("time_s", "outside_time_s", "traced", "point_offsets", "all_points")
_PATH_ARRAYS = ("data", "indices", "indptr")


def save_result(path: str | Path, result: InversionResult) -> None:
    """Write an inversion result, whole or not at all.

    Parameters
    ----------
    path : str or pathlib.Path
        The file, ending in ``.npz``.
    result : InversionResult
        Its rays must be those of the tracer.

    Raises
    ------
    FileAccessError
        If the file cannot be written.
    """
    arrays: dict[str, Any] = {name: getattr(result, name) for name in _ROW_ARRAYS}
    arrays |= {f"term_{phase}": terms for phase, terms in result.station_terms_s.items()}
    arrays |= {f"error_of_term_{phase}": std for phase, std in result.station_term_std_s.items()}
    arrays["prior_std_percent"] = np.array(result.prior_std_percent)
    if result.prior_strength is not None:
        arrays["prior_strength"] = np.array(astuple(result.prior_strength), dtype=np.float64)
    if result.uncertainty_factor is not None:
        arrays["uncertainty_factor"] = result.uncertainty_factor
    if result.structure is not None:
        arrays["structure"] = np.array(astuple(result.structure))
    arrays |= _ray_arrays(result.rays) | _state_arrays(result.state)
    counts = result.counts
    arrays |= {
        "stopped_because": np.array(result.stopped_because),
        "counts": np.array([counts.data, counts.groups, counts.untraced]),
        "left_out_groups": np.array(
            [[g.event, g.phase, str(g.picks), g.reason] for g in counts.left_out_groups],
            dtype=np.str_,
        ).reshape(-1, 4),
    }
    with replacing(path) as temporary, temporary.open("wb") as stream:
        np.savez(stream, **arrays)


def load_result(path: str | Path, data: Residuals, model: SlownessModel) -> InversionResult:
    """Read an inversion result.

    Parameters
    ----------
    path : str or pathlib.Path
        The file written by :func:`save_result`.
    data : Residuals
        The residuals that were inverted.
    model : SlownessModel
        The model that was found.

    Returns
    -------
    InversionResult
        As the inversion returned it.

    Raises
    ------
    InputError
        If the file does not hold a result of these residuals.
    """
    try:
        with np.load(path, allow_pickle=False) as stored:
            arrays = {name: stored[name] for name in stored.files}
        result = _result(arrays, data, model)
    except Exception as error:
        raise InputError(
            f"cannot be read as an inversion result ({error}); do the inversion again with: "
            "rayloom invert DIR --again",
            where=str(path),
        ) from error
    if result.used.size != len(data.residual_s):
        raise InputError(
            f"holds {result.used.size} rows, the residuals {len(data.residual_s)}; do the "
            "inversion again with: rayloom invert DIR --again",
            where=str(path),
        )
    return result


def _result(arrays: dict[str, Any], data: Residuals, model: SlownessModel) -> InversionResult:
    state = _state(arrays)
    count, groups, untraced = arrays["counts"].tolist()
    left_out = tuple(
        LeftOutGroup(event, phase, int(picks), reason)
        for event, phase, picks, reason in arrays["left_out_groups"].tolist()
    )
    return InversionResult(
        data=data,
        model=model,
        history=state.history,
        station_terms_s=_by_phase(arrays, "term_"),
        station_term_std_s=_by_phase(arrays, "error_of_term_"),
        prior_std_percent=float(arrays["prior_std_percent"]),
        prior_strength=_prior_strength(arrays),
        structure=(
            StructureDemand(*arrays["structure"].tolist()) if "structure" in arrays else None
        ),
        uncertainty_factor=arrays.get("uncertainty_factor"),
        rays=_rays(arrays, model.grid),
        stopped_because=str(arrays["stopped_because"]),
        counts=Counts(count, groups, untraced, left_out),
        state=state,
        **{name: arrays[name] for name in _ROW_ARRAYS},
    )


def _prior_strength(arrays: dict[str, Any]) -> PriorStrength | None:
    if "prior_strength" not in arrays:
        return None
    factor, resolved, error_scale, trials, at_limit = arrays["prior_strength"].tolist()
    return PriorStrength(factor, resolved, error_scale, int(trials), bool(at_limit))


def _by_phase(arrays: dict[str, Any], prefix: str) -> dict[str, Any]:
    return {
        name.removeprefix(prefix): values
        for name, values in arrays.items()
        if name.startswith(prefix)
    }


def _ray_arrays(rays: object) -> dict[str, Any]:
    if not isinstance(rays, Rays):
        raise TypeError(f"expected rays of the tracer, got {type(rays).__name__}")
    arrays = {f"ray_{name}": getattr(rays, name) for name in _RAY_ARRAYS}
    arrays |= {f"path_{name}": getattr(rays.path_lengths, name) for name in _PATH_ARRAYS}
    arrays["ray_problems"] = np.array([*rays.problems], dtype=np.str_)
    arrays["ray_problem_counts"] = np.array([*rays.problems.values()], dtype=np.int64)
    arrays["ray_basin_jumps"] = np.array(rays.basin_jumps)
    arrays["ray_bound_check"] = np.array(astuple(rays.bound_check))
    return arrays


def _rays(arrays: dict[str, Any], grid: BlockGrid) -> Rays:
    kept = {name: arrays[f"ray_{name}"] for name in _RAY_ARRAYS}
    paths = csr_array(
        tuple(arrays[f"path_{name}"] for name in _PATH_ARRAYS),
        shape=(kept["time_s"].size, grid.block_count),
    )
    problems = zip(
        arrays["ray_problems"].tolist(), arrays["ray_problem_counts"].tolist(), strict=True
    )
    return Rays(
        grid=grid,
        path_lengths=paths,
        basin_jumps=int(arrays["ray_basin_jumps"]),
        bound_check=_bound_check(arrays),
        problems=dict(problems),
        **kept,
    )


def _bound_check(arrays: dict[str, Any]) -> BoundCheck:
    checked, improved, largest_gain_s = arrays["ray_bound_check"].tolist()
    return BoundCheck(int(checked), int(improved), largest_gain_s)


def _state_arrays(state: InversionState) -> dict[str, Any]:
    history = {
        f"history_{field.name}": np.array([getattr(row, field.name) for row in state.history])
        for field in fields(Iteration)
    }
    return history | {
        f"state_{field.name}": np.array(getattr(state, field.name))
        for field in fields(InversionState)
        if field.name != "history" and getattr(state, field.name) is not None
    }


def _state(arrays: dict[str, Any]) -> InversionState:
    columns = (arrays[f"history_{field.name}"].tolist() for field in fields(Iteration))
    history = tuple(Iteration(*row) for row in zip(*columns, strict=True))
    stored = {
        name.removeprefix("state_"): values if values.ndim else values.item()
        for name, values in arrays.items()
        if name.startswith("state_")
    }
    return InversionState(history=history, **stored)

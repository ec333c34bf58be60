"""What happened so far: the history of an inversion and its resumable state."""

from __future__ import annotations

from dataclasses import asdict, dataclass, fields
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from rayloom.errors import FileAccessError, InputError
from rayloom.writing import replacing

if TYPE_CHECKING:
    import pandas as pd


@dataclass(frozen=True)
class Iteration:
    """One row of the history: a model that was traced and accepted.

    Attributes
    ----------
    iteration : int
        0 is the starting model.
    rms_s : float
        Root mean square of all residuals about the means of their groups, s.
    rms_weighted_s : float
        The same weighted by robust weight over squared uncertainty, s.
    rms_kept_s, rms_kept_expected_s : float
        The same over the picks not suspected as outliers, and its expectation if
        the uncertainties are right, s.
    chi2, chi2_expected : float
        Weighted squared residuals Σ w (r/σ)² and their expectation if the
        uncertainties are right and the errors Gaussian: (N − N_g) − tr H, N and
        N_g counting rows and groups that have weight, times the share of a
        square that the robust weights leave; NaN where not estimated.
    chi2_kept, chi2_kept_expected : float
        Σ (r/σ)² over the picks not suspected as outliers, whatever their weight,
        and its expectation.
    resolved, resolved_blocks : float
        tr H, how many parameters the data resolve, in all and among the blocks.
    prior_misfit : float
        ‖z‖², squared distance from the prior in standard deviations.
    objective : float
        Sum of the robust losses plus ``prior_misfit``.
    variance_reduction_percent : float
        Of the weighted residuals since the reference model.
    model_rms_percent : float
        Root mean square of the velocity perturbation over the blocks crossed by
        rays, weighted by volume.
    model_change_percent : float
        Norm of the last step over the norm of the model, in block values.
    basin_jumps : int
        Rays that took another course than in the previous model.
    data_count, group_count : int
        N rows used and N_g means eliminated.
    downweighted, suspected_outliers : int
        Rows with a weight below one, and rows beyond ``outlier_std``.
    uncertainty_change_percent : float
        Largest change of any uncertainty, by ``rescale_uncertainties``, before this
        model was solved for.
    residual_scale : float
        Spread of standardised residuals that the robust weights assume.
    step_length : float
        Share of the computed step that was taken.
    step_gain : float
        Fall of the objective over the fall that the linearised problem promised.
    solver_iterations : int
        Steps of the least-squares solver, all rounds of weighting together.
    solver_converged : bool
        Whether the last of them reached the accuracy asked.
    seconds, seconds_tracing : float
        Time taken in all and by tracing, s.
    """

    iteration: int
    rms_s: float
    rms_weighted_s: float
    rms_kept_s: float
    rms_kept_expected_s: float
    chi2: float
    chi2_expected: float
    chi2_kept: float
    chi2_kept_expected: float
    resolved: float
    resolved_blocks: float
    prior_misfit: float
    objective: float
    variance_reduction_percent: float
    model_rms_percent: float
    model_change_percent: float
    basin_jumps: int
    data_count: int
    group_count: int
    downweighted: int
    suspected_outliers: int
    uncertainty_change_percent: float
    residual_scale: float
    step_length: float
    step_gain: float
    solver_iterations: int
    solver_converged: bool
    seconds: float
    seconds_tracing: float


def history_frame(history: tuple[Iteration, ...]) -> pd.DataFrame:
    """Return the history as a table, one row per iteration.

    Parameters
    ----------
    history : tuple of Iteration
        One per iteration.

    Returns
    -------
    DataFrame
    """
    import pandas as pd

    names = [field.name for field in fields(Iteration)]
    return pd.DataFrame([asdict(row) for row in history], columns=names)


@dataclass(frozen=True)
class InversionState:
    """Everything needed to go on from an iteration; rays are traced again.

    Attributes
    ----------
    white : (unknowns,) array
        Whitened unknowns of all parameter groups.
    active : (rows,) bool array
        Rows that still have a ray.
    history : tuple of Iteration
        Rows so far; the last one describes this state.
    fingerprint : str
        Digest of the data, the blocks and the priors that the state belongs to.
    rejecting : bool
        Whether suspected outliers have lost all weight.
    uncertainty_factor : (rows,) array or None
        By which the uncertainties of the data were multiplied; None for not at all.
    """

    white: NDArray[np.float64]
    active: NDArray[np.bool_]
    history: tuple[Iteration, ...]
    fingerprint: str
    rejecting: bool = False
    uncertainty_factor: NDArray[np.float64] | None = None

    @property
    def iteration(self) -> int:
        """Number of the iteration; 0 is the starting model."""
        return self.history[-1].iteration


def save_state(path: str | Path, state: InversionState) -> None:
    """Write a state to an ``.npz`` file, whole or not at all.

    Parameters
    ----------
    path : str or Path
        The file.
    state : InversionState
        What to keep.

    Raises
    ------
    FileAccessError
        If the file cannot be written.
    """
    arrays = {
        "white": state.white,
        "active": state.active,
        "rejecting": np.array(state.rejecting),
        "fingerprint": np.array(state.fingerprint),
    }
    if state.uncertainty_factor is not None:
        arrays["uncertainty_factor"] = state.uncertainty_factor
    for field in fields(Iteration):
        column = [getattr(row, field.name) for row in state.history]
        arrays[f"history_{field.name}"] = np.array(column)
    with replacing(path) as temporary, temporary.open("wb") as file:
        np.savez(file, allow_pickle=False, **arrays)


def load_state(path: str | Path) -> InversionState:
    """Read a state written by :func:`save_state`, bit for bit.

    Parameters
    ----------
    path : str or Path
        The file.

    Returns
    -------
    InversionState

    Raises
    ------
    FileAccessError
        If the file cannot be read.
    InputError
        If it is not a checkpoint.
    """
    try:
        with Path(path).open("rb") as file, np.load(file, allow_pickle=False) as stored:
            arrays = {name: stored[name] for name in stored.files}
        rows = zip(
            *(arrays[f"history_{field.name}"].tolist() for field in fields(Iteration)),
            strict=True,
        )
        return InversionState(
            white=arrays["white"],
            active=arrays["active"],
            rejecting=bool(arrays["rejecting"]),
            history=tuple(Iteration(*row) for row in rows),
            fingerprint=str(arrays["fingerprint"]),
            uncertainty_factor=arrays.get("uncertainty_factor"),
        )
    except OSError as error:
        raise FileAccessError(f"{path}: cannot read the checkpoint ({error})") from error
    except Exception as error:
        raise InputError(
            "not a checkpoint of this version of rayloom; delete it to start afresh",
            where=str(path),
        ) from error

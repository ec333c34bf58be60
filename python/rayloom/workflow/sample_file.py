"""Posterior samples on disk: :func:`save_samples` and :func:`load_samples`."""

from __future__ import annotations

from dataclasses import fields
from pathlib import Path

import numpy as np

from rayloom.appraisal import Samples
from rayloom.errors import InputError
from rayloom.outputs import replacing


def save_samples(path: Path, samples: Samples) -> None:
    """Write samples, whole or not at all.

    Parameters
    ----------
    path : pathlib.Path
        The file, ending in ``.npz``.
    samples : Samples
        The samples.

    Raises
    ------
    FileAccessError
        If the file cannot be written.
    """
    arrays = {field.name: np.array(getattr(samples, field.name)) for field in fields(Samples)}
    with replacing(path) as temporary, temporary.open("wb") as file:
        np.savez(file, **arrays)  # type: ignore[arg-type]


def load_samples(path: Path) -> Samples:
    """Read samples written by :func:`save_samples`.

    Parameters
    ----------
    path : pathlib.Path
        The file.

    Returns
    -------
    Samples

    Raises
    ------
    InputError
        If the file holds no samples.
    """
    try:
        with np.load(path, allow_pickle=False) as stored:
            nx, ny, nz = (int(size) for size in stored["shape"])
            return Samples(
                shape=(nx, ny, nz),
                fractional=stored["fractional"],
                prior_draws=stored["prior_draws"],
                mean_fractional=stored["mean_fractional"],
                prior_std=stored["prior_std"],
                approximate=bool(stored["approximate"]),
            )
    except (OSError, ValueError, KeyError) as error:
        raise InputError(
            f"cannot be read as posterior samples ({error}); make them with: rayloom appraise DIR",
            where=str(path),
        ) from error

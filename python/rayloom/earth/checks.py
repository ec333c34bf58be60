"""Checks of the arguments of travel-time calls."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from rayloom.errors import InputError


def broadcast(**arguments: ArrayLike) -> list[NDArray[np.float64]]:
    """Arguments as float64 arrays of one shape.

    Parameters
    ----------
    **arguments : array_like
        The arguments by name.

    Returns
    -------
    list of ndarray
        In the order given, contiguous.

    Raises
    ------
    InputError
        If an argument is not numeric or the shapes do not broadcast.
    """
    arrays = []
    for name, value in arguments.items():
        try:
            arrays.append(np.asarray(value, dtype=np.float64))
        except (TypeError, ValueError) as error:
            raise InputError(f"{name}: expected numbers: {error}") from error
    try:
        return [np.array(array, order="C") for array in np.broadcast_arrays(*arrays)]
    except ValueError as error:
        shapes = ", ".join(
            f"{name} {array.shape}" for name, array in zip(arguments, arrays, strict=True)
        )
        raise InputError(f"shapes do not broadcast: {shapes}") from error


def require_range(
    name: str,
    values: NDArray[np.float64],
    low: float,
    high: float,
    *,
    unit: str,
    missing: bool = False,
) -> None:
    """Refuse values outside a range.

    Parameters
    ----------
    name : str
        What the values are.
    values : ndarray
        The values.
    low, high : float
        Smallest and largest value allowed.
    unit : str
        Their unit.
    missing : bool
        Whether NaN is allowed.

    Raises
    ------
    InputError
        With the first value that does not fit.
    """
    good = (values >= low) & (values <= high)
    if missing:
        good |= np.isnan(values)
    if not np.all(good):
        worst = values[~good].flat[0]
        raise InputError(f"{name}: expected {low:g} to {high:g} {unit}, got {worst:g}")

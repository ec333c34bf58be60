"""Velocities at points of longitude, latitude and depth, as other programs write them.

The main function is :func:`ratio_from_points`.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable
from typing import TYPE_CHECKING, Any, Final

import numpy as np
from numpy.typing import NDArray

from rayloom.errors import InputError
from rayloom.model.slowness import SlownessModel
from rayloom.units import M_PER_KM

if TYPE_CHECKING:
    import xarray

Floats = NDArray[np.float64]

AXES: Final = {
    "longitude": ("longitude", "lon"),
    "latitude": ("latitude", "lat"),
    "depth": ("depth", "depth_km"),
}
"""Names under which each coordinate is found."""

_METRES: Final = ("m", "meter", "meters", "metre", "metres")
_METRES_PER_SECOND: Final = ("m/s", "m s-1", "m.s-1", "m s^-1")


def ratio_from_points(
    dataset: xarray.Dataset, model: SlownessModel, sampled: Iterable[Floats]
) -> Floats:
    """Return slowness over reference in the blocks of a model, from values at points.

    Parameters
    ----------
    dataset : xarray.Dataset
        One-dimensional coordinates longitude, latitude (degrees) and depth (km, or m if
        its units say so), and for P waves ``dvp`` (percent) or ``vp`` (km/s, or m/s if
        its units say so); ``dvs`` or ``vs`` for S.
    model : SlownessModel
        Its blocks and reference.
    sampled : iterable of ndarray, shape (nx, ny, nz, 3)
        Points of the blocks: longitude, latitude and depth_km.

    Returns
    -------
    ndarray, shape (nx, ny, nz)
        Mean over the points, linear between those of the file; 1 for a block that the
        file does not cover, or where it holds no number.

    Raises
    ------
    InputError
        If a coordinate or the variable is missing or odd, or nothing overlaps.
    """
    from scipy.interpolate import RegularGridInterpolator

    axes = [_axis(dataset, name) for name in AXES]
    relative, values = _values(dataset, model.wave)
    values, axes = _rising(values, axes)
    inside = RegularGridInterpolator(axes, values, bounds_error=False, fill_value=np.nan)
    total, count = np.zeros(model.grid.shape), 0
    for points in sampled:
        turned = points.copy()
        turned[..., 0] = axes[0][0] + (points[..., 0] - axes[0][0]) % 360.0
        total += _slowness_share(inside, turned, relative)
        count += 1
    mean = total / count
    ratio = mean if relative else mean / model.reference
    covered = np.isfinite(ratio)
    if not covered.any():
        raise InputError("its points cover no block of the run; check its coordinates")
    return np.where(covered, ratio, 1.0)


def _slowness_share(inside: Callable[[Floats], Floats], points: Floats, relative: bool) -> Floats:
    """Slowness over reference, or slowness in s/km, at points; NaN outside."""
    found = np.asarray(inside(points))
    share = 1.0 / (1.0 + found / 100.0) if relative else 1.0 / found
    return np.asarray(share)


def _axis(dataset: xarray.Dataset, name: str) -> Floats:
    for known in AXES[name]:
        if known in dataset.coords and dataset[known].ndim == 1:
            return _checked_axis(dataset[known], name, known)
    listed = ", ".join(str(coordinate) for coordinate in dataset.coords)
    raise InputError(
        f"no one-dimensional coordinate {name} (found: {listed or 'none'}); expected a model "
        "file of rayloom, or longitude, latitude and depth",
        where=f"coordinate {name}",
    )


def _checked_axis(variable: xarray.DataArray, name: str, known: str) -> Floats:
    values = np.asarray(variable.values, dtype=np.float64)
    if name == "depth":
        scale = M_PER_KM if str(variable.attrs.get("units", "km")).lower() in _METRES else 1.0
        values = values / (-scale if variable.attrs.get("positive") == "up" else scale)
    steps = np.diff(values)
    if values.size < 2 or not ((steps > 0.0).all() or (steps < 0.0).all()):
        raise InputError(
            "expected two values or more that rise, or that fall", where=f"coordinate {known}"
        )
    return values


def _values(dataset: xarray.Dataset, wave: str) -> tuple[bool, Floats]:
    """Return whether values are percent, and the values on (longitude, latitude, depth)."""
    name = "vp" if wave == "P" else "vs"
    dimensions = [next(known for known in AXES[axis] if known in dataset.coords) for axis in AXES]
    for known, relative in ((f"d{name}", True), (name, False)):
        if known not in dataset:
            continue
        variable: Any = dataset[known]
        if set(variable.dims) != {*dimensions}:
            raise InputError(
                f"expected the dimensions {', '.join(dimensions)}, got {variable.dims}",
                where=f"variable {known}",
            )
        values = np.asarray(variable.transpose(*dimensions).values, dtype=np.float64)
        units = str(variable.attrs.get("units", "")).lower()
        values = values / (M_PER_KM if units in _METRES_PER_SECOND else 1.0)
        _require_plausible(values, known, relative=relative)
        return relative, values
    raise InputError(
        f"holds neither d{name} (percent) nor {name} (km/s)", where=f"variable d{name}"
    )


def _require_plausible(values: Floats, name: str, *, relative: bool) -> None:
    low, high, unit = (-50.0, 50.0, "percent") if relative else (0.2, 20.0, "km/s")
    known = values[np.isfinite(values)]
    odd = known[(known < low) | (known > high)]
    if odd.size or not known.size:
        got = f"{odd[0]:g}" if odd.size else "no number"
        raise InputError(
            f"expected {low:g} to {high:g} {unit}, got {got} (other units?)",
            where=f"variable {name}",
        )


def _rising(values: Floats, axes: list[Floats]) -> tuple[Floats, list[Floats]]:
    for number, axis in enumerate(axes):
        if axis[0] > axis[-1]:
            values = np.flip(values, number)
            axes[number] = axis[::-1]
    return values, axes

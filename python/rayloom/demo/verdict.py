"""Judge a model of the highland against the truth."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import ArrayLike, NDArray

from rayloom.demo.bodies import Body, strongest_body
from rayloom.demo.coverage import covered_blocks, relative_to_layers
from rayloom.demo.truth import DemoTruth
from rayloom.errors import InputError
from rayloom.model import BlockGrid, SlownessModel

Flags = NDArray[np.bool_]
Floats = NDArray[np.float64]

HORIZONTAL_BAR_KM: Final = 30.0
DEPTH_BAR_KM: Final = 40.0
NOISE_RATIO_BAR: Final = (0.9, 1.2)
CRUST_KM: Final = 35.0
"""Base of the crust of ak135 (Kennett, Engdahl & Buland 1995): above it station
terms and blocks cannot be told apart."""


@dataclass(frozen=True)
class BodyVerdict:
    """One body of the model beside the true one.

    Parameters
    ----------
    name : str
        Which body.
    true : Body
        What lies below.
    found : Body or None
        What the model has; None if it has nothing of that sign.
    horizontal_error_km, depth_error_km : float
        Distance of the centroids, and found minus true depth; NaN if nothing was found.
    """

    name: str
    true: Body
    found: Body | None
    horizontal_error_km: float
    depth_error_km: float

    @property
    def passed(self) -> bool:
        """Whether the centroid lies within 30 km horizontally and 40 km in depth."""
        near = self.horizontal_error_km <= HORIZONTAL_BAR_KM
        return near and abs(self.depth_error_km) <= DEPTH_BAR_KM

    def __str__(self) -> str:
        if self.found is None:
            return f"{self.name}: not found"
        return (
            f"{self.name}: centroid off by {self.horizontal_error_km:.0f} km horizontally and "
            f"{self.depth_error_km:+.0f} km in depth, "
            f"peak {self.found.peak_percent:+.1f} % of true {self.true.peak_percent:+.1f} %"
        )


@dataclass(frozen=True)
class DemoVerdict:
    """What the model recovered, and how well it fits.

    Parameters
    ----------
    slow, fast : BodyVerdict
        The two bodies.
    noise_ratio : float
        Root mean square of residual over uncertainty, picks not suspected.
    picks_fitted : int
        Picks not suspected.
    outliers_named : int
        True outliers among the suspected picks.
    outliers_true : int
        True outliers among the picks of the inversion.
    outliers_false : int
        Suspected picks that are no outliers.
    """

    slow: BodyVerdict
    fast: BodyVerdict
    noise_ratio: float
    picks_fitted: int
    outliers_named: int
    outliers_true: int
    outliers_false: int

    @property
    def passed(self) -> bool:
        """Whether the slow column and the fit are within the bars."""
        low, high = NOISE_RATIO_BAR
        return self.slow.passed and low <= self.noise_ratio <= high

    def __str__(self) -> str:
        return "\n".join(
            [
                str(self.slow),
                str(self.fast),
                f"misfit over noise: {self.noise_ratio:.2f} over {self.picks_fitted} picks",
                f"outliers: {self.outliers_named} of {self.outliers_true} named, "
                f"{self.outliers_false} picks suspected wrongly",
            ]
        )


def judge(
    truth: DemoTruth,
    model: SlownessModel,
    *,
    pick_keys: ArrayLike,
    residual_s: ArrayLike,
    uncertainty_s: ArrayLike,
    suspected: ArrayLike,
    minimum_rays: float = 10.0,
) -> DemoVerdict:
    """Compare a model and its fit with the truth.

    Parameters
    ----------
    truth : DemoTruth
        From :func:`write_survey`.
    model : SlownessModel
        Any model of the highland; its field ``ray_length_km`` says which blocks count.
    pick_keys : (k,) array of str
        "EVENT NET.STA" of each pick used, to match the outliers.
    residual_s : (k,) array
        What the model leaves unexplained, event terms removed, in seconds.
    uncertainty_s : (k,) array
        Uncertainty of each pick, in seconds.
    suspected : (k,) bool array
        Picks that the inversion marked as outliers.
    minimum_rays : float
        Rays per cell of 50 km that a block's surroundings need for it to belong to a body.

    Returns
    -------
    DemoVerdict
        Centroid errors, fit and outliers.

    Raises
    ------
    InputError
        If the model has no field ``ray_length_km`` or the arrays differ in length.

    Notes
    -----
    A body is found without looking at the truth: perturbations are taken
    relative to the median of their layer, since relative times do not see
    layer means; among the covered blocks below the crust, the strongest one of
    its sign and all that reach half of it and connect with it make the body;
    its centroid is weighted by perturbation times volume
    (:mod:`rayloom.demo.coverage`, :func:`rayloom.demo.bodies.strongest_body`).
    The truth only says what to compare with.
    """
    keys = np.asarray(pick_keys, dtype=np.str_)
    residual = np.asarray(residual_s, dtype=np.float64)
    uncertainty = np.asarray(uncertainty_s, dtype=np.float64)
    marked = np.asarray(suspected, dtype=np.bool_)
    if not keys.shape == residual.shape == uncertainty.shape == marked.shape:
        raise InputError("expected one key, residual, uncertainty and mark per pick")
    usable = _usable(model, minimum_rays)
    percent = relative_to_layers(model.perturbation_percent, usable)
    true_outlier = np.isin(keys, [f"{o.event} {o.network}.{o.station}" for o in truth.outliers])
    fitted = residual[~marked] / uncertainty[~marked]
    return DemoVerdict(
        slow=_compare("slow column", truth.slow, model.grid, percent, usable, -1),
        fast=_compare("fast root", truth.fast, model.grid, percent, usable, +1),
        noise_ratio=float(np.sqrt(np.mean(fitted**2))),
        picks_fitted=int(fitted.size),
        outliers_named=int(np.sum(true_outlier & marked)),
        outliers_true=int(np.sum(true_outlier)),
        outliers_false=int(np.sum(~true_outlier & marked)),
    )


def _usable(model: SlownessModel, minimum_rays: float) -> Flags:
    """Mark the covered blocks below the crust."""
    if "ray_length_km" not in model.fields:
        raise InputError(
            "the model has no field 'ray_length_km'; judge the model that an inversion returns"
        )
    below = model.grid.depth_edges_km[:-1] >= CRUST_KM - 0.01
    covered = covered_blocks(model.grid, model.fields["ray_length_km"], minimum_rays=minimum_rays)
    return np.asarray(covered & below)


def _compare(
    name: str, true: Body, grid: BlockGrid, percent: Floats, usable: Flags, sign: int
) -> BodyVerdict:
    found = strongest_body(grid, percent, usable, sign)
    if found is None:
        return BodyVerdict(name, true, None, float("nan"), float("nan"))
    horizontal_km = float(np.hypot(found.east_km - true.east_km, found.north_km - true.north_km))
    return BodyVerdict(name, true, found, horizontal_km, found.depth_km - true.depth_km)

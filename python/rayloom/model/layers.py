"""Depth edges: blocks thin enough, with an edge on every discontinuity."""

from __future__ import annotations

from itertools import pairwise
from typing import TYPE_CHECKING, Final

import numpy as np
from numpy.typing import NDArray

if TYPE_CHECKING:
    from rayloom.earth import ReferenceEarth

Floats = NDArray[np.float64]

SLIVER: Final = 0.2
"""Thinnest layer between two fixed edges, as a share of the greatest thickness."""


def depth_edges_km(
    earth: ReferenceEarth, *, top_km: float, base_km: float, thickness_km: float
) -> Floats:
    """Cut a depth range into blocks that no discontinuity of the Earth crosses.

    Parameters
    ----------
    earth : ReferenceEarth
        The one-dimensional model.
    top_km, base_km : float
        Depth range, km below sea level. A base within a sliver (a fifth of
        ``thickness_km``) of a discontinuity moves onto it.
    thickness_km : float
        Greatest thickness of a block, km.

    Returns
    -------
    ndarray, shape (blocks + 1,)
        Rising edges, km, in whole km between discontinuities. Of two discontinuities
        with only a sliver between them the weaker one gets no edge, nor does one a
        sliver below the top.
    """
    sliver = SLIVER * thickness_km
    depths = np.asarray(earth.discontinuities_km, dtype=np.float64)
    near_base = depths[np.abs(depths - base_km) <= sliver]
    if near_base.size:
        base_km = float(near_base[np.argmin(np.abs(near_base - base_km))])
    inside = depths[(depths > top_km + sliver) & (depths < base_km - sliver)]
    fixed = [top_km, *_apart(earth, inside, sliver), base_km]
    pieces = [_divided(upper, lower, thickness_km)[:-1] for upper, lower in pairwise(fixed)]
    return np.append(np.concatenate(pieces), base_km)


def _apart(earth: ReferenceEarth, depths: Floats, sliver: float) -> list[float]:
    contrast = np.abs(
        np.asarray(earth.velocity_km_s(depths, side="below"))
        - np.asarray(earth.velocity_km_s(depths, side="above"))
    )
    kept: list[float] = []
    for index in np.argsort(-contrast, kind="stable"):
        if all(abs(depths[index] - other) > sliver for other in kept):
            kept.append(float(depths[index]))
    return sorted(kept)


def _divided(upper_km: float, lower_km: float, thickness_km: float) -> Floats:
    count = int(np.ceil((lower_km - upper_km) / thickness_km))
    while True:
        exact = np.linspace(upper_km, lower_km, count + 1)
        whole = np.concatenate([exact[:1], np.round(exact[1:-1]), exact[-1:]])
        widths = np.diff(whole)
        if widths.min() <= 0.0:
            return exact
        if widths.max() <= thickness_km:
            return whole
        count += 1

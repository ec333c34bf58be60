"""Which temperatures a velocity anomaly could stand for, if temperature alone made it.

Main function: :func:`temperature_range`. It turns an interval of dVp at a depth
into an interval of temperature by published partial derivatives that include
anelasticity, and carries their sources and every caveat with the numbers.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np

from rayloom.errors import InputError

SOURCES: Final = (
    "Cammarano, F., Goes, S., Vacher, P. & Giardini, D. (2003). Inferring upper-mantle "
    "temperatures from seismic velocities. Phys. Earth Planet. Inter. 138, 197-222: "
    "dlnVp/dT = -0.75 +- 0.15 % per 100 K at 200 km depth, -0.23 +- 0.05 % at 800 km",
    "Goes, S., Govers, R. & Vacher, P. (2000). Shallow mantle temperatures under Europe from "
    "P and S wave tomography. J. Geophys. Res. 105, 11153-11169: -0.5 to -2 % per 100 K, "
    "anelasticity included, shallow upper mantle",
)
"""Where the partial derivatives come from."""

ALTERNATIVES: Final = (
    "partial melt: lowers velocity without a higher temperature than the solidus",
    "water in minerals or fluids: lowers velocity and the solidus",
    "composition: depletion, eclogite or cumulates change velocity by up to about a percent",
    "anisotropy: taken for an anomaly by an isotropic model",
)
"""What else makes such an anomaly."""

CAVEAT: Final = (
    "A range that holds only if temperature alone makes the anomaly, relative to the regional "
    "mean at the same depth. Regularisation lowers amplitudes, so true contrasts may be larger. "
    "This is not a hazard assessment: what it means for a volcano is for the responsible "
    "observatory and for licensed practice to say."
)

_ANCHOR_DEPTH_KM: Final = (200.0, 800.0)
_ANCHOR_PERCENT: Final = (-0.75, -0.23)
_ANCHOR_SPREAD: Final = (0.15, 0.05)
_SHALLOW_BASE_KM: Final = 400.0
_SHALLOW_PERCENT: Final = (-2.0, -0.5)


@dataclass(frozen=True)
class TemperatureRange:
    """Temperatures that a velocity anomaly could stand for.

    Attributes
    ----------
    lowest_c, highest_c : float
        Ends of the range of the temperature difference from the regional mean at the
        same depth, °C; positive is hotter.
    partial_percent_per_100c : pair of float
        Strongest and weakest partial derivative of Vp used, percent per 100 °C.
    depth_km : float
        Depth that they were taken at.
    sources, alternatives : tuple of str
        Where the partial derivatives come from; what else could make the anomaly.
    caveat : str
        What the range is not.
    """

    lowest_c: float
    highest_c: float
    partial_percent_per_100c: tuple[float, float]
    depth_km: float
    sources: tuple[str, ...] = SOURCES
    alternatives: tuple[str, ...] = ALTERNATIVES
    caveat: str = CAVEAT

    def __str__(self) -> str:
        return (
            f"{self.lowest_c:+.0f} to {self.highest_c:+.0f} °C if temperature alone made it "
            "(not a hazard assessment)"
        )


def temperature_partials(depth_km: float) -> tuple[float, float]:
    """Strongest and weakest published dlnVp/dT at a depth, percent per 100 °C.

    Between 200 and 800 km Cammarano et al. (2003), linear in depth; down to
    400 km widened to the range of Goes et al. (2000), which alone covers
    depths above 200 km.

    Parameters
    ----------
    depth_km : float
        Depth below sea level, km, 0 to 800.

    Raises
    ------
    InputError
        If the depth lies outside the published range.

    References
    ----------
    See :data:`SOURCES`.
    """
    if not 0.0 <= depth_km <= _ANCHOR_DEPTH_KM[1]:
        raise InputError(
            f"{depth_km:g} km lies outside the depths of the published partial derivatives, "
            f"0 to {_ANCHOR_DEPTH_KM[1]:g} km",
            where="depth_km",
        )
    middle = float(np.interp(depth_km, _ANCHOR_DEPTH_KM, _ANCHOR_PERCENT))
    spread = float(np.interp(depth_km, _ANCHOR_DEPTH_KM, _ANCHOR_SPREAD))
    strongest, weakest = middle - spread, middle + spread
    if depth_km <= _SHALLOW_BASE_KM:
        strongest = min(strongest, _SHALLOW_PERCENT[0])
        weakest = max(weakest, _SHALLOW_PERCENT[1])
    return strongest, weakest


def temperature_range(
    dvp_percent: tuple[float, float], depth_km: float, *, wave: str = "P"
) -> TemperatureRange:
    """Temperature differences that an interval of dVp could stand for.

    Parameters
    ----------
    dvp_percent : pair of float
        Ends of the interval of the velocity perturbation, percent, in any order.
    depth_km : float
        Depth of the anomaly, km, 0 to 800.
    wave : str, optional
        "P": partial derivatives of Vs are not among the sources.

    Returns
    -------
    TemperatureRange
        From the smallest to the largest quotient of perturbation and partial.

    Raises
    ------
    InputError
        If the wave is not P, a value is not finite or the depth is out of range.

    References
    ----------
    See :data:`SOURCES`.
    """
    if wave != "P":
        raise InputError(
            f"temperatures are given for P velocity only, not for {wave}", where="wave"
        )
    ends = np.sort(np.asarray(dvp_percent, dtype=np.float64))
    if ends.shape != (2,) or not np.all(np.isfinite(ends)):
        raise InputError("expected two finite perturbations in percent", where="dvp_percent")
    partials = temperature_partials(depth_km)
    quotients = 100.0 * ends[:, None] / np.array(partials)
    return TemperatureRange(
        lowest_c=float(quotients.min()),
        highest_c=float(quotients.max()),
        partial_percent_per_100c=partials,
        depth_km=float(depth_km),
    )

"""Exact first-arrival times, any textbook of seismology.

In flat layers of constant slowness the transmitted ray has the time
max over p of p X + Σ h √(s² − p²), and a head wave along a layer of slowness q
q X + Σ h √(s² − q²) over its two legs, from the critical distance on.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import brentq

Floats = NDArray[np.float64]


def homogeneous_s(sources: Floats, receivers: Floats, velocity_km_s: float) -> Floats:
    """Return times between all pairs of Cartesian points (km), source by source."""
    way = np.linalg.norm(sources[:, None] - receivers[None], axis=2)
    return np.asarray(way.ravel() / velocity_km_s)


def gradient_s(
    sources: Floats, receivers: Floats, surface_km_s: float, gradient_per_s: float
) -> Floats:
    """Return times in v = v0 + g z: acosh(1 + g² |Δ|² / (2 v1 v2)) / g, source by source."""
    way = np.linalg.norm(sources[:, None] - receivers[None], axis=2)
    first = surface_km_s + gradient_per_s * sources[:, None, 2]
    second = surface_km_s + gradient_per_s * receivers[None, :, 2]
    argument = 1.0 + (gradient_per_s * way) ** 2 / (2.0 * first * second)
    return np.asarray((np.arccosh(argument) / gradient_per_s).ravel())


def layers_s(
    sources: Floats, receivers: Floats, edges_km: Floats, slowness_s_per_km: Floats
) -> Floats:
    """Return times between all pairs in flat layers, source by source."""
    times = [
        _layer_time(
            float(np.hypot(*(source - receiver)[:2])),
            (float(source[2]), float(receiver[2])),
            edges_km,
            slowness_s_per_km,
        )
        for source in sources
        for receiver in receivers
    ]
    return np.array(times)


def _layer_time(
    offset_km: float, depths_km: tuple[float, float], edges: Floats, slowness: Floats
) -> float:
    top, bottom = sorted(depths_km)
    best = _transmitted(offset_km, _thickness(top, bottom, edges), slowness)
    for layer, along in enumerate(slowness):
        if edges[layer] >= bottom:
            legs = (top, edges[layer]), (bottom, edges[layer])
        elif edges[layer + 1] <= top:
            legs = (edges[layer + 1], top), (edges[layer + 1], bottom)
        else:
            continue
        crossed = sum(_thickness(*leg, edges) for leg in legs)
        best = min(best, _head_wave(offset_km, crossed, slowness, along))
    return best


def _thickness(top: float, bottom: float, edges: Floats) -> Floats:
    inside = np.minimum(bottom, edges[1:]) - np.maximum(top, edges[:-1])
    return np.maximum(inside, 0.0)


def _transmitted(offset: float, crossed: Floats, slowness: Floats) -> float:
    used = crossed > 0.0
    if not used.any():
        return np.inf
    height, slow = crossed[used], slowness[used]

    def miss(parameter: float) -> float:
        return float(np.sum(height * parameter / np.sqrt(slow**2 - parameter**2)) - offset)

    limit = slow.min() * (1.0 - 1e-13)
    parameter = brentq(miss, 0.0, limit, xtol=1e-16) if miss(limit) > 0.0 else limit
    return float(parameter * offset + np.sum(height * np.sqrt(slow**2 - parameter**2)))


def _head_wave(offset: float, crossed: Floats, slowness: Floats, along: float) -> float:
    used = crossed > 0.0
    height, slow = crossed[used], slowness[used]
    if np.any(slow <= along):
        return np.inf
    root = np.sqrt(slow**2 - along**2)
    if np.sum(height * along / root) > offset:
        return np.inf
    return float(along * offset + np.sum(height * root))

"""What the rays that run close to a ray say of its residual.

The main type is :class:`Nearby`. Structure below the network delays neighbouring rays
alike; what is left of a residual after its event, its station and its neighbours are
taken off tells of errors.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Final

import numpy as np

from rayloom.residuals.screens.pattern import Pattern, sigma_of
from rayloom.survey.tables import BoolArray, FloatArray, IndexArray

_MANTLE_KM_S: Final = {"P": 8.1, "S": 4.5}
_MEAN_DEPTH_KM: Final = 200.0
_DEPTH_SPREAD_KM: Final = 115.0
"""Rays are compared over the upper 400 km: the mean depth and its standard deviation."""

_ASKED: Final = 40
_TAKEN: Final = 12
_FARTHEST_KM: Final = 150.0
_CORRELATIONS_KM: Final = (35.0, 50.0, 70.0, 100.0)
_TRIAL_ROWS: Final = 800
_CHUNK_ROWS: Final = 4000
_DOUBTFUL_SIGMAS: Final = 4.0
_LEAST_SIGMA_S: Final = 0.02


@dataclass(frozen=True, eq=False)
class Expectation:
    """What neighbouring rays let expect.

    Parameters
    ----------
    value_s : (m,) float array
        Expected value of ``Pattern.left_s``, s; 0 where no ray is near.
    sigma_s : (m,) float array
        Standard deviation of the value left about it, s, the pick's noise included.
    """

    value_s: FloatArray
    sigma_s: FloatArray


class Nearby:
    """Expectations from neighbouring rays, for all rows of a pattern.

    Values are interpolated by simple kriging from the nearest rays used, in the metric
    of :func:`ray_points_km`, with a Gaussian covariance. Rows that stand out from the median
    of their neighbours do not speak for others.

    Parameters
    ----------
    pattern : Pattern
        Residuals without event and station terms.
    silent : (m,) bool array, optional
        Rows that do not speak for others.

    References
    ----------
    Chilès, J.-P. & Delfiner, P. (2012). Geostatistics: Modeling Spatial Uncertainty,
    2nd edition. Wiley, chapter 3 (simple kriging).
    """

    def __init__(self, pattern: Pattern, *, silent: BoolArray | None = None) -> None:
        self.pattern = pattern
        self.points_km = ray_points_km(pattern)
        self._near, self._apart_km = self._nearest()
        self._reliable = self._not_doubtful()
        if silent is not None:
            self._reliable &= ~silent
        self._left_sigma_s = max(sigma_of(pattern.left_s[pattern.kept]), _LEAST_SIGMA_S)
        self._noise_s, self._correlation_km = self._fit()

    @cached_property
    def all_rays(self) -> Expectation:
        """From all other rays."""
        return self._expectation(np.ones(self._near.shape, dtype=bool))

    @cached_property
    def other_sites(self) -> Expectation:
        """From rays to other stations."""
        site = self.pattern.site
        return self._expectation(site[self._near] != site[:, np.newaxis])

    @cached_property
    def other_events(self) -> Expectation:
        """From rays of other events."""
        event = self.pattern.group_event[self.pattern.group]
        return self._expectation(event[self._near] != event[:, np.newaxis])

    @cached_property
    def surprise_s(self) -> FloatArray:
        """What other rays do not explain, s, shape (m,)."""
        return np.asarray(self.pattern.left_s - self.all_rays.value_s)

    @cached_property
    def surprise_sigma_s(self) -> float:
        """Robust standard deviation of the surprise over the rows used, s."""
        return max(sigma_of(self.surprise_s[self.pattern.kept]), _LEAST_SIGMA_S)

    def _nearest(self) -> tuple[IndexArray, FloatArray]:
        """Nearest rows used, and their separation; the row itself where there are none."""
        from scipy.spatial import cKDTree

        pattern = self.pattern
        near = np.tile(np.arange(len(pattern))[:, np.newaxis], (1, _ASKED))
        apart_km = np.full(near.shape, np.inf)
        wave = pattern.sites.wave[pattern.site]
        for name in np.unique(wave).tolist():
            rows = np.flatnonzero(wave == name)
            source = rows[pattern.kept[rows]]
            count = min(_ASKED, len(source))
            if count < 2:
                continue
            distance_km, number = cKDTree(self.points_km[source]).query(
                self.points_km[rows], k=count
            )
            near[rows, :count] = source[number]
            apart_km[rows, :count] = distance_km
        return near, apart_km

    def _allowed(self, chosen: BoolArray) -> BoolArray:
        """Keep the nearest of the neighbours chosen, never the row itself."""
        allowed = chosen & (self._near != np.arange(len(self._near))[:, np.newaxis])
        allowed &= self._apart_km <= _FARTHEST_KM
        return np.asarray(allowed & (np.cumsum(allowed, axis=1) <= _TAKEN))

    def _not_doubtful(self) -> BoolArray:
        """Whether each row is used and near the median of its neighbours."""
        left_s = self.pattern.left_s
        allowed = self._allowed(np.ones(self._near.shape, dtype=bool))
        values = np.sort(np.where(allowed, left_s[self._near], np.nan), axis=1)
        count = allowed.sum(axis=1)
        rows = np.arange(len(values))
        median_s = 0.5 * (values[rows, np.maximum(count - 1, 0) // 2] + values[rows, count // 2])
        off_s = left_s - np.where(count > 0, median_s, 0.0)
        kept = self.pattern.kept
        return np.asarray(kept & (np.abs(off_s) <= _DOUBTFUL_SIGMAS * sigma_of(off_s[kept])))

    def _fit(self) -> tuple[float, float]:
        """Choose noise and correlation length so that kept rows are best expected."""
        rows = np.flatnonzero(self.pattern.kept)
        rows = rows[:: max(1, len(rows) // _TRIAL_ROWS)]
        noise_s = max(0.5 * self._left_sigma_s, _LEAST_SIGMA_S)
        found = (noise_s, _CORRELATIONS_KM[1])
        if len(rows) < _TAKEN:
            return found
        chosen = self._allowed(np.ones(self._near.shape, dtype=bool))
        best_s = np.inf
        for correlation_km in _CORRELATIONS_KM:
            value_s, _ = self._kriged(rows, chosen[rows], noise_s, correlation_km)
            sigma_s = sigma_of(self.pattern.left_s[rows] - value_s)
            if sigma_s < best_s:
                best_s, found = sigma_s, (noise_s, correlation_km)
        return max(min(0.9 * best_s, self._left_sigma_s), _LEAST_SIGMA_S), found[1]

    def _expectation(self, chosen: BoolArray) -> Expectation:
        allowed = self._allowed(chosen & self._reliable[self._near])
        value_s = np.zeros(len(allowed))
        sigma_s = np.zeros(len(allowed))
        for start in range(0, len(allowed), _CHUNK_ROWS):
            rows = np.arange(start, min(start + _CHUNK_ROWS, len(allowed)))
            value_s[rows], sigma_s[rows] = self._kriged(
                rows, allowed[rows], self._noise_s, self._correlation_km
            )
        kept = self.pattern.kept
        off = (self.pattern.left_s - value_s)[kept] / sigma_s[kept]
        return Expectation(value_s, sigma_s * max(sigma_of(off), 0.5) if kept.any() else sigma_s)

    def _kriged(
        self, rows: IndexArray, allowed: BoolArray, noise_s: float, correlation_km: float
    ) -> tuple[FloatArray, FloatArray]:
        """Interpolate; a neighbour that is not allowed is given no covariance with any."""
        width = int(allowed.sum(axis=1).max(initial=1)) or 1
        order = np.argsort(~allowed, axis=1, kind="stable")[:, :width]
        near = np.take_along_axis(self._near[rows], order, axis=1)
        counts = np.take_along_axis(allowed, order, axis=1)
        points = self.points_km[near] - self.points_km[rows][:, np.newaxis]
        square = np.einsum("mki,mki->mk", points, points)
        between = square[:, :, None] + square[:, None, :] - 2.0 * points @ points.swapaxes(1, 2)
        variance = self._left_sigma_s**2
        shape = -0.5 / correlation_km**2
        matrix = variance * np.exp(shape * between) * (counts[:, :, None] & counts[:, None, :])
        diagonal = np.arange(width)
        matrix[:, diagonal, diagonal] = variance + noise_s**2
        towards = variance * np.exp(shape * square) * counts
        weights = np.linalg.solve(matrix, towards[:, :, np.newaxis])[:, :, 0]
        value_s = np.einsum("mk,mk->m", weights, np.where(counts, self.pattern.left_s[near], 0.0))
        left_over = np.maximum(variance - np.einsum("mk,mk->m", weights, towards), 0.0)
        return value_s, np.sqrt(left_over + noise_s**2)


def ray_points_km(pattern: Pattern) -> FloatArray:
    """Place each ray as a point so that distances are mean separations of rays.

    With q the horizontal way per unit of depth, the mean square separation of two rays over
    depths of mean z and standard deviation s is (Δx + z Δq)² + (s Δq)².

    Returns
    -------
    (m, 4) float array
        Coordinates in km.
    """
    velocity_km_s = np.where(
        pattern.sites.wave[pattern.site] == "S", _MANTLE_KM_S["S"], _MANTLE_KM_S["P"]
    )
    sine = np.minimum(pattern.slowness_s_per_km * velocity_km_s, 0.95)
    tangent = sine / np.sqrt(1.0 - sine**2)
    angle = pattern.back_azimuth_rad
    lean = np.stack([tangent * np.sin(angle), tangent * np.cos(angle)], axis=1)
    place = np.stack([pattern.sites.x_km, pattern.sites.y_km], axis=1)[pattern.site]
    return np.hstack([place + _MEAN_DEPTH_KM * lean, _DEPTH_SPREAD_KM * lean])

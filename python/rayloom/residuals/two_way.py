"""Station values shared by several events whose means are unknown: :func:`fit_two_way`."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np

from rayloom.survey.tables import FloatArray, IndexArray

HUBER: Final = 3.0
"""Standard deviations beyond which a pick loses weight."""

_ROUNDS: Final = 50
_SETTLED_S: Final = 1e-9


@dataclass(frozen=True)
class TwoWayFit:
    """The fit r = m(event) + s(station).

    Attributes
    ----------
    station_s : (stations,) float array
        Values s, s; the weighted mean of the event means m is zero.
    event_s : (events,) float array
        Event means m, s.
    weight : (rows,) float array
        Robust weight of each row, 0 to 1.
    """

    station_s: FloatArray
    event_s: FloatArray
    weight: FloatArray


def fit_two_way(
    residual_s: FloatArray,
    uncertainty_s: FloatArray,
    event: IndexArray,
    station: IndexArray,
    *,
    systematic_s: float,
) -> TwoWayFit:
    """Fit event means and station values to residuals by weighted least squares.

    Parameters
    ----------
    residual_s, uncertainty_s : (n,) float arrays
        Residuals and the standard deviation of each pick, s.
    event, station : (n,) int arrays
        Numbers from 0 without gaps; events and stations hang together.
    systematic_s : float
        Further standard deviation of each row in judging outliers, s.

    Returns
    -------
    TwoWayFit

    Notes
    -----
    Minimises Σ ρ((r − m − s)/√(σ² + σ_sys²)) weighted by 1/σ², ρ quadratic up to three
    standard deviations and linear beyond (Huber 1964), by reweighting from a start at
    medians; without outliers it is the plain weighted fit.

    References
    ----------
    Huber, P. J. (1964), Robust estimation of a location parameter, Annals of
    Mathematical Statistics 35, 73-101.
    """
    spread_s = np.sqrt(uncertainty_s**2 + systematic_s**2)
    means = _medians(residual_s, event)
    values = _medians(residual_s - means[event], station)
    for _ in range(_ROUNDS):
        weight = _huber((residual_s - means[event] - values[station]) / spread_s)
        before = values
        means, values = _solved(residual_s, weight / uncertainty_s**2, event, station)
        if np.abs(values - before).max() < _SETTLED_S:
            break
    return TwoWayFit(values, means, weight)


def _huber(standardised: FloatArray) -> FloatArray:
    return np.asarray(HUBER / np.maximum(np.abs(standardised), HUBER))


def _medians(values: FloatArray, group: IndexArray) -> FloatArray:
    return np.array([np.median(values[group == number]) for number in range(group.max() + 1)])


def _solved(
    residual_s: FloatArray, weight: FloatArray, event: IndexArray, station: IndexArray
) -> tuple[FloatArray, FloatArray]:
    """Solve the normal equations; a rank-one term fixes the constant that m and s share."""
    events, stations = int(event.max()) + 1, int(station.max()) + 1
    by_event = np.bincount(event, weight, events)
    by_station = np.bincount(station, weight, stations)
    shared = np.zeros((events, stations))
    np.add.at(shared, (event, station), weight)
    normal = np.block([[np.diag(by_event), shared], [shared.T, np.diag(by_station)]])
    free = np.concatenate([np.ones(events), -np.ones(stations)])
    right = np.concatenate(
        [
            np.bincount(event, weight * residual_s, events),
            np.bincount(station, weight * residual_s, stations),
        ]
    )
    scale = weight.sum() / (events + stations) ** 2
    solution = np.linalg.solve(normal + scale * np.outer(free, free), right)
    means, values = solution[:events], solution[events:]
    constant = float(by_event @ means / by_event.sum())
    return means - constant, values + constant

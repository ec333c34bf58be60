"""Who recorded what, how well, and how wrongly: the error side of the picks."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]

RECORDED_SHARE = 0.85
CLASS_SHARES = (0.45, 0.35, 0.20)
CLASS_UNCERTAINTY_S = (0.06, 0.09, 0.14)
"""Standard deviation of the pick noise by class; the file states it per pick."""

OUTLIER_SHARE = 0.03
OUTLIER_RANGE_S = (0.8, 4.0)
CYCLE_SKIP_SHARE = 0.6
LATE_SKIP_SHARE = 0.75
STATION_TERM_S = 0.1

NO_OUTLIER, GROSS_ERROR, CYCLE_SKIP = "", "gross error", "cycle skip"


@dataclass(frozen=True)
class Recordings:
    """Which stations recorded which events, event by event.

    Parameters
    ----------
    event_index, station_index : (k,) int arrays
        Rows of the events and stations.
    clarity : (k,) array
        How well each arrival stands out, in no unit: the larger, the better.
    """

    event_index: Integers
    station_index: Integers
    clarity: Floats


@dataclass(frozen=True)
class PickErrors:
    """Errors of picks, all in seconds, row by row.

    Parameters
    ----------
    uncertainty_s : (k,) array
        What the picker states.
    noise_s : (k,) array
        Normal error of that standard deviation.
    outlier_s : (k,) array
        Shift of the outliers, zero elsewhere.
    outlier_kind : (k,) array of str
        Empty, "gross error" or "cycle skip".
    """

    uncertainty_s: Floats
    noise_s: Floats
    outlier_s: Floats
    outlier_kind: NDArray[np.str_]


def draw_recordings(magnitude: Floats, station_count: int, rng: np.random.Generator) -> Recordings:
    """Let the clearest 85 % of all event-station pairs be recorded.

    Parameters
    ----------
    magnitude : (n,) array
        Event magnitudes: large events are recorded more widely.
    station_count : int
        Number of stations, each of its own quality.
    rng : numpy.random.Generator
        Source of chance.
    """
    quality = rng.normal(0.0, 0.7, station_count)
    clarity = (magnitude - magnitude.mean())[:, np.newaxis] + quality
    clarity = clarity + rng.normal(0.0, 0.8, clarity.shape)
    recorded = clarity >= np.quantile(clarity, 1.0 - RECORDED_SHARE)
    event_index, station_index = np.nonzero(recorded)
    return Recordings(event_index, station_index, clarity[recorded])


def draw_errors(recordings: Recordings, rng: np.random.Generator) -> PickErrors:
    """Draw uncertainty classes, noise and outliers of all picks.

    Parameters
    ----------
    recordings : Recordings
        Clear arrivals tend to be picked with a small uncertainty.
    rng : numpy.random.Generator
        Source of chance.
    """
    count = recordings.clarity.size
    rank = np.argsort(np.argsort(-(recordings.clarity + rng.normal(0.0, 0.8, count))))
    bounds = np.cumsum(CLASS_SHARES)[:-1] * count
    uncertainty_s = np.array(CLASS_UNCERTAINTY_S)[np.searchsorted(bounds, rank, side="right")]
    noise_s = uncertainty_s * rng.normal(size=count)

    outlier_s = np.zeros(count)
    outlier_kind = np.full(count, NO_OUTLIER, dtype="<U11")
    rows = np.sort(rng.choice(count, size=round(OUTLIER_SHARE * count), replace=False))
    skips = rng.uniform(size=rows.size) < CYCLE_SKIP_SHARE
    outlier_kind[rows] = np.where(skips, CYCLE_SKIP, GROSS_ERROR)
    outlier_s[rows] = np.where(skips, *_shifts_s(recordings.event_index[rows], rng))
    return PickErrors(uncertainty_s, noise_s, outlier_s, outlier_kind)


def draw_station_terms_s(count: int, rng: np.random.Generator) -> Floats:
    """Delays below the stations that no block resolves, with zero mean, in seconds."""
    terms_s = rng.normal(0.0, STATION_TERM_S, count)
    return np.asarray(terms_s - terms_s.mean())


def _shifts_s(event_index: Integers, rng: np.random.Generator) -> tuple[Floats, Floats]:
    """Shifts of a row if it is a cycle skip, and if it is a gross error, in seconds.

    A skip is one or two periods of the event's own pulse, mostly late.
    """
    count = event_index.size
    period_s = rng.uniform(0.9, 1.5, int(event_index.max(initial=0)) + 1)[event_index]
    cycles = np.where(rng.uniform(size=count) < 0.8, 1.0, 2.0)
    direction = np.where(rng.uniform(size=count) < LATE_SKIP_SHARE, 1.0, -1.0)
    gross_s = rng.uniform(*OUTLIER_RANGE_S, count) * rng.choice([-1.0, 1.0], count)
    return direction * cycles * period_s, gross_s

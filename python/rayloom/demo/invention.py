"""Invent a survey in memory: draw everything, then time every pick."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from rayloom.demo.highland import highland_stations
from rayloom.demo.picking import (
    PickErrors,
    Recordings,
    draw_errors,
    draw_recordings,
    draw_station_terms_s,
)
from rayloom.demo.places import PLACES
from rayloom.demo.seismicity import Seismicity, draw_seismicity
from rayloom.demo.structure import (
    DISORDER_LENGTHS_KM,
    DISORDER_PERCENT,
    FAST_ROOT,
    SLOW_COLUMN,
    TRUTH_SPACING_KM,
    Disorder,
    truth_grid,
    truth_model,
)
from rayloom.demo.times import Progress, standard_time_s, structure_delay_s
from rayloom.earth import ReferenceEarth
from rayloom.forward.settings import DistantMethod
from rayloom.model import SlownessModel
from rayloom.survey import Stations

Floats = NDArray[np.float64]

DEFAULT_SEED: Final = 20170301


@dataclass(frozen=True)
class Scenario:
    """What a survey is drawn from.

    Parameters
    ----------
    seed : int
        Decides every draw.
    station_count : int
        Number of stations, 3 to 60.
    event_count : int
        Number of events.
    spacing_km : float
        Block size of the truth below the network.
    method : {"bent", "reference", "straight"}
        How the true rays are traced.
    """

    seed: int = DEFAULT_SEED
    station_count: int = len(PLACES)
    event_count: int = 120
    spacing_km: float = TRUTH_SPACING_KM
    method: DistantMethod = "bent"


@dataclass(frozen=True)
class Invention:
    """A survey with its truth; picks are the rows of ``recordings`` and ``errors``.

    Parameters
    ----------
    scenario : Scenario
        What it was drawn from.
    stations : Stations
        The network.
    seismicity : Seismicity
        Events as they were and as the catalogue has them.
    recordings : Recordings
        Event and station of every pick.
    errors : PickErrors
        Errors of every pick.
    station_terms_s : (stations,) array
        Delay below each station that no block holds.
    model : SlownessModel
        The true structure.
    travel_s : (k,) array
        Picked minus true origin time, errors included.
    """

    scenario: Scenario
    stations: Stations
    seismicity: Seismicity
    recordings: Recordings
    errors: PickErrors
    station_terms_s: Floats
    model: SlownessModel
    travel_s: Floats


def invent(
    scenario: Scenario, *, threads: int | None = None, progress: Progress | None = None
) -> Invention:
    """Draw a survey, each thing from its own stream of chance so that none disturbs another.

    Parameters
    ----------
    scenario : Scenario
        What to draw from.
    threads : int, optional
        Number of threads; all by default.
    progress : callable, optional
        Called with rays done and rays in all.
    """
    streams = [
        np.random.default_rng(child) for child in np.random.SeedSequence(scenario.seed).spawn(5)
    ]
    earth = ReferenceEarth("ak135")
    stations = highland_stations(scenario.station_count)
    seismicity = draw_seismicity(scenario.event_count, streams[0])
    true = seismicity.true
    recordings = draw_recordings(true.magnitude, scenario.station_count, streams[1])
    errors = draw_errors(recordings, streams[2])
    terms_s = draw_station_terms_s(scenario.station_count, streams[3])
    disorder = Disorder(DISORDER_PERCENT, DISORDER_LENGTHS_KM, streams[4])
    model = truth_model(
        truth_grid(earth, spacing_km=scenario.spacing_km), earth, SLOW_COLUMN, FAST_ROOT, disorder
    )

    pairs = np.column_stack([recordings.event_index, recordings.station_index])
    travel_s = standard_time_s(earth, true, stations, pairs)
    travel_s += structure_delay_s(
        model,
        earth,
        true,
        stations,
        pairs,
        method=scenario.method,
        threads=threads,
        progress=progress,
    )
    travel_s += terms_s[recordings.station_index] + errors.noise_s + errors.outlier_s
    return Invention(scenario, stations, seismicity, recordings, errors, terms_s, model, travel_s)

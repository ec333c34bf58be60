"""Small inverse problems with known answers, for the tests of the inversion."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array

from rayloom.earth import ReferenceEarth
from rayloom.inversion import InversionSettings, matern_prior
from rayloom.model import BlockGrid, Frame, SlownessModel
from rayloom.residuals import Residuals
from rayloom.survey import Events, Stations

Floats = NDArray[np.float64]
SLOWNESS = 0.125


@dataclass(frozen=True)
class StraightPaths:
    """Rays of fixed course; ``curvature`` (1/s) makes their times bend downwards.

    The time of ray i is G_i s_ref + a_i − curvature · a_i², a = G (s − s_ref), and
    the path lengths returned are its exact derivative.
    """

    lengths: csr_array
    curvature: float = 0.0
    lost: tuple[int, ...] = ()

    def __call__(
        self,
        model: SlownessModel,
        *,
        previous: object,
        progress: Callable[[int, int], None] | None,
    ) -> TracedPaths:
        reference = model.reference.ravel()
        change = self.lengths @ (model.slowness_s_per_km.ravel() - reference)
        time = self.lengths @ reference + change - self.curvature * change**2
        traced = np.ones(time.size, dtype=bool)
        traced[list(self.lost)] = False
        slope = 1.0 - 2.0 * self.curvature * change
        lengths = self.lengths.copy()
        lengths.data = lengths.data * np.repeat(slope * traced, np.diff(lengths.indptr))
        if progress is not None:
            progress(time.size, time.size)
        return TracedPaths(np.where(traced, time, np.nan), lengths, traced)


@dataclass(frozen=True)
class TracedPaths:
    """What :class:`StraightPaths` returns."""

    time_s: Floats
    path_lengths: csr_array
    traced: NDArray[np.bool_]
    basin_jumps: int = 0


@dataclass(frozen=True)
class Case:
    """Data, blocks, rays and the truth behind them."""

    data: Residuals
    model: SlownessModel
    forward: StraightPaths
    perturbation: Floats
    station_terms_s: Floats


def straight_lengths(
    grid: BlockGrid, station_x: Floats, station_y: Floats, azimuth: Floats, slope: Floats
) -> csr_array:
    """Lengths in each block of rays that leave downwards, sampled every 2 km of depth."""
    depth = np.arange(grid.depth_edges_km[0] + 1.0, grid.depth_edges_km[-1], 2.0)
    points = np.stack(
        [
            station_x[:, None] + (slope * np.sin(azimuth))[:, None] * depth,
            station_y[:, None] + (slope * np.cos(azimuth))[:, None] * depth,
            np.broadcast_to(depth, (station_x.size, depth.size)),
        ],
        axis=-1,
    )
    block = grid.locate(points)
    inside = block >= 0
    row = np.broadcast_to(np.arange(station_x.size)[:, None], block.shape)
    length = np.broadcast_to(2.0 * np.sqrt(1.0 + slope**2)[:, None], block.shape)
    matrix = csr_array(
        (length[inside], (row[inside], block[inside])),
        shape=(station_x.size, grid.block_count),
    )
    matrix.sum_duplicates()
    return matrix


def small_case(
    *,
    seed: int = 1,
    events: int = 14,
    stations: int = 18,
    noise_s: float = 0.05,
    curvature: float = 0.0,
    term_std_s: float = 0.1,
    phase: str = "P",
) -> Case:
    """Draw a truth from the prior on 8 × 8 × 6 blocks, with station terms and noise."""
    random = np.random.default_rng(seed)
    grid = BlockGrid(
        Frame.flat(),
        np.linspace(0.0, 320.0, 9),
        np.linspace(0.0, 320.0, 9),
        np.linspace(0.0, 240.0, 7),
    )
    model = SlownessModel(grid, np.full(grid.shape, SLOWNESS), wave=phase)
    event, station = (
        index.ravel()
        for index in np.meshgrid(np.arange(events), np.arange(stations), indexing="ij")
    )
    x, y = 320.0 * random.uniform(0.25, 0.75, (2, stations))
    azimuth = random.uniform(0.0, 2.0 * np.pi, events)
    slope = random.uniform(0.3, 0.8, events)
    lengths = straight_lengths(grid, x[station], y[station], azimuth[event], slope[event])
    prior = matern_prior(grid, standard_deviation=0.02, horizontal_km=60.0, vertical_km=60.0)
    perturbation = prior.colour(random.standard_normal(prior.size))
    terms = random.standard_normal(stations) * term_std_s
    terms -= terms.mean()
    change = SLOWNESS * (lengths @ perturbation)
    residual = (
        change
        - curvature * change**2
        + terms[station]
        + random.normal(0.0, 2.0, events)[event]
        + random.standard_normal(event.size) * noise_s
    )
    data = residual_table(event, station, residual, np.degrees(azimuth[event]), noise_s, phase)
    forward = StraightPaths(lengths, curvature)
    return Case(data, model, forward, perturbation, terms)


def residual_table(
    event: NDArray[np.int64],
    station: NDArray[np.int64],
    residual_s: Floats,
    azimuth_deg: Floats,
    uncertainty_s: float,
    phase: str = "P",
    *,
    distance_deg: float | Floats = 60.0,
    depth_km: float = 30.0,
) -> Residuals:
    """Build residuals of which only names, distances, azimuths and values matter."""
    event_count, station_count = int(event.max()) + 1, int(station.max()) + 1
    events = Events(
        event=np.array([f"e{i:03d}" for i in range(event_count)]),
        time=np.full(event_count, "2020-01-01", dtype="datetime64[ns]"),
        latitude_deg=np.zeros(event_count),
        longitude_deg=np.zeros(event_count),
        depth_km=np.full(event_count, depth_km),
    )
    stations = Stations(
        network=np.full(station_count, "XX"),
        station=np.array([f"S{i:02d}" for i in range(station_count)]),
        latitude_deg=np.zeros(station_count),
        longitude_deg=np.full(station_count, 60.0),
        elevation_m=np.zeros(station_count),
    )
    rows = event.size
    return Residuals(
        stations=stations,
        events=events,
        earth=ReferenceEarth("ak135"),
        event_index=event,
        station_index=station,
        phase=np.full(rows, phase),
        wave=np.full(rows, phase),
        residual_s=residual_s,
        uncertainty_s=np.full(rows, uncertainty_s),
        distance_deg=np.broadcast_to(np.asarray(distance_deg, dtype=np.float64), (rows,)),
        azimuth_deg=azimuth_deg,
        back_azimuth_deg=np.full(rows, 270.0),
        predicted_s=np.full(rows, 608.0),
        ellipticity_s=np.zeros(rows),
        elevation_s=np.zeros(rows),
    )


def plain_settings(**changes: object) -> InversionSettings:
    """Blocks only, least squares, no probes: the barest inversion."""
    bare = {
        "prior_std_percent": 2.0,
        "station_terms": False,
        "mislocation": False,
        "robust": "none",
        "trace_probes": 0,
    }
    return InversionSettings.model_validate(bare | changes)


def shuffled(case: Case, order: NDArray[np.int64]) -> Case:
    """Return the same case with its rows in another order."""
    lengths = case.forward.lengths[order]
    return replace(
        case, data=case.data.select(order), forward=replace(case.forward, lengths=lengths)
    )


def with_gross_errors(case: Case, rows: NDArray[np.int64], size_s: float) -> Case:
    """Return the same case with some residuals too late."""
    residual = case.data.residual_s.copy()
    residual[rows] += size_s
    return replace(case, data=replace(case.data, residual_s=residual))

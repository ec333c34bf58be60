"""Parameter groups: what is solved for, each with its columns and its prior."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array

from rayloom.inversion.priors import IndependentPrior, Prior, ZeroSumPrior
from rayloom.inversion.rows import DataRows
from rayloom.inversion.settings import InversionSettings
from rayloom.units import EARTH_RADIUS_KM

if TYPE_CHECKING:
    from rayloom.residuals import Residuals


@dataclass(frozen=True)
class ParameterGroup:
    """One kind of unknown.

    Attributes
    ----------
    name : str
        Name of the group, "blocks" for instance.
    matrix : (rows, size) csr_array
        Change of each row's predicted time per unit of each parameter, s per unit.
    prior : Prior
        What is believed of the parameters beforehand.
    """

    name: str
    matrix: csr_array
    prior: Prior

    @property
    def size(self) -> int:
        """Number of parameters."""
        return self.prior.size


@dataclass(frozen=True)
class StationTermLayout:
    """Which station and phase each station term belongs to.

    Attributes
    ----------
    station, phase, wave : (terms,) str arrays
        Key of each term and the wave type of its phase.
    column : (rows,) int array
        The term of each row.
    """

    station: NDArray[np.str_]
    phase: NDArray[np.str_]
    wave: NDArray[np.str_]
    column: NDArray[np.int64]


def block_matrix(
    path_lengths: csr_array, reference_slowness_s_per_km: NDArray[np.float64]
) -> csr_array:
    """Columns of fractional slowness perturbations: path length times reference slowness.

    Parameters
    ----------
    path_lengths : (rows, blocks) csr_array
        Path of each ray in each block, km.
    reference_slowness_s_per_km : (blocks,) array
        Slowness that the perturbations refer to, s/km.
    """
    seconds = path_lengths.data * reference_slowness_s_per_km[path_lengths.indices]
    return csr_array(
        (seconds, path_lengths.indices, path_lengths.indptr), shape=path_lengths.shape
    )


def block_group(
    path_lengths: csr_array, reference_slowness_s_per_km: NDArray[np.float64], prior: Prior
) -> ParameterGroup:
    """Group of the fractional slowness perturbations of all blocks.

    Parameters
    ----------
    path_lengths : (rows, blocks) csr_array
        Path of each ray in each block, km.
    reference_slowness_s_per_km : (blocks,) array
        Slowness that the perturbations refer to, s/km.
    prior : Prior
        What is believed of them beforehand.
    """
    matrix = block_matrix(path_lengths, reference_slowness_s_per_km)
    return ParameterGroup(name="blocks", matrix=matrix, prior=prior)


def station_term_layout(rows: DataRows) -> StationTermLayout:
    """List the station terms that the rows need: one per station name and phase."""
    phases, phase_code = np.unique(rows.phase, return_inverse=True)
    stations, station_code = np.unique(rows.station, return_inverse=True)
    code, first, column = np.unique(
        phase_code * stations.size + station_code, return_index=True, return_inverse=True
    )
    return StationTermLayout(
        station=stations[code % stations.size],
        phase=phases[code // stations.size],
        wave=rows.wave[first],
        column=column.astype(np.int64),
    )


def station_term_group(layout: StationTermLayout, settings: InversionSettings) -> ParameterGroup:
    """Build delays per station and phase, s, that sum to zero within a phase."""
    phases, family = np.unique(layout.phase, return_inverse=True)
    wave_of_phase = dict(zip(layout.phase.tolist(), layout.wave.tolist(), strict=True))
    spread = [settings.station_term_std_of(wave_of_phase[phase]) for phase in phases.tolist()]
    rows = layout.column.size
    return ParameterGroup(
        name="station_terms",
        matrix=csr_array(
            (np.ones(rows), layout.column, np.arange(rows + 1)),
            shape=(rows, layout.station.size),
        ),
        prior=ZeroSumPrior(
            family=family.astype(np.int64), standard_deviation=np.array(spread, dtype=np.float64)
        ),
    )


def mislocation_group(
    partials_s_per_km: NDArray[np.float64],
    event_column: NDArray[np.int64],
    *,
    standard_deviation_km: float,
) -> ParameterGroup:
    """Build shifts of the events east, north and down, km.

    Parameters
    ----------
    partials_s_per_km : (rows, 3) array
        Change of time per km of shift east, north and down.
    event_column : (rows,) int array
        Event of each row, 0, 1, …
    standard_deviation_km : float
        Expected size of each component, km.
    """
    rows = event_column.size
    events = int(event_column.max(initial=-1)) + 1
    columns = 3 * event_column[:, None] + np.arange(3)
    return ParameterGroup(
        name="mislocation",
        matrix=csr_array(
            (partials_s_per_km.ravel(), columns.ravel(), 3 * np.arange(rows + 1)),
            shape=(rows, 3 * events),
        ),
        prior=IndependentPrior(np.full(3 * events, standard_deviation_km)),
    )


def mislocation_partials(data: Residuals, data_row: NDArray[np.int64]) -> NDArray[np.float64]:
    """Change of travel time as the event moves, (rows, 3): s per km east, north and down.

    With ray parameter p (s/rad), azimuth α from event to station and radius r
    of the source, ∂T/∂east = −p sin α/r and ∂T/∂north = −p cos α/r. Downwards,
    ∂T/∂z = ∓√(1/v² − p²/r²) for a ray that leaves downwards (−) or upwards (+),
    v being the velocity of its first leg at the source. Rows without an arrival
    have none.

    Parameters
    ----------
    data : Residuals
        The table of residuals.
    data_row : (rows,) int array
        Rows of the table wanted.
    """
    depth = np.asarray(data.events.depth_km, dtype=np.float64)[data.event_index[data_row]]
    azimuth = np.radians(np.asarray(data.azimuth_deg, dtype=np.float64)[data_row])
    phases = np.asarray(data.phase).astype(str)[data_row]
    radius = EARTH_RADIUS_KM - depth
    horizontal = np.zeros(data_row.size)
    downward = np.zeros(data_row.size)
    for phase in np.unique(phases).tolist():
        of_phase = phases == phase
        p = data.earth.ray_parameter(
            phase, np.asarray(data.distance_deg)[data_row][of_phase], depth[of_phase]
        )
        upward = phase[0].islower()
        v = data.earth.velocity_km_s(
            depth[of_phase], phase[0].upper(), side="above" if upward else "below"
        )
        horizontal[of_phase] = p / radius[of_phase]
        vertical = np.sqrt(np.maximum(v**-2.0 - horizontal[of_phase] ** 2, 0.0))
        downward[of_phase] = vertical if upward else -vertical
    east, north = -horizontal * np.sin(azimuth), -horizontal * np.cos(azimuth)
    return np.nan_to_num(np.column_stack([east, north, downward]), nan=0.0)

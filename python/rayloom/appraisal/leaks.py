"""What structure that the blocks do not hold, or hold badly, would look like inside.

Delays of an anomaly beside the blocks, below them or in the crust alone are
inverted as if they were data. Whatever shows up in the deeper blocks is a leak.
Each is inverted with and without station terms, and with the crust free and
fixed. Main function: :func:`leak_tests`; main type: :class:`Leak`.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import product

import numpy as np
from numpy.typing import NDArray

from rayloom.appraisal.masking import masked_system
from rayloom.errors import InputError
from rayloom.inversion import LinearisedProblem, solve

Floats = NDArray[np.float64]
Flags = NDArray[np.bool_]

_TOLERANCE = 1e-4
_MAX_ITERATIONS = 2000


@dataclass(frozen=True)
class LeakSource:
    """An anomaly that the blocks below the crust do not hold, through its delays.

    Attributes
    ----------
    name : str
        "beside", "below" or "crust".
    place : str
        Where it lies, as a sentence without a full stop.
    contrast_percent : float
        Its velocity perturbation.
    delay_s : (rows,) array
        Delay that it gives each row, s.
    known : (rows,) bool array
        Rows whose delay is known.
    """

    name: str
    place: str
    contrast_percent: float
    delay_s: Floats
    known: Flags


@dataclass(frozen=True)
class Leak:
    """What one anomaly outside becomes inside.

    Attributes
    ----------
    source : LeakSource
        The anomaly.
    station_terms : bool
        Whether station terms were solved for.
    crust_free : bool
        Whether blocks of the crust could move.
    inside_percent : (nx, ny, nz) array
        The model inverted, percent.
    delay_ms : float
        Root mean square of the delays, group means taken off and weighted, ms.
    explained_share : float
        Share of their variance that the inversion explains.
    peak_percent : float
        Largest perturbation below the crust, with its sign.
    peak_at : tuple of float
        Its x, y (degrees; flat: km) and depth (km) in the frame.
    """

    source: LeakSource
    station_terms: bool
    crust_free: bool
    inside_percent: Floats
    delay_ms: float
    explained_share: float
    peak_percent: float
    peak_at: tuple[float, float, float]

    @property
    def leak_ratio(self) -> float:
        """Largest perturbation below the crust over that of the anomaly."""
        return abs(self.peak_percent / self.source.contrast_percent)


def leak_tests(
    problem: LinearisedProblem, sources: Sequence[LeakSource], *, crust_km: float = 35.0
) -> tuple[Leak, ...]:
    """Invert the delays of each anomaly in every pairing of station terms and crust.

    Parameters
    ----------
    problem : LinearisedProblem
        A finished inversion: its rays, weights and priors hold.
    sources : sequence of LeakSource
        See :func:`crust_source` and
        :func:`rayloom.appraisal.leak_sources.outside_sources`.
    crust_km : float, optional
        Base of the crust, km.

    Returns
    -------
    tuple of Leak
        For each source: terms and free crust, terms and fixed crust, neither
        terms, free crust, … A problem without station terms has no pairs of them.
    """
    has_terms = any(group.name == "station_terms" for group in problem.system.groups)
    choices = list(product((True, False) if has_terms else (False,), (True, False)))
    return tuple(
        _leak(problem, source, station_terms=terms, crust_free=free, crust_km=crust_km)
        for source in sources
        for terms, free in choices
    )


def crust_blocks(problem: LinearisedProblem, crust_km: float) -> Flags:
    """Mark the blocks whose middle lies in the crust, (nx, ny, nz).

    Parameters
    ----------
    problem : LinearisedProblem
        A finished inversion.
    crust_km : float
        Base of the crust, km.

    Raises
    ------
    InputError
        If the crust fills no layer, or all of them.
    """
    grid = problem.model.grid
    layers = grid.depth_centres_km < crust_km
    if not layers.any() or layers.all():
        raise InputError(
            f"a crust down to {crust_km:g} km leaves no layer on one side; the blocks reach "
            f"from {grid.depth_edges_km[0]:g} to {grid.depth_edges_km[-1]:g} km",
            where="crust_km",
        )
    return np.broadcast_to(layers, grid.shape)


def crust_source(
    problem: LinearisedProblem,
    *,
    centre: tuple[float, float],
    radius_km: float = 60.0,
    contrast_percent: float = -3.0,
    crust_km: float = 35.0,
) -> LeakSource:
    """Put an anomaly in the crust alone, its delays along the rays of the inversion.

    Parameters
    ----------
    problem : LinearisedProblem
        A finished inversion.
    centre : pair of float
        x and y of its axis in the frame.
    radius_km : float, optional
        Its radius; the blocks that hold the axis belong to it in any case.
    contrast_percent : float, optional
        Its velocity perturbation.
    crust_km : float, optional
        Base of the crust, km.

    Raises
    ------
    InputError
        If the axis lies outside the blocks.
    """
    grid = problem.model.grid
    axis = np.column_stack([np.tile(centre, (grid.block_count, 1)), grid.centres[:, 2]])
    near = grid.frame.chord_km(grid.centres, axis) <= radius_km
    holding = grid.locate(axis)
    if np.any(holding < 0):
        raise InputError(f"{centre} lies outside the blocks", where="centre")
    near[holding] = True
    inside = crust_blocks(problem, crust_km).ravel() & near
    matrix = problem.system.groups[0].matrix
    return LeakSource(
        name="crust",
        place=f"a column of {radius_km:g} km radius in the crust, down to {crust_km:g} km",
        contrast_percent=contrast_percent,
        delay_s=np.asarray(matrix @ (inside * slowness_change(contrast_percent))),
        known=np.ones(matrix.shape[0], dtype=bool),
    )


def slowness_change(percent: float) -> float:
    """Fractional change of slowness of a velocity perturbation.

    Parameters
    ----------
    percent : float
        Velocity perturbation, percent.
    """
    return 1.0 / (1.0 + percent / 100.0) - 1.0


def _leak(
    problem: LinearisedProblem,
    source: LeakSource,
    *,
    station_terms: bool,
    crust_free: bool,
    crust_km: float,
) -> Leak:
    problem = problem.with_weights(np.where(source.known, problem.weights, 0.0))
    crust = crust_blocks(problem, crust_km)
    system = masked_system(
        problem,
        None if crust_free else crust,
        without=() if station_terms else ("station_terms",),
    )
    delays = system.whiten_rows(np.where(source.known, source.delay_s, 0.0))
    found = solve(system, delays, tolerance=_TOLERANCE, max_iterations=_MAX_ITERATIONS)
    size = float(delays @ delays)
    left = delays - system.times(found.white)
    grid = problem.model.grid
    fractional = system.parameters(found.white)[0].reshape(grid.shape)
    percent = 100.0 * (1.0 / (1.0 + fractional) - 1.0)
    peak = int(np.argmax(np.where(crust, 0.0, np.abs(percent))))
    precision = float(np.sum(system.means.root_weights**2))
    x, y, depth_km = grid.centres[peak].tolist()
    return Leak(
        source=source,
        station_terms=station_terms,
        crust_free=crust_free,
        inside_percent=percent,
        delay_ms=1e3 * float(np.sqrt(size / precision)),
        explained_share=1.0 - float(left @ left) / size if size > 0.0 else 0.0,
        peak_percent=float(percent.ravel()[peak]),
        peak_at=(x, y, depth_km),
    )

"""Linearised problems with dense answers, for the tests of the appraisal."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array

from inversion_cases import plain_settings, small_case
from rayloom.inversion import (
    DataRows,
    GroupMeans,
    IndependentPrior,
    LinearisedProblem,
    ParameterGroup,
    WhitenedSystem,
    invert,
    linearise,
)
from rayloom.model import BlockGrid, Frame, SlownessModel

Floats = NDArray[np.float64]


def problem_of_matrix(
    matrix: Floats, shape: tuple[int, int, int], *, prior_std: float, data: Floats | None = None
) -> LinearisedProblem:
    """Build a problem from a dense matrix: no group means, unit weights, each row an event."""
    count = len(matrix)
    edges = (np.arange(size + 1, dtype=np.float64) for size in shape)
    model = SlownessModel(BlockGrid(Frame.flat(), *edges), np.full(shape, 0.125))
    names = np.array([f"e{number:02d}" for number in range(count)])
    rows = DataRows(
        data_row=np.arange(count),
        ray=np.arange(count),
        residual_s=np.zeros(count),
        uncertainty_s=np.ones(count),
        group=np.full(count, -1),
        event=names,
        station=names,
        phase=np.full(count, "P"),
        wave=np.full(count, "P"),
    )
    prior = IndependentPrior(np.full(matrix.shape[1], prior_std))
    means = GroupMeans.of_rows(rows.group, np.ones(count))
    blocks = ParameterGroup("blocks", csr_array(matrix), prior)
    return LinearisedProblem(
        model=model,
        rows=rows,
        system=WhitenedSystem.of_groups((blocks,), means),
        target_s=np.zeros(count) if data is None else data,
        weights=np.ones(count),
        white=np.zeros(matrix.shape[1]),
        prior_mean=np.zeros(matrix.shape[1]),
    )


@dataclass(frozen=True)
class DenseAnswers:
    """A small problem with station terms, by dense linear algebra."""

    problem: LinearisedProblem

    @cached_property
    def white_matrix(self) -> Floats:
        """Return Ã, (rows, unknowns)."""
        system = self.problem.system
        return np.column_stack([system.times(unit) for unit in np.eye(system.shape[1])])

    @cached_property
    def block_root(self) -> Floats:
        """Return C^½ of the blocks, (blocks, unknowns)."""
        system = self.problem.system
        return np.column_stack([system.parameters(unit)[0] for unit in np.eye(system.shape[1])])

    @cached_property
    def white_covariance(self) -> Floats:
        """Return (ÃᵀÃ + I)⁻¹."""
        normal = self.white_matrix.T @ self.white_matrix
        return np.linalg.inv(normal + np.eye(len(normal)))

    @property
    def mean(self) -> Floats:
        """Return the posterior mean of the blocks."""
        back = self.white_matrix.T @ self.problem.right_hand_side
        return self.block_root @ self.white_covariance @ back

    @property
    def block_covariance(self) -> Floats:
        """Return the posterior covariance of the blocks."""
        return self.block_root @ self.white_covariance @ self.block_root.T

    @cached_property
    def resolution(self) -> Floats:
        """Return R, (blocks, blocks)."""
        gain = self.block_root @ self.white_covariance @ self.white_matrix.T
        matrix = self.problem.system.groups[0].matrix.toarray()
        means = self.problem.system.means
        weighted = means.root_weights[:, None] * matrix
        projected = np.column_stack([means.project(column) for column in weighted.T])
        return gain @ projected

    @property
    def noise_covariance(self) -> Floats:
        """Return the covariance of the blocks that errors of the data cause."""
        gain = self.block_root @ self.white_covariance @ self.white_matrix.T
        return gain @ gain.T


def small_problem() -> LinearisedProblem:
    """120 rows of 10 events, 384 blocks, station terms and event means."""
    case = small_case(events=10, stations=12)
    settings = plain_settings(
        station_terms=True, prior_std_percent=2.0, correlation_km=(60.0, 60.0)
    )
    return linearise(invert(case.data, case.model, settings, forward=case.forward), settings)

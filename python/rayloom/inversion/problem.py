"""The inverse problem: data, model, forward map and parameter groups together.

Main type: :class:`Problem`. It turns whitened unknowns into a model, traces it,
and builds the linear system of the next step.
"""

from __future__ import annotations

import hashlib
import time
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from rayloom.inversion.elimination import GroupMeans
from rayloom.inversion.forward_map import ForwardMap, Prediction, Report
from rayloom.inversion.groups import ParameterGroup, block_group
from rayloom.inversion.priors import SpectralPrior
from rayloom.inversion.robust import RobustFit, RobustLoss, robust_fit
from rayloom.inversion.rows import DataRows, LeftOutGroup
from rayloom.inversion.settings import InversionSettings
from rayloom.inversion.system import WhitenedSystem
from rayloom.model import SlownessModel

if TYPE_CHECKING:
    from rayloom.inversion.prior_strength import PriorStrength

_LARGEST_RATIO = 2.0
"""Slowness over reference beyond which, or under whose inverse, no model is traced."""


@dataclass(frozen=True)
class TracedModel:
    """A model, its rays, and what they leave unexplained.

    Attributes
    ----------
    white : (unknowns,) array
        Whitened unknowns.
    model : SlownessModel
        The blocks.
    rays : Prediction
        Their rays.
    unexplained_s : (rows,) array
        d − (T − T_reference) − the linear groups' share, s; group means remain.
    active : (rows,) bool array
        Rows with a ray here and in all models before.
    seconds : float
        Time that tracing took, s.
    """

    white: NDArray[np.float64]
    model: SlownessModel
    rays: Prediction
    unexplained_s: NDArray[np.float64]
    active: NDArray[np.bool_]
    seconds: float


@dataclass(frozen=True)
class Problem:
    """One inverse problem.

    Attributes
    ----------
    rows : DataRows
        Residuals in the order of the inversion.
    model : SlownessModel
        Grid, reference and starting model.
    forward : ForwardMap
        The tracer.
    block_prior : SpectralPrior
        Prior of the fractional slowness perturbations.
    linear_groups : tuple of ParameterGroup
        Further unknowns, whose columns do not depend on the model.
    settings : InversionSettings
        Settings.
    reference_rays : Prediction
        Rays of the reference model by the same tracer in the same blocks.
    active : (rows,) bool array
        Rows with a ray in the reference model.
    left_out : tuple of LeftOutGroup
        Groups left out as a whole.
    prior_strength : PriorStrength, optional
        How the data chose the block prior's standard deviation; None where it was given.
    """

    rows: DataRows
    model: SlownessModel
    forward: ForwardMap
    block_prior: SpectralPrior
    linear_groups: tuple[ParameterGroup, ...]
    settings: InversionSettings
    reference_rays: Prediction
    active: NDArray[np.bool_]
    left_out: tuple[LeftOutGroup, ...]
    prior_strength: PriorStrength | None = None

    @property
    def unknown_count(self) -> int:
        """Number of unknowns of all groups."""
        return self.block_prior.size + sum(group.size for group in self.linear_groups)

    @property
    def starting_perturbation(self) -> NDArray[np.float64]:
        """Fractional slowness perturbation of the starting model, (blocks,)."""
        return (self.model.slowness_s_per_km / self.model.reference).ravel() - 1.0

    @property
    def prior_mean(self) -> NDArray[np.float64]:
        """Fractional slowness perturbation that the prior is centred on, (blocks,)."""
        if self.settings.prior_mean == "starting_model":
            return self.starting_perturbation
        return np.zeros(self.block_prior.size)

    def starting_unknowns(self) -> NDArray[np.float64]:
        """Whitened unknowns of the starting model; the linear groups start at zero."""
        beyond = self.starting_perturbation - self.prior_mean
        white = np.zeros(self.unknown_count)
        if np.any(beyond):
            white[: self.block_prior.size] = self.block_prior.whiten(beyond)
        return white

    def model_of(self, white: NDArray[np.float64]) -> SlownessModel | None:
        """Model of whitened unknowns, or None if it is too far from the reference."""
        perturbation = self.block_prior.colour(white[: self.block_prior.size]) + self.prior_mean
        ratio = 1.0 + perturbation.reshape(self.model.grid.shape)
        if ratio.min() < 1.0 / _LARGEST_RATIO or ratio.max() > _LARGEST_RATIO:
            return None
        return self.model.with_slowness(self.model.reference * ratio)

    def trace(
        self,
        white: NDArray[np.float64],
        model: SlownessModel,
        *,
        previous: Prediction | None,
        active: NDArray[np.bool_],
        report: Report | None,
    ) -> TracedModel:
        """Trace a model and take its prediction off the data."""
        start = time.perf_counter()
        rays = trace_with_report(self.forward, model, previous, report)
        return self.explain(white, model, rays, active, time.perf_counter() - start)

    def explain(
        self,
        white: NDArray[np.float64],
        model: SlownessModel,
        rays: Prediction,
        active: NDArray[np.bool_],
        seconds: float = 0.0,
    ) -> TracedModel:
        """Take the prediction of rays already traced off the data."""
        ray = self.rows.ray
        active = active & rays_exist(rays)[ray]
        change = np.asarray(rays.time_s)[ray] - np.asarray(self.reference_rays.time_s)[ray]
        unexplained = self.rows.residual_s - change - self.linear_share(white)
        return TracedModel(
            white=white,
            model=model,
            rays=rays,
            unexplained_s=np.where(active, unexplained, 0.0),
            active=active,
            seconds=seconds,
        )

    def linear_share(self, white: NDArray[np.float64]) -> NDArray[np.float64]:
        """Predict the times due to the linear groups, (rows,), s."""
        share = np.zeros(self.rows.count)
        start = self.block_prior.size
        for group in self.linear_groups:
            part = white[start : start + group.size]
            share += group.matrix @ group.prior.colour(part)
            start += group.size
        return share

    def fit(
        self,
        residual_s: NDArray[np.float64],
        active: NDArray[np.bool_],
        loss: RobustLoss,
        *,
        scale: float | None = None,
    ) -> RobustFit:
        """Measure residuals from the robust means of their groups."""
        rows = self.rows
        return robust_fit(residual_s, rows.uncertainty_s, rows.group, active, loss, scale=scale)

    def means(self, weights: NDArray[np.float64]) -> GroupMeans:
        """Projection that eliminates the group means under robust weights."""
        return GroupMeans.of_rows(self.rows.group, np.sqrt(weights) / self.rows.uncertainty_s)

    def system(self, traced: TracedModel, weights: NDArray[np.float64]) -> WhitenedSystem:
        """Linearise about a traced model."""
        paths = traced.rays.path_lengths[self.rows.ray]
        blocks = block_group(paths, self.model.reference.ravel(), self.block_prior)
        return WhitenedSystem.of_groups(
            (blocks, *self.linear_groups), self.means(weights), threads=self.settings.threads
        )

    def fingerprint(self) -> str:
        """Digest of data, blocks and priors, to recognise a state of this problem."""
        digest = hashlib.sha256(self.rows.fingerprint().encode())
        grid = self.model.grid
        for values in (grid.x_edges, grid.y_edges, grid.depth_edges_km, self.model.reference):
            digest.update(np.ascontiguousarray(values).tobytes())
        for values in (self.block_prior.amplitude, self.block_prior.scale, self.prior_mean):
            digest.update(values.tobytes())
        for group in self.linear_groups:
            digest.update(f"{group.name} {group.size}".encode())
            digest.update(group.prior.colour(np.arange(group.size, dtype=np.float64)).tobytes())
        digest.update(self.settings.method.encode())
        return digest.hexdigest()


def trace_with_report(
    forward: ForwardMap,
    model: SlownessModel,
    previous: Prediction | None,
    report: Report | None,
) -> Prediction:
    """Call the forward map, its progress reported as stage "tracing"."""
    if report is None:
        return forward(model, previous=previous, progress=None)
    return forward(
        model, previous=previous, progress=lambda done, total: report("tracing", done, total)
    )


def rays_exist(rays: Prediction) -> NDArray[np.bool_]:
    """Which rays were traced to a finite time, (rays,)."""
    return np.asarray(rays.traced, dtype=bool) & np.isfinite(rays.time_s)

"""A finished inversion as a linear problem: its last rays and weights, frozen.

Main type: :class:`LinearisedProblem`. Trade-offs, samples, bootstraps and
resolution start from it; none of them traces a ray.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from rayloom.inversion.assembly import block_prior, linear_groups
from rayloom.inversion.elimination import GroupMeans
from rayloom.inversion.groups import block_group
from rayloom.inversion.result import InversionResult
from rayloom.inversion.rows import DataRows, rows_of_residuals
from rayloom.inversion.settings import InversionSettings
from rayloom.inversion.system import WhitenedSystem
from rayloom.model import SlownessModel


@dataclass(frozen=True)
class LinearisedProblem:
    """The last linear system of an inversion.

    Its solution minimises ‖Ã z − d̃‖² + ‖z‖² over the whitened unknowns z of all
    parameter groups, Ã being :attr:`system` and d̃ :attr:`right_hand_side`.

    Attributes
    ----------
    model : SlownessModel
        The model that it was linearised about.
    rows : DataRows
        Residuals in the order of the inversion.
    system : WhitenedSystem
        The operator Ã, the blocks being its first parameter group.
    target_s : (rows,) array
        d − (T_k − T_reference) + A_k m_k up to the means of the groups, s; 0 in
        rows that take no part.
    weights : (rows,) array
        Robust weights; 0 in rows that take no part.
    white : (unknowns,) array
        Whitened unknowns of the model that the inversion found.
    prior_mean : (blocks,) array
        Fractional slowness perturbation of z = 0: the blocks hold it plus what
        :meth:`WhitenedSystem.parameters` gives of z.
    """

    model: SlownessModel
    rows: DataRows
    system: WhitenedSystem
    target_s: NDArray[np.float64]
    weights: NDArray[np.float64]
    white: NDArray[np.float64]
    prior_mean: NDArray[np.float64]

    @property
    def right_hand_side(self) -> NDArray[np.float64]:
        """Weighted data without their group means, d̃, (rows,)."""
        return self.system.whiten_rows(self.target_s)

    @property
    def active(self) -> NDArray[np.bool_]:
        """Rows with weight, (rows,)."""
        return self.weights > 0.0

    @property
    def free_count(self) -> int:
        """N − N_g: rows with weight less the means eliminated."""
        return int(np.sum(self.active)) - self.system.means.count

    def with_weights(self, weights: NDArray[np.float64]) -> LinearisedProblem:
        """Return the same rays under other weights, those of an event bootstrap for instance.

        Parameters
        ----------
        weights : (rows,) array
            They multiply the inverse squared uncertainties.
        """
        means = GroupMeans.of_rows(self.rows.group, np.sqrt(weights) / self.rows.uncertainty_s)
        return replace(self, system=self.system.with_means(means), weights=weights)

    def perturbation_percent(self, white: NDArray[np.float64]) -> NDArray[np.float64]:
        """Velocity perturbation of whitened unknowns, (nx, ny, nz), percent."""
        blocks = self.prior_mean + self.system.parameters(white)[0]
        fractional = blocks.reshape(self.model.grid.shape)
        return np.asarray(100.0 * (1.0 / (1.0 + fractional) - 1.0))


def linearise(result: InversionResult, settings: InversionSettings) -> LinearisedProblem:
    """Freeze the last rays and weights of an inversion.

    Parameters
    ----------
    result : InversionResult
        What :func:`rayloom.invert` returned.
    settings : InversionSettings
        The settings it was called with.
    """
    if settings.chooses_prior:
        settings = settings.with_prior_std_percent(result.prior_std_percent)
    rows, _ = rows_of_residuals(
        result.data,
        wave=result.model.wave,
        min_picks_per_event=settings.min_picks_per_event,
    )
    rows = replace(rows, uncertainty_s=result.uncertainty_s[rows.data_row])
    blocks = block_group(
        result.rays.path_lengths[rows.ray],
        result.model.reference.ravel(),
        block_prior(result.model.grid, settings),
    )
    weights = result.weights[rows.data_row]
    means = GroupMeans.of_rows(rows.group, np.sqrt(weights) / rows.uncertainty_s)
    system = WhitenedSystem.of_groups(
        (blocks, *linear_groups(result.data, rows, settings)), means, threads=settings.threads
    )
    unexplained_s = np.nan_to_num(result.residual_after_s[rows.data_row])
    target_s = unexplained_s + system.seconds(result.state.white)
    return LinearisedProblem(
        model=result.model,
        rows=rows,
        system=system,
        target_s=np.where(weights > 0.0, target_s, 0.0),
        weights=weights,
        white=result.state.white,
        prior_mean=_prior_mean(result, settings, system),
    )


def _prior_mean(
    result: InversionResult, settings: InversionSettings, system: WhitenedSystem
) -> NDArray[np.float64]:
    """Take what the data added off the model that was found."""
    model = result.model
    if settings.prior_mean == "reference":
        return np.zeros(model.grid.block_count)
    found = (model.slowness_s_per_km / model.reference).ravel() - 1.0
    return np.asarray(found - system.parameters(result.state.white)[0])

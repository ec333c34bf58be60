"""What is believed of a group of parameters before the data speak.

A prior maps whitened unknowns z ~ N(0, I) to parameters x = C^½ z, so that the
penalty of a model is ‖z‖² whatever its kind. The inversion only ever uses the
three methods of :class:`Prior`.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from rayloom.inversion.tensor import TensorModes
from rayloom.model import BlockGrid


class Prior(Protocol):
    """A Gaussian with zero mean, known through a square root of its covariance."""

    @property
    def size(self) -> int:
        """Number of parameters, and of whitened unknowns."""

    def colour(self, white: NDArray[np.float64]) -> NDArray[np.float64]:
        """Parameters of whitened unknowns, C^½ z: a sample of the prior if z is white."""

    def colour_adjoint(self, parameters: NDArray[np.float64]) -> NDArray[np.float64]:
        """Transpose of :meth:`colour`."""


@dataclass(frozen=True)
class IndependentPrior:
    """Independent parameters with one standard deviation each.

    Attributes
    ----------
    standard_deviation : (n,) array
        In the unit of the parameters.
    """

    standard_deviation: NDArray[np.float64]

    @property
    def size(self) -> int:
        """Number of parameters."""
        return self.standard_deviation.size

    def colour(self, white: NDArray[np.float64]) -> NDArray[np.float64]:
        """Parameters of whitened unknowns."""
        return self.standard_deviation * white

    def colour_adjoint(self, parameters: NDArray[np.float64]) -> NDArray[np.float64]:
        """Transpose of :meth:`colour`."""
        return self.standard_deviation * parameters


@dataclass(frozen=True)
class ZeroSumPrior:
    """Exchangeable parameters that sum to zero within each family.

    The covariance of a family of n members is σ² n/(n − 1) (I − 11ᵀ/n), so
    that every member has standard deviation σ. A family of one is zero.

    Attributes
    ----------
    family : (n,) int array
        Family of each parameter, 0, 1, …
    standard_deviation : (families,) array
        σ of each family, in the unit of the parameters.
    """

    family: NDArray[np.int64]
    standard_deviation: NDArray[np.float64]

    @property
    def size(self) -> int:
        """Number of parameters."""
        return self.family.size

    def colour(self, white: NDArray[np.float64]) -> NDArray[np.float64]:
        """Parameters of whitened unknowns."""
        members = np.bincount(self.family, minlength=self.standard_deviation.size)
        several = np.maximum(members, 2)
        scale = self.standard_deviation * np.sqrt(several / (several - 1))
        sums = np.bincount(self.family, weights=white, minlength=members.size)
        means = sums / np.maximum(members, 1)
        centred: NDArray[np.float64] = white - means[self.family]
        return np.asarray(scale[self.family] * centred)

    def colour_adjoint(self, parameters: NDArray[np.float64]) -> NDArray[np.float64]:
        """Transpose of :meth:`colour`: the scale is constant within a family."""
        return self.colour(parameters)


@dataclass(frozen=True)
class SpectralPrior:
    """A field on blocks, diagonal in the grid's modes: m = scale · U (amplitude · z).

    Attributes
    ----------
    modes : TensorModes
        The grid's modes U.
    amplitude : (blocks,) array
        Standard deviation of each mode's amplitude.
    scale : (blocks,) array
        Factor of each block.
    """

    modes: TensorModes
    amplitude: NDArray[np.float64]
    scale: NDArray[np.float64]

    @property
    def size(self) -> int:
        """Number of blocks."""
        return self.scale.size

    def colour(self, white: NDArray[np.float64]) -> NDArray[np.float64]:
        """Block values of whitened unknowns: a sample of the prior if z is white."""
        return self.scale * self.modes.synthesise(self.amplitude * white)

    def colour_adjoint(self, parameters: NDArray[np.float64]) -> NDArray[np.float64]:
        """Transpose of :meth:`colour`."""
        return self.amplitude * self.modes.analyse(self.scale * parameters)

    def whiten(self, parameters: NDArray[np.float64]) -> NDArray[np.float64]:
        """Whitened unknowns of block values: inverse of :meth:`colour`."""
        return self.modes.analyse(parameters / self.scale) / self.amplitude

    def times(self, factor: float) -> SpectralPrior:
        """Return the same field with its standard deviation multiplied by ``factor``."""
        return replace(self, scale=factor * self.scale)

    def standard_deviation(self) -> NDArray[np.float64]:
        """Exact marginal standard deviation of each block, (blocks,)."""
        mode_variance = (self.amplitude**2).reshape(self.modes.shape)
        return self.scale * np.sqrt(self.modes.variance(mode_variance))


def matern_prior(
    grid: BlockGrid,
    *,
    standard_deviation: float | NDArray[np.float64],
    horizontal_km: float,
    vertical_km: float,
    depth_coupling: NDArray[np.float64] | None = None,
) -> SpectralPrior:
    """Field with covariance σ² e^(−ρ), ρ² = (Δh/ℓ_h)² + (Δz/ℓ_v)².

    The field solves L m = z with L = τ V^½ (I − ∇·H∇), H = diag(ℓ_h², ℓ_h², ℓ_v²):
    a Matérn field with ν = ½ in three dimensions. Zero-flux sides would raise
    its variance there; a diagonal factor restores σ exactly in every block, and
    with it τ and V cancel: m = D L⁻¹ z.

    Parameters
    ----------
    grid : BlockGrid
        Blocks; unequal spacing allowed.
    standard_deviation : float or (blocks,) array
        Marginal standard deviation σ, in the unit of the field.
    horizontal_km, vertical_km : float
        Distances ℓ_h and ℓ_v at which the correlation falls to 1/e, km.
    depth_coupling : (nz − 1,) array, optional
        Factor of the flux ∇·H∇ across each inner edge in depth, 1 if not given:
        blocks on either side of a small one hardly correlate.

    References
    ----------
    Lindgren, F., Rue, H. & Lindström, J. (2011). An explicit link between
    Gaussian fields and Gaussian Markov random fields: the stochastic partial
    differential equation approach. J. R. Statist. Soc. B 73, 423-498.
    """
    modes = TensorModes.of_grid(grid, depth_coupling)
    amplitude = 1.0 / (1.0 + modes.eigenvalues(horizontal_km**2, vertical_km**2))
    scale = standard_deviation / np.sqrt(modes.variance(amplitude**2))
    return SpectralPrior(modes=modes, amplitude=amplitude.ravel(), scale=scale)


def damping_smoothing_prior(
    grid: BlockGrid,
    *,
    damping: float,
    horizontal_km: float,
    vertical_km: float,
    depth_coupling: NDArray[np.float64] | None = None,
) -> SpectralPrior:
    """Classical penalty on size and on first differences, weighted by volume.

    The penalty is Σ_i v_i damping² m_i² + Σ_faces v_f smoothing² (Δm/Δx)², v_i
    being volume over mean volume and v_f that of the space between the two
    centres. It shares its modes with the Matérn field, hence its exact square
    root.

    Parameters
    ----------
    grid : BlockGrid
        Blocks; unequal spacing allowed.
    damping : float
        Weight of the size, above zero: 1/damping is the standard deviation of
        a block of mean volume if nothing is smoothed.
    horizontal_km, vertical_km : float
        Weights of the differences per km.
    depth_coupling : (nz − 1,) array, optional
        Factor of the penalty on the squared difference across each inner edge in
        depth, 1 if not given.
    """
    modes = TensorModes.of_grid(grid, depth_coupling)
    precision = damping**2 + modes.eigenvalues(horizontal_km**2, vertical_km**2)
    return SpectralPrior(
        modes=modes,
        amplitude=(1.0 / np.sqrt(precision)).ravel(),
        scale=1.0 / np.sqrt(modes.relative_volumes.ravel()),
    )

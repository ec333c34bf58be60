"""Fast diagonalisation of smoothness on a tensor-product grid.

Main type: :class:`TensorModes`. On blocks whose volume is a product of three
widths the volume-symmetrised operator −∇·H∇ with zero-flux sides is a sum of
three one-dimensional operators. Each is diagonalised once, so that functions
of the operator cost three small dense products.

References
----------
Lynch, R. E., Rice, J. R. & Thomas, D. H. (1964). Direct solution of partial
difference equations by tensor product methods. Numerische Mathematik 6,
185-199.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import eigh_tridiagonal

from rayloom.model import BlockGrid


@dataclass(frozen=True)
class AxisModes:
    """Eigenmodes of the second difference along one axis.

    Attributes
    ----------
    vectors : (n, n) array
        Orthonormal eigenvectors, one per column, in the symmetrised variable
        width^½ · value.
    values : (n,) array
        Eigenvalues of −d²/dx² with zero-flux ends, 1/km², from 0 upwards.
    """

    vectors: NDArray[np.float64]
    values: NDArray[np.float64]

    @classmethod
    def from_widths(
        cls, widths_km: NDArray[np.float64], coupling_share: NDArray[np.float64] | None = None
    ) -> AxisModes:
        """Diagonalise the finite-volume second difference.

        Parameters
        ----------
        widths_km : (n,) array
            Widths of the cells along the axis, km; they may differ.
        coupling_share : (n − 1,) array, optional
            Factor of the flux between each two neighbours; 1 if not given.
        """
        between_centres = 0.5 * (widths_km[1:] + widths_km[:-1])
        coupling = 1.0 / between_centres
        if coupling_share is not None:
            coupling = coupling * coupling_share
        diagonal = np.zeros_like(widths_km)
        diagonal[:-1] += coupling
        diagonal[1:] += coupling
        beside = -coupling / np.sqrt(widths_km[1:] * widths_km[:-1])
        values, vectors = eigh_tridiagonal(diagonal / widths_km, beside)
        return cls(vectors=np.ascontiguousarray(vectors), values=np.maximum(values, 0.0))


@dataclass(frozen=True)
class TensorModes:
    """Eigenmodes of a grid: products of the modes of its three axes.

    Attributes
    ----------
    axes : tuple of three AxisModes
        Modes along x, y and depth.
    relative_volumes : (nx, ny, nz) array
        Product of the three widths over its mean.
    """

    axes: tuple[AxisModes, AxisModes, AxisModes]
    relative_volumes: NDArray[np.float64]

    @classmethod
    def of_grid(
        cls, grid: BlockGrid, depth_coupling: NDArray[np.float64] | None = None
    ) -> TensorModes:
        """Diagonalise a block grid, its metric taken at the middle of the box.

        Parameters
        ----------
        grid : BlockGrid
            The blocks.
        depth_coupling : (nz − 1,) array, optional
            Factor of the flux across each inner edge in depth; 1 if not given.
        """
        widths = grid.widths
        volumes = widths.x_km[:, None, None] * widths.y_km[:, None] * widths.depth_km
        x = AxisModes.from_widths(widths.x_km)
        y = AxisModes.from_widths(widths.y_km)
        z = AxisModes.from_widths(widths.depth_km, depth_coupling)
        return cls(axes=(x, y, z), relative_volumes=volumes / volumes.mean())

    @property
    def shape(self) -> tuple[int, int, int]:
        """Numbers of blocks along x, y and depth."""
        x, y, z = (axis.values.size for axis in self.axes)
        return (x, y, z)

    def eigenvalues(self, horizontal: float, vertical: float) -> NDArray[np.float64]:
        """Eigenvalues of −∇·diag(horizontal, horizontal, vertical)∇, (nx, ny, nz).

        Parameters
        ----------
        horizontal, vertical : float
            Squared lengths, km².
        """
        x, y, z = (axis.values for axis in self.axes)
        return horizontal * (x[:, None, None] + y[:, None]) + vertical * z

    def synthesise(self, amplitudes: NDArray[np.float64]) -> NDArray[np.float64]:
        """Sum of the modes with these amplitudes; (blocks,) in, (blocks,) out."""
        x, y, z = (axis.vectors for axis in self.axes)
        return _along_axes(x, y, z, amplitudes.reshape(self.shape)).ravel()

    def analyse(self, values: NDArray[np.float64]) -> NDArray[np.float64]:
        """Amplitudes of the modes in these values: transpose of ``synthesise``."""
        x, y, z = (axis.vectors.T for axis in self.axes)
        return _along_axes(x, y, z, values.reshape(self.shape)).ravel()

    def variance(self, mode_variance: NDArray[np.float64]) -> NDArray[np.float64]:
        """Exact variance in each block of modes with independent amplitudes.

        Parameters
        ----------
        mode_variance : (nx, ny, nz) array
            Variance of each mode's amplitude.

        Returns
        -------
        (blocks,) array
            Diagonal of U diag(mode_variance) Uᵀ.
        """
        x, y, z = (axis.vectors**2 for axis in self.axes)
        return _along_axes(x, y, z, mode_variance).ravel()


def _along_axes(
    x: NDArray[np.float64],
    y: NDArray[np.float64],
    z: NDArray[np.float64],
    values: NDArray[np.float64],
) -> NDArray[np.float64]:
    """Multiply a (nx, ny, nz) array by one matrix along each axis."""
    nx, ny, nz = values.shape
    along_z = values.reshape(nx * ny, nz) @ z.T
    along_y = np.matmul(y, along_z.reshape(nx, ny, nz))
    product: NDArray[np.float64] = x @ along_y.reshape(nx, ny * nz)
    return product.reshape(nx, ny, nz)

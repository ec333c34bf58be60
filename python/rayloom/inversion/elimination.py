"""Exact elimination of one free mean per group of rows.

Origin times, and everything else that shifts all rows of an (event, phase)
alike, leave the problem by projection: with weights W and the unit columns
Q_g = w_g^½/‖w_g^½‖, the problem (I − QQᵀ) W^½ (A x − d) has the same solution
as the one with a free mean per group. The projection is applied to vectors; the
matrix is never filled.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array


@dataclass(frozen=True)
class GroupMeans:
    """The projection I − QQᵀ for one set of weights.

    Attributes
    ----------
    group : (rows,) int array
        Group of each row, from 0; −1 for a row without a free mean.
    root_weights : (rows,) array
        Square roots of the weights, 0 for a row that takes no part.
    """

    group: NDArray[np.int64]
    root_weights: NDArray[np.float64]
    _unit: NDArray[np.float64]
    _slot: NDArray[np.int64]

    @classmethod
    def of_rows(cls, group: NDArray[np.int64], root_weights: NDArray[np.float64]) -> GroupMeans:
        """Build Q for groups and weights."""
        slot = np.maximum(group, 0)
        grouped = np.where(group >= 0, root_weights, 0.0)
        norms = np.sqrt(np.bincount(slot, weights=grouped**2))
        unit = grouped / np.where(norms > 0.0, norms, 1.0)[slot]
        return cls(group=group, root_weights=root_weights, _unit=unit, _slot=slot)

    def project(self, values: NDArray[np.float64]) -> NDArray[np.float64]:
        """Apply I − QQᵀ to a (rows,) vector; symmetric and idempotent."""
        sums = np.bincount(self._slot, weights=self._unit * values)
        return values - self._unit * sums[self._slot]

    def columns(self) -> csr_array:
        """Q itself, one column per group, (rows, groups)."""
        rows = np.arange(self._unit.size)
        return csr_array((self._unit, (rows, self._slot)))

    def leverage(self) -> NDArray[np.float64]:
        """Diagonal of QQᵀ, (rows,): what each row bears on its own mean."""
        return self._unit**2

    @property
    def count(self) -> int:
        """Number of means eliminated: groups with at least one row of weight."""
        takes_part = (self.group >= 0) & (self.root_weights > 0.0)
        return np.unique(self.group[takes_part]).size

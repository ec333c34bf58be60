"""The blocks alone: terms of stations and events eliminated with their priors.

Main type: :class:`MarginalSystem`. With T the whitened columns of all other
groups and R = I + T Tᵀ, minimising over their unknowns leaves
‖R^(−½) (B z − d̃)‖² + λ²‖z‖² for the blocks: standard form, whose damping λ
changes the strength of the blocks' prior and nothing else.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array, hstack

from rayloom.inversion.elimination import GroupMeans
from rayloom.inversion.groups import ParameterGroup
from rayloom.inversion.priors import Prior
from rayloom.inversion.system import WhitenedSystem

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class TermElimination:
    """R = I + T Tᵀ and its powers, T never being filled.

    Attributes
    ----------
    groups : tuple of ParameterGroup
        The groups that are eliminated.
    means : GroupMeans
        Weights, and the projection that frees T of group means.
    eigenvalues : (terms,) array
        Those of Tᵀ T.
    """

    groups: tuple[ParameterGroup, ...]
    means: GroupMeans
    eigenvalues: Floats
    _vectors: Floats
    _matrix: csr_array | None

    @classmethod
    def of_groups(cls, groups: tuple[ParameterGroup, ...], means: GroupMeans) -> TermElimination:
        """Diagonalise Tᵀ T."""
        if not groups:
            return cls((), means, np.zeros(0), np.zeros((0, 0)), None)
        matrix = csr_array(hstack([group.matrix for group in groups], format="csr"))
        weighted = csr_array(matrix.multiply(means.root_weights[:, None]))
        of_means = means.columns().T @ weighted
        gram = (weighted.T @ weighted - of_means.T @ of_means).toarray()
        half = _columns(groups, gram)
        whole = _columns(groups, half)
        eigenvalues, vectors = np.linalg.eigh(0.5 * (whole + whole.T))
        return cls(groups, means, np.maximum(eigenvalues, 0.0), vectors, matrix)

    @property
    def log_determinant(self) -> float:
        """Natural logarithm of det R."""
        return float(np.sum(np.log1p(self.eigenvalues)))

    def half(self, rows: Floats) -> Floats:
        """R^(−½) y, (rows,)."""
        root = np.sqrt(1.0 + self.eigenvalues)
        return self._with(rows, -1.0 / (root * (1.0 + root)))

    def whole(self, rows: Floats) -> Floats:
        """R⁻¹ y, (rows,)."""
        return self._with(rows, -1.0 / (1.0 + self.eigenvalues))

    def _with(self, rows: Floats, factors: Floats) -> Floats:
        """(I + T V diag(factors) Vᵀ Tᵀ) y."""
        if self._matrix is None:
            return rows
        share = self._vectors @ (factors * (self._vectors.T @ self.white(rows)))
        parts = zip(self.groups, self._split(share), strict=True)
        terms = np.concatenate([group.prior.colour(part) for group, part in parts])
        added = self.means.project(self.means.root_weights * (self._matrix @ terms))
        return np.asarray(rows + added)

    def white(self, rows: Floats) -> Floats:
        """Tᵀ y, (terms,): the whitened terms that belong to a final residual y."""
        if self._matrix is None:
            return np.zeros(0)
        columns = self._matrix.T @ (self.means.root_weights * self.means.project(rows))
        parts = zip(self.groups, self._split(columns), strict=True)
        return np.concatenate([group.prior.colour_adjoint(part) for group, part in parts])

    def _split(self, terms: Floats) -> list[Floats]:
        return np.split(terms, np.cumsum([group.size for group in self.groups])[:-1])


def _columns(groups: tuple[ParameterGroup, ...], matrix: Floats) -> Floats:
    """C^(½)ᵀ applied to each row of a matrix, as columns: C^(½)ᵀ Mᵀ."""
    cuts = np.cumsum([group.size for group in groups])[:-1]
    rows = [
        np.concatenate(
            [
                group.prior.colour_adjoint(part)
                for group, part in zip(groups, np.split(row, cuts), strict=True)
            ]
        )
        for row in matrix
    ]
    return np.array(rows).T


@dataclass(frozen=True)
class MarginalSystem:
    """The operator R^(−½) B of the blocks.

    Attributes
    ----------
    blocks : WhitenedSystem
        B: weighted rows freed of means, the blocks its only group.
    terms : TermElimination
        R.
    """

    blocks: WhitenedSystem
    terms: TermElimination

    @classmethod
    def of_system(cls, system: WhitenedSystem, *, threads: int | None = None) -> MarginalSystem:
        """Split off the first parameter group, the blocks, and eliminate the others."""
        blocks = WhitenedSystem.of_groups(system.groups[:1], system.means, threads=threads)
        return cls(blocks, TermElimination.of_groups(system.groups[1:], system.means))

    @property
    def shape(self) -> tuple[int, int]:
        """Numbers of rows and unknowns of the blocks."""
        return self.blocks.shape

    def with_prior(self, prior: Prior) -> MarginalSystem:
        """Return the same rows and rays under another prior of the blocks."""
        group = replace(self.blocks.groups[0], prior=prior)
        return replace(self, blocks=replace(self.blocks, groups=(group,)))

    def with_means(self, means: GroupMeans) -> MarginalSystem:
        """Return the same rays under other weights."""
        return MarginalSystem(
            self.blocks.with_means(means), TermElimination.of_groups(self.terms.groups, means)
        )

    def times(self, white: Floats) -> Floats:
        """R^(−½) B z, (rows,)."""
        return self.terms.half(self.blocks.times(white))

    def transposed_times(self, rows: Floats) -> Floats:
        """Bᵀ R^(−½) y, (unknowns,)."""
        return self.blocks.transposed_times(self.terms.half(rows))

    def right_hand_side(self, seconds: Floats) -> Floats:
        """R^(−½) d̃ of times of the rows, s."""
        return self.terms.half(self.blocks.whiten_rows(seconds))

    def final_residual(self, residual: Floats) -> Floats:
        """Standardised residual that blocks and terms leave, of one of the blocks alone."""
        return self.terms.half(residual)

    def unknowns(self, final_residual: Floats, *, damping: float) -> Floats:
        """Whitened unknowns of the blocks, of the residual that blocks and terms leave."""
        return np.asarray(self.blocks.transposed_times(final_residual) / damping**2)

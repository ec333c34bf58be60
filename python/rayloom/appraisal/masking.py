"""Inversions in which some blocks may not move, or some groups of unknowns are left out.

Main type: :class:`MaskedPrior`.
"""

from __future__ import annotations

from collections.abc import Collection
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from rayloom.inversion import LinearisedProblem, Prior, WhitenedSystem

Floats = NDArray[np.float64]
Flags = NDArray[np.bool_]


@dataclass(frozen=True)
class MaskedPrior:
    """A prior whose parameters are zero where forbidden; its unknowns stay as they are.

    The covariance is M C M, M being zero for a forbidden parameter and one for
    any other: those left keep their standard deviations and correlations.

    Attributes
    ----------
    prior : Prior
        C.
    allowed : (n,) bool array
        Parameters that may differ from zero.
    """

    prior: Prior
    allowed: Flags

    @property
    def size(self) -> int:
        """Number of parameters, and of whitened unknowns."""
        return self.prior.size

    def colour(self, white: Floats) -> Floats:
        """Parameters of whitened unknowns, M C^½ z."""
        return np.where(self.allowed, self.prior.colour(white), 0.0)

    def colour_adjoint(self, parameters: Floats) -> Floats:
        """Transpose of :meth:`colour`."""
        return self.prior.colour_adjoint(np.where(self.allowed, parameters, 0.0))


def masked_system(
    problem: LinearisedProblem,
    forbidden: Flags | None = None,
    *,
    without: Collection[str] = (),
) -> WhitenedSystem:
    """Build the system of a linearised problem with blocks forbidden or groups left out.

    Parameters
    ----------
    problem : LinearisedProblem
        A finished inversion.
    forbidden : (nx, ny, nz) bool array, optional
        Blocks that stay at the reference.
    without : collection of str, optional
        Names of parameter groups to leave out, "station_terms" for instance.
    """
    blocks, *others = problem.system.groups
    if forbidden is not None:
        blocks = replace(blocks, prior=MaskedPrior(blocks.prior, ~forbidden.ravel()))
    kept = [group for group in others if group.name not in without]
    return WhitenedSystem.of_groups((blocks, *kept), problem.system.means)

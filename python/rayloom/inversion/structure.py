"""Tests whether the data demand structure in the blocks at all.

Main type: :class:`StructureDemand`, the outcome of a test against noise alone.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rayloom.inversion.problem import Problem, TracedModel
from rayloom.inversion.system import WhitenedSystem, resolved_parameters, solve

_DEVIATIONS = 3.0
_TOLERANCE = 1e-4


@dataclass(frozen=True)
class StructureDemand:
    """How much the blocks explain, beside what they would explain of noise alone.

    Attributes
    ----------
    gain : float
        By how much blocks that may vary lower misfit plus prior below the minimum
        without them.
    noise_gain, noise_gain_std : float
        Expectation and standard deviation of the same for Gaussian noise of the
        size that is left, without structure.
    """

    gain: float
    noise_gain: float
    noise_gain_std: float

    @property
    def demanded(self) -> bool:
        """Whether the gain exceeds that of noise by more than three standard deviations."""
        return self.gain > self.noise_gain + _DEVIATIONS * self.noise_gain_std

    def sentence(self) -> str:
        """Say it in words."""
        noise = f"{self.noise_gain:.0f} ± {self.noise_gain_std:.0f}"
        if self.demanded:
            return (
                f"the data demand structure: it lowers misfit plus prior by {self.gain:.0f}, "
                f"of noise alone it would by {noise}"
            )
        return (
            "the data do not demand any structure: it lowers misfit plus prior by "
            f"{self.gain:.0f}, no more than it would of noise alone ({noise}); take the model as "
            "flat within its errors"
        )


def structure_demand(
    problem: Problem, traced: TracedModel, system: WhitenedSystem, kept: NDArray[np.bool_]
) -> StructureDemand | None:
    """Test the last model against noise alone.

    About the last rays, with the same weight for all rows that are not suspected
    as outliers (robust weights would favour the model that they come from), the
    gain of the blocks without structure is a quadratic form of the noise with
    the mean s² t and a variance of at most 2 s⁴ t, t being the parameters of the
    blocks that the data resolve. Misfit plus prior at the minimum then has the
    mean s² (N − N_g − t), which measures the noise s². Station terms and shifts
    of events, which may well be real, take part on both sides.

    Parameters
    ----------
    problem : Problem
        The problem.
    traced : TracedModel
        The last model.
    system : WhitenedSystem
        The problem linearised about it, under any weights.
    kept : (rows,) bool array
        Rows to trust.

    Returns
    -------
    StructureDemand or None
        None where ``trace_probes`` is 0 or too few rows are left.
    """
    probes = problem.settings.trace_probes
    system = system.with_means(problem.means(kept.astype(np.float64)))
    data = system.whiten_rows(traced.unexplained_s + system.seconds(traced.white))
    if probes == 0 or not np.any(kept):
        return None
    resolved = resolved_parameters(
        system,
        probes=probes,
        seed=problem.settings.seed,
        tolerance=_TOLERANCE,
        max_iterations=problem.settings.solver_max_iterations,
    )
    blocks = max(float(resolved[0]), 1.0)
    freedom = float(np.sum(kept)) - system.means.count - blocks
    if freedom <= 0.0:
        return None
    least = _least_objective(problem, system, data)
    noise_gain = least / freedom * blocks
    relative_variance = 2.0 / freedom + 2.0 / blocks * (1.0 + 1.0 / probes)
    return StructureDemand(
        gain=_without_blocks(problem, system, data) - least,
        noise_gain=noise_gain,
        noise_gain_std=noise_gain * float(np.sqrt(relative_variance)),
    )


def _without_blocks(problem: Problem, system: WhitenedSystem, data: NDArray[np.float64]) -> float:
    """Minimum of misfit plus prior over the linear groups alone."""
    groups = problem.linear_groups
    if not groups:
        return float(data @ data)
    threads = problem.settings.threads
    few = WhitenedSystem.of_groups(groups, system.means, threads=threads)
    return _least_objective(problem, few, data)


def _least_objective(problem: Problem, system: WhitenedSystem, data: NDArray[np.float64]) -> float:
    """Minimum of misfit plus prior."""
    found = solve(
        system,
        data,
        tolerance=_TOLERANCE,
        max_iterations=problem.settings.solver_max_iterations,
    )
    left = data - system.times(found.white)
    return float(left @ left + found.white @ found.white)

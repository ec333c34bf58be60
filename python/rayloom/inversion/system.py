"""The whitened linear system that one iteration solves.

Main type: :class:`WhitenedSystem`, the operator Ã = (I − QQᵀ) W^½ A C^½ over all
parameter groups. Its unknowns are white, so the regularised solution minimises
‖Ã z − d̃‖² + ‖z‖². Products with A run in the core and have the same bits on
any number of threads.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array, hstack
from scipy.sparse.linalg import LinearOperator, lsqr

from rayloom._core import SparseProducts
from rayloom.inversion.elimination import GroupMeans
from rayloom.inversion.groups import ParameterGroup

_SOLVER_REASONS = {
    0: "the solution is zero",
    1: "the equations are met to the accuracy asked",
    2: "the least-squares solution is found to the accuracy asked",
    3: "the condition limit is reached",
    4: "the equations are met to machine accuracy",
    5: "the least-squares solution is found to machine accuracy",
    6: "the condition limit is reached at machine accuracy",
    7: "the iteration limit is reached",
}


@dataclass(frozen=True)
class WhitenedSystem:
    """Rows weighted and freed of group means, columns whitened by their priors.

    Attributes
    ----------
    groups : tuple of ParameterGroup
        Parameter groups in the order of the unknowns.
    means : GroupMeans
        Weights and the projection that eliminates the means.
    """

    groups: tuple[ParameterGroup, ...]
    means: GroupMeans
    _products: SparseProducts

    @classmethod
    def of_groups(
        cls, groups: Sequence[ParameterGroup], means: GroupMeans, *, threads: int | None = None
    ) -> WhitenedSystem:
        """Join the groups' columns into one matrix held by the core."""
        matrix = csr_array(hstack([group.matrix for group in groups], format="csr"))
        products = SparseProducts(
            matrix.indptr.astype(np.int64),
            matrix.indices.astype(np.int32),
            np.ascontiguousarray(matrix.data, dtype=np.float64),
            matrix.shape[1],
            threads=threads,
        )
        return cls(groups=tuple(groups), means=means, _products=products)

    @property
    def shape(self) -> tuple[int, int]:
        """Numbers of rows and unknowns."""
        return self.means.root_weights.size, sum(group.size for group in self.groups)

    def with_means(self, means: GroupMeans) -> WhitenedSystem:
        """Return the same columns under other weights."""
        return replace(self, means=means)

    def split(self, unknowns: NDArray[np.float64]) -> list[NDArray[np.float64]]:
        """Cut a vector of unknowns into those of each group."""
        ends = np.cumsum([group.size for group in self.groups])
        return np.split(unknowns, ends[:-1])

    def parameters(self, white: NDArray[np.float64]) -> list[NDArray[np.float64]]:
        """Parameters of each group, in their own units."""
        parts = zip(self.groups, self.split(white), strict=True)
        return [group.prior.colour(part) for group, part in parts]

    def times(self, white: NDArray[np.float64]) -> NDArray[np.float64]:
        """Ã z, (rows,)."""
        return self.whiten_rows(self.seconds(white))

    def seconds(self, white: NDArray[np.float64]) -> NDArray[np.float64]:
        """Predicted times A C^½ z before weighting, (rows,), s."""
        return self._products.times(np.concatenate(self.parameters(white)))

    def transposed_times(self, rows: NDArray[np.float64]) -> NDArray[np.float64]:
        """Ãᵀ y, (unknowns,)."""
        weighted = self.means.root_weights * self.means.project(rows)
        parts = zip(
            self.groups, self.split(self._products.transposed_times(weighted)), strict=True
        )
        return np.concatenate([group.prior.colour_adjoint(part) for group, part in parts])

    def whiten_rows(self, seconds: NDArray[np.float64]) -> NDArray[np.float64]:
        """Weight times of the rows and take off the group means: d̃ of d."""
        return self.means.project(self.means.root_weights * seconds)


@dataclass(frozen=True)
class Solution:
    """What the least-squares solver found.

    Attributes
    ----------
    white : (unknowns,) array
        Whitened unknowns.
    iterations : int
        Steps taken.
    converged : bool
        False if the iteration or condition limit stopped it.
    reason : str
        Why it stopped.
    """

    white: NDArray[np.float64]
    iterations: int
    converged: bool
    reason: str


def solve(
    system: WhitenedSystem,
    right_hand_side: NDArray[np.float64],
    *,
    tolerance: float,
    max_iterations: int,
    damping: float = 1.0,
    start: NDArray[np.float64] | None = None,
    step: Callable[[int], None] | None = None,
) -> Solution:
    """Minimise ‖Ã z − d̃‖² + damping² ‖z‖² by LSQR.

    With r the residual of the stacked system [Ã; damping I], two rules stop it:
    ‖[Ã; damping I]ᵀ r‖ ≤ tolerance ‖Ã‖ ‖r‖, the usual end, and
    ‖r‖ ≤ tolerance (‖d̃‖ + ‖Ã‖ ‖z‖), which only data without noise meet; ‖Ã‖ is
    the running estimate of the bidiagonalisation. A start solves for the
    correction to it in the stacked system, under the same rules: the penalty is
    still that of the whole of z.

    Parameters
    ----------
    system : WhitenedSystem
        The operator Ã.
    right_hand_side : (rows,) array
        d̃.
    tolerance : float
        Relative accuracy of the solver's two stopping rules.
    max_iterations : int
        Most steps.
    damping : float, optional
        1 for the prior as it stands; λ for standard deviations divided by λ.
    start : (unknowns,) array, optional
        Where to start from, the solution of a similar system for instance; zero
        if not given.
    step : callable, optional
        Told the number of each step.

    References
    ----------
    Paige, C. C. & Saunders, M. A. (1982). LSQR: an algorithm for sparse linear
    equations and sparse least squares. ACM Trans. Math. Softw. 8, 43-71.
    """
    operator = _linear_operator(system, step)
    if start is not None and np.any(start):
        operator = _stacked(operator, damping)
        right_hand_side = np.append(right_hand_side - system.times(start), -damping * start)
        damping = 0.0
    found = lsqr(
        operator,
        right_hand_side,
        damp=damping,
        atol=tolerance,
        btol=tolerance,
        conlim=0.0,
        iter_lim=max_iterations,
    )
    stop = int(found[1])
    return Solution(
        white=found[0] if start is None else start + found[0],
        iterations=int(found[2]),
        converged=stop not in (3, 6, 7),
        reason=_SOLVER_REASONS[stop],
    )


def _linear_operator(system: WhitenedSystem, step: Callable[[int], None] | None) -> LinearOperator:
    count = 0

    def times(white: NDArray[np.float64]) -> NDArray[np.float64]:
        nonlocal count
        count += 1
        if step is not None:
            step(count)
        return system.times(white.ravel())

    return LinearOperator(
        shape=system.shape,
        matvec=times,
        rmatvec=lambda rows: system.transposed_times(rows.ravel()),
        dtype=np.float64,
    )


def _stacked(operator: LinearOperator, damping: float) -> LinearOperator:
    """Join [Ã; damping I]."""
    rows, unknowns = operator.shape
    return LinearOperator(
        shape=(rows + unknowns, unknowns),
        matvec=lambda white: np.append(operator.matvec(white), damping * white),
        rmatvec=lambda stacked: (
            operator.rmatvec(stacked.ravel()[:rows]) + damping * stacked.ravel()[rows:]
        ),
        dtype=np.float64,
    )


def resolution_trace(
    system: WhitenedSystem, *, probes: int, seed: int, tolerance: float, max_iterations: int
) -> float:
    """Estimate tr H, the number of parameters that the data resolve.

    Parameters
    ----------
    system, probes, seed, tolerance, max_iterations
        As for :func:`resolved_parameters`, whose sum it is.
    """
    resolved = resolved_parameters(
        system, probes=probes, seed=seed, tolerance=tolerance, max_iterations=max_iterations
    )
    return float(np.sum(resolved))


def resolved_parameters(
    system: WhitenedSystem, *, probes: int, seed: int, tolerance: float, max_iterations: int
) -> NDArray[np.float64]:
    """Estimate how many parameters of each group the data resolve; their sum is tr H.

    H = Ã (ÃᵀÃ + I)⁻¹ Ãᵀ maps data to predicted data. With independent random
    signs v, vᵀ(I − QQᵀ) H (I − QQᵀ)v has the mean tr H and a standard deviation
    of at most √(2 tr H), divided by the square root of the number of probes;
    the share of H that runs through a group's columns counts that group's.

    Parameters
    ----------
    system : WhitenedSystem
        The operator Ã.
    probes : int
        Number of random probes, at least 1.
    seed : int
        Seed of the signs.
    tolerance, max_iterations
        As for :func:`solve`.

    Returns
    -------
    (groups,) array
        In the order of the groups.

    References
    ----------
    Hutchinson, M. F. (1990). A stochastic estimator of the trace of the
    influence matrix for Laplacian smoothing splines. Commun. Statist. Simula.
    19, 433-450.
    """
    random = np.random.default_rng(seed)
    takes_part = system.means.root_weights > 0.0
    total = np.zeros(len(system.groups))
    for _ in range(probes):
        signs = random.choice([-1.0, 1.0], size=takes_part.size)
        probe = system.means.project(np.where(takes_part, signs, 0.0))
        found = solve(system, probe, tolerance=tolerance, max_iterations=max_iterations)
        image = system.transposed_times(probe)
        total += [
            part @ solved
            for part, solved in zip(system.split(image), system.split(found.white), strict=True)
        ]
    return total / probes

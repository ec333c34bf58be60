"""Squeezing: whether the data demand structure in some blocks or would do without it.

Structure is forbidden in some blocks: they stay at the prior's mean, which is the
reference unless a run chooses another. What the objective Φ = misfit + prior
norm rises by, ΔΦ, is compared with its rise in data sets simulated from the
best model that obeys. Main functions: :func:`squeeze` for any blocks and
:func:`scan_depths` for the depth extent; :func:`squeezed_first` maps what the
data still demand outside.

With c = Vᵀd̃ the compressed data, min Φ = cᵀ (I + K)⁻¹ c where K = VᵀÃÃᵀV. ΔΦ is
thus the log-likelihood ratio of two Gaussian hypotheses up to a constant, the
most powerful statistic to tell them apart (Neyman & Pearson 1933), and costs
small dense algebra only.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from rayloom.appraisal.compressed import CompressedData, prior_covariance
from rayloom.appraisal.masking import MaskedPrior, masked_system
from rayloom.errors import InputError
from rayloom.inversion import LinearisedProblem, Solution, WhitenedSystem, solve
from rayloom.model import BlockGrid

Floats = NDArray[np.float64]
Flags = NDArray[np.bool_]
Side = Literal["below", "above"]

_TOLERANCE = 1e-5
_MAX_ITERATIONS = 3000
_FACTOR_LIMITS = (0.2, 12.0)


@dataclass(frozen=True)
class SqueezeTest:
    """Whether the data put up with structure being forbidden somewhere.

    Attributes
    ----------
    rise : float
        ΔΦ: how much Φ rises when the structure is forbidden.
    null_rise : (simulations,) array
        The same of data simulated from the best squeezed model.
    prior_factor : float
        Size of the allowed structure over that of the prior, as the squeezed
        inversion finds it most likely. Both inversions and the simulated models
        take the prior's standard deviation times this factor: data from models
        that are too small would make the observed ΔΦ look large.
    """

    rise: float
    null_rise: Floats
    prior_factor: float

    @property
    def p_value(self) -> float:
        """Share of data sets, the observed one included, whose Φ rises as much or more.

        References
        ----------
        Davison, A. C. & Hinkley, D. V. (1997). Bootstrap Methods and their
        Application. Cambridge University Press, section 4.2.
        """
        return float((1 + np.sum(self.null_rise >= self.rise)) / (1 + self.null_rise.size))


@dataclass(frozen=True)
class DepthScan:
    """Squeezing tests at rising depths.

    Attributes
    ----------
    side : {"below", "above"}
        Where structure is forbidden.
    depth_km : (n,) array
        Depths of the cut, rising, km.
    rise, p_value : (n,) arrays
        ΔΦ and its p-value at each.
    prior_factor : (n,) array
        See :class:`SqueezeTest`.
    """

    side: Side
    depth_km: Floats
    rise: Floats
    p_value: Floats
    prior_factor: Floats

    def demanded_km(self, level: float = 0.01) -> float:
        """Depth that the data demand structure to reach at least, km; NaN if none.

        From below: the deepest cut rejected with all shallower ones; from
        above: the shallowest one rejected with all deeper ones.

        Parameters
        ----------
        level : float, optional
            p-value under which a cut is rejected; low, since a scan tests many cuts.
        """
        order = np.arange(self.depth_km.size)
        if self.side == "above":
            order = order[::-1]
        rejected = np.cumprod(self.p_value[order] < level).sum()
        return float(self.depth_km[order][rejected - 1]) if rejected else float("nan")


@dataclass(frozen=True)
class SqueezedFirst:
    """A squeezed model, and what its residuals still demand.

    Attributes
    ----------
    squeezed_percent : (nx, ny, nz) array
        Velocity perturbation with nothing in the forbidden blocks.
    demanded_percent : (nx, ny, nz) array
        What a free inversion of its residuals adds.
    """

    squeezed_percent: Floats
    demanded_percent: Floats


def squeeze(
    compressed: CompressedData, forbidden: Flags, *, simulations: int = 200, seed: int = 1
) -> SqueezeTest:
    """Test whether the data demand structure in some blocks.

    Each simulated data set stems from a model drawn around the best squeezed
    one, with the spread that the data leave it, and errors of unit variance
    (the picks' uncertainties); so it has neither less structure than the data,
    as data from the damped best model itself would, nor any that is forbidden.

    Parameters
    ----------
    compressed : CompressedData
        The data.
    forbidden : (nx, ny, nz) or (blocks,) bool array
        Blocks without structure.
    simulations : int, optional
        Number of simulated data sets.
    seed : int, optional
        Seed of the simulations.

    Returns
    -------
    SqueezeTest

    Raises
    ------
    InputError
        If no block is forbidden, or fewer than 100 simulations are asked for.
    """
    if not forbidden.any():
        raise InputError("no block is forbidden, so there is nothing to test", where="forbidden")
    if simulations < 100:
        raise InputError(f"expected at least 100, got {simulations}", where="simulations")
    return _Comparison.of(compressed).test(forbidden, simulations=simulations, seed=seed)


def scan_depths(
    compressed: CompressedData,
    grid: BlockGrid,
    side: Side,
    depths_km: Floats | None = None,
    *,
    columns: Flags | None = None,
    simulations: int = 200,
    seed: int = 1,
    progress: Callable[[int, int], None] | None = None,
) -> DepthScan:
    """Forbid structure below, or above, one depth after the other.

    Parameters
    ----------
    compressed : CompressedData
        The data.
    grid : BlockGrid
        The blocks.
    side : {"below", "above"}
        Where structure is forbidden.
    depths_km : (n,) array, optional
        Cuts, km; every inner edge of the blocks by default.
    columns : (nx, ny) bool array, optional
        Block columns in which it is forbidden: those of one body and its
        surroundings; all by default.
    simulations, seed
        As for :func:`squeeze`.
    progress : callable, optional
        Told (depths done, depths in all).

    Returns
    -------
    DepthScan

    Raises
    ------
    InputError
        If a cut leaves nothing to forbid.
    """
    cuts = np.unique(grid.depth_edges_km[1:-1] if depths_km is None else depths_km)
    where = np.ones(grid.shape[:2], dtype=bool) if columns is None else columns
    comparison = _Comparison.of(compressed)
    tests = []
    for done, cut in enumerate(cuts.tolist()):
        forbidden = where[:, :, None] & blocks_beyond(grid, side, cut)
        if not forbidden.any():
            raise InputError(f"no block lies {side} {cut:g} km", where="depths_km")
        tests.append(comparison.test(forbidden, simulations=simulations, seed=seed + done))
        if progress is not None:
            progress(done + 1, cuts.size)
    return DepthScan(
        side=side,
        depth_km=cuts,
        rise=np.array([test.rise for test in tests]),
        p_value=np.array([test.p_value for test in tests]),
        prior_factor=np.array([test.prior_factor for test in tests]),
    )


def blocks_beyond(grid: BlockGrid, side: Side, depth_km: float) -> Flags:
    """Mark the layers whose middle lies below, or above, a depth, (nz,).

    Parameters
    ----------
    grid : BlockGrid
        The blocks.
    side : {"below", "above"}
        Which.
    depth_km : float
        The depth.
    """
    deeper = grid.depth_centres_km > depth_km
    return deeper if side == "below" else ~deeper


def squeezed_first(problem: LinearisedProblem, forbidden: Flags) -> SqueezedFirst:
    """Explain what can be explained without some blocks, then free them.

    Parameters
    ----------
    problem : LinearisedProblem
        A finished inversion.
    forbidden : (nx, ny, nz) bool array
        Blocks without structure in the first of the two inversions.

    Returns
    -------
    SqueezedFirst
        Both parts in percent; the second holds what the data demand in the
        forbidden blocks once all else has been tried.
    """
    system = masked_system(problem, forbidden)
    first = _solve(system, problem.right_hand_side)
    second = _solve(problem.system, problem.right_hand_side - system.times(first.white))
    shape = problem.model.grid.shape
    squeezed = (problem.prior_mean + system.parameters(first.white)[0]).reshape(shape)
    total = squeezed + problem.system.parameters(second.white)[0].reshape(shape)
    squeezed_percent, total_percent = (100.0 * (1.0 / (1.0 + m) - 1.0) for m in (squeezed, total))
    return SqueezedFirst(squeezed_percent, total_percent - squeezed_percent)


def _solve(system: WhitenedSystem, rows: Floats) -> Solution:
    return solve(system, rows, tolerance=_TOLERANCE, max_iterations=_MAX_ITERATIONS)


@dataclass(frozen=True)
class _Comparison:
    """Data, what else than blocks makes them, and the inversion with nothing forbidden.

    Attributes
    ----------
    compressed : CompressedData
        The data c.
    background : (k, k) array
        Covariance of errors and all other groups of unknowns together.
    free_variance : (k,) array
        Λ of the free inversion: VᵀBV = I and VᵀKV = Λ, B being the background and K
        the covariance of what the blocks predict.
    free_basis : (k, k) array
        Its V.
    """

    compressed: CompressedData
    background: Floats
    free_variance: Floats
    free_basis: Floats

    @classmethod
    def of(cls, compressed: CompressedData) -> _Comparison:
        background = np.eye(compressed.size)
        for prior, columns in zip(compressed.priors[1:], compressed.sensitivity[1:], strict=True):
            background += prior_covariance(prior, columns)
        free = prior_covariance(compressed.priors[0], compressed.sensitivity[0])
        return cls(compressed, background, *_joint_modes(free, background))

    def test(self, forbidden: Flags, *, simulations: int, seed: int) -> SqueezeTest:
        """Compare ΔΦ with its values in simulated data.

        In the modes W of the squeezed inversion (see :attr:`free_variance`) the
        numbers y = Wᵀc are independent with variance 1 + a²Λ.
        """
        prior = MaskedPrior(self.compressed.priors[0], ~forbidden.ravel())
        squeezed = prior_covariance(prior, self.compressed.sensitivity[0])
        variance, basis = _joint_modes(squeezed, self.background)
        data = basis.T @ self.compressed.data
        factor = _likeliest_factor(variance, data)
        variance = factor**2 * variance
        across = self.free_basis.T @ self.background @ basis
        kept = 1.0 / (1.0 + factor**2 * self.free_variance)
        rise = np.diag(1.0 / (1.0 + variance)) - across.T @ (kept[:, None] * across)
        simulated = _simulate(variance, data, simulations, seed)
        return SqueezeTest(
            rise=float(data @ rise @ data),
            null_rise=np.einsum("ki,ki->i", simulated, rise @ simulated),
            prior_factor=factor,
        )


def _joint_modes(covariance: Floats, background: Floats) -> tuple[Floats, Floats]:
    """Λ and W with WᵀBW = I and WᵀKW = Λ for a covariance K and a background B."""
    from scipy.linalg import eigh

    variance, basis = eigh(covariance, background)
    return np.maximum(variance, 0.0), basis


def _likeliest_factor(variance: Floats, data: Floats) -> float:
    """Factor a on the prior's standard deviation that makes y ~ N(0, 1 + a²Λ) likeliest.

    References
    ----------
    MacKay, D. J. C. (1992). Bayesian interpolation. Neural Comput. 4, 415-447
    (the evidence).
    """
    from scipy.optimize import minimize_scalar

    def unlikeliness(log_factor: float) -> float:
        total = 1.0 + np.exp(2.0 * log_factor) * variance
        return float(np.sum(data**2 / total + np.log(total)))

    low, high = np.log(_FACTOR_LIMITS)
    found = minimize_scalar(
        unlikeliness, bounds=(low, high), method="bounded", options={"xatol": 0.01}
    )
    return float(np.exp(found.x))


def _simulate(variance: Floats, data: Floats, simulations: int, seed: int) -> Floats:
    """Draw (k, simulations) data sets: squeezed models given y, and fresh errors."""
    random = np.random.default_rng(seed)
    share = variance / (1.0 + variance)
    shape = (data.size, simulations)
    models = (share * data)[:, None] + np.sqrt(share)[:, None] * random.standard_normal(shape)
    return np.asarray(models + random.standard_normal(shape))

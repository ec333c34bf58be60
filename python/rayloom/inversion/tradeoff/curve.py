"""All measures of a trade-off along one curve: one shape of the prior, many strengths.

Main type: :class:`Curve`, from :func:`measure_curve`.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rayloom.inversion.tradeoff.bidiagonal import Bidiagonal, bidiagonalise
from rayloom.inversion.tradeoff.marginal import MarginalSystem

Floats = NDArray[np.float64]
_PROBE_TOLERANCE = 1e-3
"""Quadratic forms converge twice as fast as solutions."""


@dataclass(frozen=True)
class Accuracy:
    """How well a curve is computed.

    Attributes
    ----------
    tolerance : float
        Accuracy of the solutions; see :func:`bidiagonalise`.
    max_steps : int
        Most steps of a bidiagonalisation.
    probes : int
        Random probes of each trace.
    seed : int
        Their seed.
    """

    tolerance: float = 1e-5
    max_steps: int = 600
    probes: int = 6
    seed: int = 20


@dataclass(frozen=True)
class Curve:
    """Measures at each damping; all arrays have the shape (dampings,).

    Attributes
    ----------
    damping : array
        λ, rising: the prior's standard deviation is divided by it.
    chi2, chi2_expected : arrays
        ‖r̃‖² of the final standardised residual, and (N − N_g) − tr H.
    solution_norm : array
        Norm of the whitened unknowns at unit strength.
    marginal_norm : array
        Norm of R^(−½)(B z − d̃), the misfit that the blocks compete for.
    objective : array
        Misfit and prior together; its expectation is N − N_g.
    resolved : array
        tr H, parameters that the data resolve, terms included.
    gcv : array
        n‖r̃‖²/(n − tr H)² with n = N − N_g.
    log_evidence : array
        Log of the restricted likelihood of the prior, up to a constant common to
        all priors, with the scale of the uncertainties at its best value.
    noise_scale : array
        That scale: √(objective/n).
    curvature : array
        Of the L-curve, log ‖z‖ against log of the marginal norm; a corner is positive.
    free_count : int
        n.
    converged : bool
        Whether all solutions reached the accuracy asked.
    """

    damping: Floats
    chi2: Floats
    chi2_expected: Floats
    solution_norm: Floats
    marginal_norm: Floats
    objective: Floats
    resolved: Floats
    gcv: Floats
    log_evidence: Floats
    noise_scale: Floats
    curvature: Floats
    free_count: int
    converged: bool


def measure_curve(
    system: MarginalSystem,
    seconds: Floats,
    damping: Floats,
    *,
    free_count: int,
    accuracy: Accuracy,
    step: Callable[[], None] | None = None,
) -> tuple[Curve, Bidiagonal]:
    """Measure every strength of one prior.

    One bidiagonalisation from the data gives all solutions, and one from each
    probe all traces. With C = R^(−½) B Bᵀ R^(−½), tr (I + C/λ²)⁻¹R⁻¹ is
    the expected χ² and log det(I + C/λ²) the evidence's volume.

    Parameters
    ----------
    system : MarginalSystem
        Rows, rays and the shape of the prior.
    seconds : (rows,) array
        Data, s.
    damping : (dampings,) array
        Dampings λ.
    free_count : int
        N − N_g.
    accuracy : Accuracy
        How well.
    step : callable, optional
        Called after the data and after each probe.

    Returns
    -------
    Curve and Bidiagonal
        The measures, and the bidiagonalisation of the data.

    References
    ----------
    Golub, G. H., Heath, M. & Wahba, G. (1979). Generalized cross-validation as a
    method for choosing a good ridge parameter. Technometrics 21, 215-223.
    Patterson, H. D. & Thompson, R. (1971). Recovery of inter-block information
    when block sizes are unequal. Biometrika 58, 545-554 (restricted likelihood).
    Ubaru, S., Chen, J. & Saad, Y. (2017). Fast estimation of tr(f(A)) via
    stochastic Lanczos quadrature. SIAM J. Matrix Anal. Appl. 38, 1075-1099.
    """
    smallest = float(damping.min())
    data = bidiagonalise(
        system,
        system.right_hand_side(seconds),
        damping=smallest,
        tolerance=accuracy.tolerance,
        max_steps=accuracy.max_steps,
    )
    if step is not None:
        step()
    traces = _traces(system, damping, accuracy, step)
    chi2 = np.array([_squared(system.final_residual(data.residual(x))) for x in damping])
    objective = data.residual_squared(damping) + damping**2 * data.solution_squared(damping)
    resolved = free_count - traces.expected
    noise = objective / free_count
    curve = Curve(
        damping=damping,
        chi2=chi2,
        chi2_expected=traces.expected,
        solution_norm=np.sqrt(data.solution_squared(damping)),
        marginal_norm=np.sqrt(data.residual_squared(damping)),
        objective=objective,
        resolved=resolved,
        gcv=free_count * chi2 / traces.expected**2,
        log_evidence=-0.5 * (free_count * (1.0 + np.log(noise)) + traces.log_volume),
        noise_scale=np.sqrt(noise),
        curvature=curvature(data, damping),
        free_count=free_count,
        converged=data.converged,
    )
    return curve, data


def curvature(data: Bidiagonal, damping: Floats) -> Floats:
    """Curvature of the L-curve at each damping, exact for the bidiagonal problem.

    With E = ‖z‖², R = ‖r‖² and dR/dλ = −λ² dE/dλ, the curve (½ log R, ½ log E) has the
    curvature (2 E R/|E′|)(2λ E R + λ² E′ R + λ⁴ E E′)/(R² + λ⁴ E²)^(3/2).

    References
    ----------
    Hansen, P. C. & O'Leary, D. P. (1993). The use of the L-curve in the regularization
    of discrete ill-posed problems. SIAM J. Sci. Comput. 14, 1487-1503.
    """
    size, misfit = data.solution_squared(damping), data.residual_squared(damping)
    cubes = (data.squares + damping[:, None] ** 2) ** 3
    slope = -4.0 * damping * ((data.weights * data.squares) / cubes).sum(axis=1)
    square = damping**2
    with np.errstate(divide="ignore", invalid="ignore"):
        turn = 2.0 * damping * size * misfit + square * slope * (misfit + square * size)
        bend = -2.0 * size * misfit / slope * turn
        bend /= (misfit**2 + square**2 * size**2) ** 1.5
    return np.asarray(np.nan_to_num(bend, nan=0.0, posinf=0.0, neginf=0.0))


@dataclass(frozen=True)
class _Traces:
    expected: Floats
    log_volume: Floats


def _traces(
    system: MarginalSystem,
    damping: Floats,
    accuracy: Accuracy,
    step: Callable[[], None] | None,
) -> _Traces:
    """Estimate tr (I + C/λ²)⁻¹R⁻¹ and log det(I + C/λ²) by random signs without means."""
    random = np.random.default_rng(accuracy.seed)
    means = system.blocks.means
    takes_part = means.root_weights > 0.0
    expected, log_volume = np.zeros(damping.size), np.zeros(damping.size)
    for _ in range(accuracy.probes):
        signs = random.choice([-1.0, 1.0], size=takes_part.size)
        probe = means.project(np.where(takes_part, signs, 0.0))
        found = bidiagonalise(
            system,
            probe,
            damping=float(damping.min()),
            tolerance=_PROBE_TOLERANCE,
            max_steps=accuracy.max_steps,
        )
        against = found.left @ system.terms.whole(probe)
        for number, strength in enumerate(damping):
            shrunk = found.norm * found.vectors[0] / (1.0 + found.squares / strength**2)
            expected[number] += against @ (found.vectors @ shrunk)
            log_volume[number] += found.weights @ np.log1p(found.squares / strength**2)
        if step is not None:
            step()
    count = max(accuracy.probes, 1)
    return _Traces(expected / count, log_volume / count)


def _squared(values: Floats) -> float:
    return float(values @ values)

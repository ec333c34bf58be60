"""Uncertainties put right by what the model leaves: one factor per class of picks.

Main type: :class:`ErrorClasses`, rows that share a phase, a network or a station
and thus a factor. :func:`rescale` gives the rows new uncertainties.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from rayloom.inversion.expectation import share_of_square
from rayloom.inversion.robust import RobustLoss
from rayloom.inversion.rows import DataRows
from rayloom.inversion.system import WhitenedSystem, solve

if TYPE_CHECKING:
    from rayloom.inversion.measure import Stage
    from rayloom.inversion.problem import Problem

_PROBES = 6
_TOLERANCE = 1e-4
_FEWEST_DEGREES = 20.0
_LARGEST_CHANGE = 3.0
_ROUNDS = 6


@dataclass(frozen=True)
class ErrorClasses:
    """Which rows share the factor of their uncertainties.

    Attributes
    ----------
    row_class : (rows,) int array
        Class of each row, 0, 1, …
    keys : tuple of tuple of str
        Values of each class, in the order of the properties that tell them apart.
    """

    row_class: NDArray[np.int64]
    keys: tuple[tuple[str, ...], ...]

    @classmethod
    def of_rows(cls, rows: DataRows, properties: tuple[str, ...]) -> ErrorClasses:
        """Tell rows apart by "phase", "network" and "station", whichever are asked for."""
        network = np.array([label.split(".")[0] for label in rows.station.tolist()], dtype=np.str_)
        values = {"phase": rows.phase, "network": network, "station": rows.station}
        columns = (values[name].tolist() for name in properties)
        keys = list(zip(*columns, strict=True))
        distinct = sorted(set(keys))
        number = {key: index for index, key in enumerate(distinct)}
        row_class = np.array([number[key] for key in keys], dtype=np.int64)
        return cls(row_class=row_class, keys=tuple(distinct))

    def sums(self, values: NDArray[np.float64]) -> NDArray[np.float64]:
        """Sum values of the rows of each class, (classes,)."""
        sums = np.bincount(self.row_class, weights=values, minlength=len(self.keys))
        return np.asarray(sums, dtype=np.float64)


def rescale(problem: Problem, stage: Stage) -> tuple[Problem, float]:
    """Multiply the uncertainties of each class by what its residuals ask for.

    In class c the weighted squares of the residuals are expected to sum to
    f² n_c share, n_c = Σ (1 − Q Qᵀ − H)_ii being its degrees of freedom and the
    share what robust weights leave of a square
    (:func:`rayloom.inversion.expectation.share_of_square`). Σ H_ii is estimated
    with random probes. Classes with fewer than 20 degrees of freedom take the
    factor of all rows together.

    Parameters
    ----------
    problem : Problem
        The problem.
    stage : Stage
        A traced model with its residuals, weights and system.

    Returns
    -------
    problem : Problem
        The same with other uncertainties.
    largest_change : float
        Largest change of the logarithm of any uncertainty.
    """
    classes = ErrorClasses.of_rows(problem.rows, problem.settings.rescale_uncertainties)
    loss = problem.settings.loss(rejecting=stage.rejecting)
    weights = stage.fit.weights
    counted = (weights > 0.0).astype(np.float64)
    squares = weights * np.nan_to_num(stage.fit.standardised) ** 2
    free = counted - _leverage(stage.system, problem)
    whole = _factor(loss, squares.sum(), free.sum(), counted.sum(), stage.fit.scale)
    factors = [
        _factor(loss, *sums, stage.fit.scale) if sums[1] >= _FEWEST_DEGREES else whole
        for sums in zip(
            classes.sums(squares), classes.sums(free), classes.sums(counted), strict=True
        )
    ]
    uncertainty_s = problem.rows.uncertainty_s * np.array(factors)[classes.row_class]
    rows = replace(problem.rows, uncertainty_s=uncertainty_s)
    return replace(problem, rows=rows), float(np.max(np.abs(np.log(factors))))


def _leverage(system: WhitenedSystem, problem: Problem) -> NDArray[np.float64]:
    """Diagonal of QQᵀ + H: exact for the means, by random signs for H, (rows,)."""
    random = np.random.default_rng(problem.settings.seed)
    takes_part = system.means.root_weights > 0.0
    resolved = np.zeros(takes_part.size)
    for _ in range(_PROBES):
        signs = np.where(takes_part, random.choice([-1.0, 1.0], size=takes_part.size), 0.0)
        found = solve(
            system,
            system.means.project(signs),
            tolerance=_TOLERANCE,
            max_iterations=problem.settings.solver_max_iterations,
        )
        resolved += signs * system.times(found.white) / _PROBES
    return resolved + system.means.leverage()


def _factor(loss: RobustLoss, squares: float, degrees: float, count: float, scale: float) -> float:
    """Solve Σ w r² = f² n share(f √(n/N)/scale) for f."""
    if degrees <= 0.0 or squares <= 0.0:
        return 1.0
    factor = 1.0
    for _ in range(_ROUNDS):
        spread = factor * np.sqrt(degrees / count) / scale
        factor = float(np.sqrt(squares / (degrees * share_of_square(loss, spread))))
    return float(np.clip(factor, 1.0 / _LARGEST_CHANGE, _LARGEST_CHANGE))

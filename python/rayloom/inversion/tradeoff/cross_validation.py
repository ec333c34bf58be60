"""Leave-events-out cross-validation: how well models predict events they have not seen.

Main function: :func:`cross_validate`.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array

from rayloom.inversion.elimination import GroupMeans
from rayloom.inversion.groups import ParameterGroup
from rayloom.inversion.linearised import LinearisedProblem
from rayloom.inversion.priors import Prior
from rayloom.inversion.system import WhitenedSystem
from rayloom.inversion.tradeoff.bidiagonal import bidiagonalise
from rayloom.inversion.tradeoff.curve import Accuracy
from rayloom.inversion.tradeoff.marginal import MarginalSystem, TermElimination

Floats = NDArray[np.float64]
Flags = NDArray[np.bool_]


@dataclass(frozen=True)
class EventScores:
    """What is left of events that the model has not seen.

    Attributes
    ----------
    squares : (events, priors, dampings) array
        Standardised squared residuals of each event, its mean and all parameters of
        its own estimated anew.
    freedom : (events,) array
        Rows of each event less its means; 0 for an event without weight.
    """

    squares: Floats
    freedom: Floats

    @property
    def score(self) -> Floats:
        """Mean square per free row, (priors, dampings); 1 if nothing but noise is left."""
        return np.asarray(self.squares.sum(axis=0) / self.freedom.sum())

    @property
    def standard_error(self) -> Floats:
        """Standard error of the score, from the spread among events, (priors, dampings)."""
        spread = self.squares - self.score * self.freedom[:, None, None]
        used = max(int(np.sum(self.freedom > 0.0)), 2)
        variance = (spread**2).sum(axis=0) * used / (used - 1)
        return np.asarray(np.sqrt(variance) / self.freedom.sum())


def cross_validate(
    problem: LinearisedProblem,
    system: MarginalSystem,
    priors: Sequence[Prior],
    damping: Floats,
    *,
    folds: int,
    accuracy: Accuracy,
    step: Callable[[], None] | None = None,
) -> EventScores:
    """Predict each fold of events from all others.

    Whole events are left out. Their means, and parameters that no other event
    touches (their mislocations), are estimated anew from what is left of them, the
    latter under their prior; weights stay frozen.

    Parameters
    ----------
    problem : LinearisedProblem
        Rows, data and weights.
    system : MarginalSystem
        The same problem with all terms but the blocks eliminated.
    priors : sequence of Prior
        Priors of the blocks at unit strength.
    damping : (dampings,) array
        λ of each strength.
    folds : int
        Parts that the events are dealt into, at least 2.
    accuracy : Accuracy
        Of the solutions; its seed deals the events.
    step : callable, optional
        Called after each solution.

    References
    ----------
    Stone, M. (1974). Cross-validatory choice and assessment of statistical
    predictions. J. R. Statist. Soc. B 36, 111-147.
    """
    names, event = np.unique(problem.rows.event, return_inverse=True)
    fold = np.random.default_rng(accuracy.seed).permutation(names.size) % folds
    squares = np.zeros((names.size, len(priors), damping.size))
    root = system.blocks.means.root_weights
    for number in range(folds):
        tested = fold[event] == number
        if not np.any(root[tested] > 0.0) or not np.any(root[~tested] > 0.0):
            continue
        split = _Split.of(problem, system, tested)
        for index, prior in enumerate(priors):
            for column, left in enumerate(split.residuals(prior, damping, accuracy)):
                squares[:, index, column] += np.bincount(
                    event, weights=left**2, minlength=names.size
                )
            if step is not None:
                step()
    return EventScores(squares=squares, freedom=_freedom(problem, event, names.size))


def _freedom(problem: LinearisedProblem, event: NDArray[np.int64], count: int) -> Floats:
    """Rows of each event less its means."""
    active, group = problem.active, problem.rows.group
    rows = np.bincount(event[active], minlength=count)
    _, first = np.unique(np.where(active & (group >= 0), group, -1), return_index=True)
    first = first[active[first] & (group[first] >= 0)]
    return np.asarray(rows - np.bincount(event[first], minlength=count), dtype=np.float64)


@dataclass(frozen=True)
class _Split:
    """Some events left out.

    Attributes
    ----------
    seconds : (rows,) array
        Data, s.
    training : MarginalSystem
        Only the other events have weight.
    whole : WhitenedSystem
        All columns, only the events left out having weight.
    own : TermElimination
        Parameters that only events left out touch.
    """

    seconds: Floats
    training: MarginalSystem
    whole: WhitenedSystem
    own: TermElimination

    @classmethod
    def of(cls, problem: LinearisedProblem, system: MarginalSystem, tested: Flags) -> _Split:
        means = system.blocks.means
        training = system.with_means(_only(means, ~tested))
        left_out = _only(means, tested)
        seen = (means.root_weights > 0.0) & ~tested
        own = tuple(_unseen(group, seen) for group in system.terms.groups)
        return cls(
            seconds=problem.target_s,
            training=training,
            whole=problem.system.with_means(left_out),
            own=TermElimination.of_groups(own, left_out),
        )

    def residuals(self, prior: Prior, damping: Floats, accuracy: Accuracy) -> list[Floats]:
        """Standardised residuals of the events left out, one array per damping."""
        training = self.training.with_prior(prior)
        found = bidiagonalise(
            training,
            training.right_hand_side(self.seconds),
            damping=float(damping.min()),
            tolerance=accuracy.tolerance,
            max_steps=accuracy.max_steps,
        )
        blocks = replace(self.whole.groups[0], prior=prior)
        whole = replace(self.whole, groups=(blocks, *self.whole.groups[1:]))
        data = whole.whiten_rows(self.seconds)
        left = []
        for strength in damping:
            final = training.final_residual(found.residual(float(strength)))
            white = training.unknowns(final, damping=float(strength))
            white = np.concatenate([white, training.terms.white(final)])
            left.append(self.own.half(data - whole.times(white)))
        return left


def _only(means: GroupMeans, rows: Flags) -> GroupMeans:
    return GroupMeans.of_rows(means.group, np.where(rows, means.root_weights, 0.0))


def _unseen(group: ParameterGroup, seen: Flags) -> ParameterGroup:
    """Leave only the columns that no seen row touches."""
    touched = np.zeros(group.matrix.shape[1], dtype=bool)
    touched[group.matrix[seen].indices] = True
    kept = csr_array(group.matrix.multiply(~touched[None, :]))
    return replace(group, matrix=kept)

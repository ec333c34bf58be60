"""Brings the outcome of the outer loop back to the order and names of the input."""

from __future__ import annotations

from typing import TYPE_CHECKING, Final, TypeVar

import numpy as np
from numpy.typing import NDArray

from rayloom.inversion.finishing import Finish
from rayloom.inversion.groups import station_term_layout
from rayloom.inversion.measure import suspected_outliers
from rayloom.inversion.outer import Outcome
from rayloom.inversion.problem import Problem
from rayloom.inversion.result import Counts, InversionResult
from rayloom.inversion.settings import InversionSettings
from rayloom.model import SlownessModel

if TYPE_CHECKING:
    from rayloom.residuals import Residuals

Value = TypeVar("Value", bound=np.generic)

_NO_RAY: Final = "no ray"


def collect_result(data: Residuals, outcome: Outcome, finish: Finish) -> InversionResult:
    """Name and order everything that the loop found.

    Parameters
    ----------
    data : Residuals
        The table that the problem was built from.
    outcome : Outcome
        Where its loop ended.
    finish : Finish
        What was worked out about its last model.
    """
    problem, fit, traced = outcome.problem, outcome.fit, outcome.traced
    suspected = suspected_outliers(fit, outlier_std=problem.settings.outlier_std)
    parameters = _linear_parameters(problem, traced.white)
    count = len(data.residual_s)

    def in_table(values: NDArray[Value], missing: float) -> NDArray[Value]:
        table = np.full(count, missing, dtype=values.dtype)
        table[problem.rows.data_row] = values
        return table

    factor = outcome.state.uncertainty_factor
    used = in_table(traced.active, False)
    after = in_table(fit.centred_s, np.nan)
    because = _left_out_because(data, problem, used)
    return InversionResult(
        data=data,
        model=_with_coverage(problem, outcome),
        history=outcome.state.history,
        station_terms_s=_station_terms(data, problem, used, parameters.get("station_terms")),
        station_term_std_s=_station_terms(data, problem, used, finish.station_term_std),
        mislocation_km=_mislocation(data, problem, used, parameters.get("mislocation")),
        predicted_s=np.asarray(data.residual_s, dtype=np.float64) - after,
        residual_after_s=after,
        weights=in_table(fit.weights, 0.0),
        standardised=in_table(fit.standardised, np.nan),
        suspected_outlier=in_table(suspected, False),
        used=used,
        left_out_because=because,
        rays=traced.rays,
        ray_rows=np.sort(problem.rows.data_row),
        stopped_because=outcome.stopped_because,
        counts=Counts(
            data=int(np.sum(used)),
            groups=np.unique(problem.rows.group[traced.active]).size,
            untraced=int(np.sum(because == _NO_RAY)),
            left_out_groups=problem.left_out,
        ),
        state=outcome.state,
        prior_std_percent=_prior_std_percent(problem.settings),
        prior_strength=problem.prior_strength,
        structure=finish.structure,
        uncertainty_factor=None if factor is None else in_table(factor, 1.0),
    )


def _prior_std_percent(settings: InversionSettings) -> float:
    if settings.prior != "correlated":
        return float("nan")
    return settings.starting_prior_std_percent


def _with_coverage(problem: Problem, outcome: Outcome) -> SlownessModel:
    """Add the number and the length of the rays in each block."""
    traced = outcome.traced
    paths = traced.rays.path_lengths[problem.rows.ray[traced.active]]
    blocks, shape = problem.model.grid.block_count, problem.model.grid.shape
    hits = np.bincount(paths.indices, minlength=blocks).astype(np.float64)
    length = np.bincount(paths.indices, weights=paths.data, minlength=blocks)
    return traced.model.with_fields(hits=hits.reshape(shape), ray_length_km=length.reshape(shape))


def _linear_parameters(
    problem: Problem, white: NDArray[np.float64]
) -> dict[str, NDArray[np.float64]]:
    parameters = {}
    start = problem.block_prior.size
    for group in problem.linear_groups:
        parameters[group.name] = group.prior.colour(white[start : start + group.size])
        start += group.size
    return parameters


def _station_terms(
    data: Residuals,
    problem: Problem,
    used: NDArray[np.bool_],
    terms: NDArray[np.float64] | None,
) -> dict[str, NDArray[np.float64]]:
    if terms is None:
        return {}
    layout = station_term_layout(problem.rows)
    labels = np.asarray(data.stations.labels).astype(str)
    phases = np.asarray(data.phase).astype(str)
    tables = {}
    for phase in np.unique(layout.phase).tolist():
        of_phase = layout.phase == phase
        term = dict(zip(layout.station[of_phase].tolist(), terms[of_phase], strict=True))
        with_picks = set(labels[data.station_index[used & (phases == phase)]].tolist())
        tables[phase] = np.array(
            [term[label] if label in with_picks else np.nan for label in labels.tolist()],
            dtype=np.float64,
        )
    return tables


def _mislocation(
    data: Residuals,
    problem: Problem,
    used: NDArray[np.bool_],
    shifts: NDArray[np.float64] | None,
) -> NDArray[np.float64]:
    names = np.asarray(data.events.event).astype(str)
    table = np.full((names.size, 3), np.nan)
    if shifts is None:
        return table
    column = {name: i for i, name in enumerate(np.unique(problem.rows.event).tolist())}
    for event in np.unique(data.event_index[used]).tolist():
        start = 3 * column[str(names[event])]
        table[event] = shifts[start : start + 3]
    return table


def _left_out_because(
    data: Residuals, problem: Problem, used: NDArray[np.bool_]
) -> NDArray[np.str_]:
    names = np.asarray(data.events.event).astype(str)[data.event_index]
    reasons = {(group.event, group.phase): group.reason for group in problem.left_out}
    keys = zip(names.tolist(), np.asarray(data.phase).astype(str).tolist(), strict=True)
    listed = [
        "" if in_use else reasons.get(key, _NO_RAY)
        for key, in_use in zip(keys, used.tolist(), strict=True)
    ]
    return np.array(listed, dtype=np.str_)

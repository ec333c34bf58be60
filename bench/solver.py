"""What speeds up the least-squares solution, and what does not, on traced rays."""

from __future__ import annotations

from itertools import pairwise
from pathlib import Path
from time import perf_counter
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array
from scipy.sparse.linalg import LinearOperator, lsqr
from threadpoolctl import threadpool_limits

from bench.inversion import THREADS, survey_of_truth
from bench.report import Report
from rayloom.inversion import (
    InversionSettings,
    LinearisedProblem,
    WhitenedSystem,
    group_standard_deviation,
    invert,
    linearise,
    solve,
)

Floats = NDArray[np.float64]
ERRORS = (1e-1, 1e-2, 1e-3)
MOST_STEPS = 1500
RAYS_TO_STAND_ALONE = 5


def run(*, quick: bool, output: Path) -> Report:
    """Measure warm starts, column scaling, merged blocks and errors of station terms."""
    shape, counts = ((22, 22, 10), (15, 20)) if quick else ((40, 40, 20), (50, 100))
    data, model, _ = survey_of_truth(list(shape), *counts)
    settings = InversionSettings(threads=THREADS, station_term_errors=False)
    result = invert(data, model, settings)
    problem = linearise(result, settings)
    report = Report(
        "Solutions of the last linear problem of an inversion",
        {
            "rows": problem.rows.count,
            "unknowns": problem.system.shape[1],
            "blocks": model.grid.block_count,
        },
    )
    with threadpool_limits(limits=1):
        exact = solve(
            problem.system, problem.right_hand_side, tolerance=1e-12, max_iterations=5000
        ).white
        _scaling(report, problem, exact)
        _warm_start(report, problem, exact)
        _merging(report, problem, exact)
        _term_errors(report, problem)
    return report


def _scaling(report: Report, problem: LinearisedProblem, exact: Floats) -> None:
    table = report.table(
        "Column scaling: steps of LSQR to a relative error of the unknowns",
        "columns",
        *(f"{error:g}" for error in ERRORS),
    )
    system = problem.system
    norms = _column_norms(system)
    ends = np.cumsum([0, *(group.size for group in system.groups)])
    per_group = np.empty_like(norms)
    for start, stop in pairwise(ends.tolist()):
        per_group[start:stop] = np.sqrt(np.mean(norms[start:stop] ** 2))
    for name, scale in (
        ("whitened by the prior", np.ones_like(norms)),
        ("each scaled to one", 1.0 / np.sqrt(norms**2 + 1.0)),
        ("one factor per group", 1.0 / np.sqrt(per_group**2 + 1.0)),
    ):
        table.add(name, *_steps_to_errors(problem, scale, np.zeros_like(exact), exact))


def _warm_start(report: Report, problem: LinearisedProblem, exact: Floats) -> None:
    table = report.table(
        "Warm start: steps to a relative error of the unknowns",
        "start off by",
        *(f"{error:g}" for error in ERRORS),
    )
    direction = np.random.default_rng(3).standard_normal(exact.size)
    direction *= np.linalg.norm(exact) / np.linalg.norm(direction)
    ones = np.ones_like(exact)
    table.add("100 % (zero)", *_steps_to_errors(problem, ones, np.zeros_like(exact), exact))
    for share in (0.1, 0.02):
        start = exact + share * direction
        table.add(f"{100 * share:g} %", *_steps_to_errors(problem, ones, start, exact))


def _merging(report: Report, problem: LinearisedProblem, exact: Floats) -> None:
    """Blocks that few rays cross, eight by eight, take the mean of the field."""
    table = report.table(
        f"Blocks merged eight by eight where each has fewer than {RAYS_TO_STAND_ALONE} rays",
        "blocks",
        "parameters",
        "values in G",
        "ms per product and adjoint",
        "steps to 0.001",
        "change of predicted data (%)",
    )
    shape = problem.model.grid.shape
    lengths = problem.system.groups[0].matrix
    hits = np.bincount(lengths.indices, minlength=lengths.shape[1]).reshape(shape)
    cell = _cells(hits)
    count = int(cell.max()) + 1
    mean = csr_array((1.0 / np.bincount(cell)[cell], (cell, np.arange(cell.size))))
    merge = csr_array((np.ones(cell.size), (np.arange(cell.size), cell)), shape=(cell.size, count))
    ones = np.ones_like(exact)
    prior = problem.system.groups[0].prior
    few = csr_array(lengths @ merge)
    alone = [lambda x: lengths @ x, lambda y: lengths.T @ y]
    merged = [lambda x: few @ (mean @ x), lambda y: mean.T @ (few.T @ y)]
    reference = problem.system.groups[0].matrix @ prior.colour(exact[: prior.size])
    together = few @ (mean @ prior.colour(exact[: prior.size]))
    steps = _steps_to_errors(problem, ones, np.zeros_like(exact), exact)[-1]
    change = 100.0 * np.linalg.norm(together - reference) / np.linalg.norm(reference)
    table.add("each", cell.size, lengths.nnz, _milliseconds(alone, lengths.shape), steps, 0.0)
    table.add("merged", count, few.nnz, _milliseconds(merged, lengths.shape), steps, change)
    report.remarks.append(
        "Merging leaves the whitened unknowns, and so the steps, as they are: it only shortens "
        "the rows of G, while colouring the whole field and averaging it are still to be done."
    )


def _term_errors(report: Report, problem: LinearisedProblem) -> None:
    table = report.table("Standard errors of all station terms", "terms", "wall (s)")
    start = perf_counter()
    terms = group_standard_deviation(problem.system, "station_terms")
    table.add(terms.size, perf_counter() - start)


def _steps_to_errors(
    problem: LinearisedProblem, scale: Floats, start: Floats, exact: Floats
) -> list[int | str]:
    """Count the steps of LSQR on [Ã; I] diag(scale) to each error."""
    system = problem.system
    rows, unknowns = system.shape
    operator = LinearOperator(
        shape=(rows + unknowns, unknowns),
        matvec=lambda y: np.append(system.times(scale * y.ravel()), scale * y.ravel()),
        rmatvec=lambda u: scale * (system.transposed_times(u.ravel()[:rows]) + u.ravel()[rows:]),
        dtype=np.float64,
    )
    target = np.append(problem.right_hand_side - system.times(start), -start)

    def error(steps: int) -> float:
        found = lsqr(operator, target, atol=0.0, btol=0.0, conlim=0.0, iter_lim=steps)[0]
        return float(np.linalg.norm(start + scale * found - exact) / np.linalg.norm(exact))

    return [_first(error, wanted) for wanted in ERRORS]


def _first(error: Any, wanted: float) -> int | str:
    """Find the least number of steps within an error, to one in twenty, by halving."""
    if error(1) <= wanted:
        return 1
    low, high = 1, 16
    while error(high) > wanted:
        low, high = high, 2 * high
        if high > MOST_STEPS:
            return f"> {low}"
    while high - low > max(1, high // 20):
        middle = (low + high) // 2
        low, high = (low, middle) if error(middle) <= wanted else (middle, high)
    return high


def _column_norms(system: WhitenedSystem) -> Floats:
    """Norm of each column of Ã, from 400 random signs: within 10 % (Bekas et al. 2007)."""
    random = np.random.default_rng(5)
    total = np.zeros(system.shape[1])
    for _ in range(400):
        total += system.transposed_times(random.choice([-1.0, 1.0], size=system.shape[0])) ** 2
    return np.asarray(np.sqrt(total / 400))


def _cells(hits: NDArray[np.int64]) -> NDArray[np.int64]:
    """Give two by two by two blocks one number where all have few rays, else each its own."""
    indices = np.indices(hits.shape)
    coarse_shape = tuple(-(-size // 2) for size in hits.shape)
    coarse = np.ravel_multi_index(tuple(indices // 2), coarse_shape)
    most = np.zeros(np.prod(coarse_shape), dtype=np.int64)
    np.maximum.at(most, coarse.ravel(), hits.ravel())
    apart = most[coarse] >= RAYS_TO_STAND_ALONE
    label = np.where(apart, most.size + np.arange(hits.size).reshape(hits.shape), coarse)
    return np.unique(label.ravel(), return_inverse=True)[1]


def _milliseconds(products: list[Any], shape: tuple[int, int]) -> float:
    x, y = np.ones(shape[1]), np.ones(shape[0])
    times = []
    for _ in range(7):
        start = perf_counter()
        products[0](x)
        products[1](y)
        times.append(perf_counter() - start)
    return 1e3 * float(np.median(times))

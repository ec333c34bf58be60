"""What the trade-off recommends, for truths drawn from a prior: error against the least possible.

Reference rays of an invented survey; each truth is drawn from the prior of known strength and
length, its data are exactly linear, with Gaussian noise. The error of the model recommended is
set beside the least error among all priors tried, which only hindsight finds.
"""

from __future__ import annotations

from dataclasses import replace
from functools import partial
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

import rayloom as rl
from bench.inversion import BLOCK_KM, DISTANCES_DEG, THREADS, residual_table
from bench.models import box_grid
from bench.report import Bar, Report
from bench.stopwatch import clock
from bench.surveys import distant_events, network
from rayloom.forward import trace_distant
from rayloom.inversion import (
    InversionSettings,
    LinearisedProblem,
    block_prior,
    invert,
    linearise,
)
from rayloom.inversion.tradeoff import (
    Accuracy,
    MarginalSystem,
    TradeoffSettings,
    bidiagonalise,
    prior_settings,
    sweep,
)

Floats = NDArray[np.float64]
STD_PERCENT, LENGTH_KM = 1.0, 60.0
TRUTHS = 10
CLOSE = 1.1
TRIED = TradeoffSettings(
    prior_std_percent=(0.35, 0.5, 0.7, 1.0, 1.4, 2.0, 2.8),
    correlation_km=((30.0, 30.0), (60.0, 60.0), (120.0, 120.0)),
)


def run(*, quick: bool, output: Path) -> Report:
    """Measure the errors and the time of a sweep."""
    stations, events = (30, 40) if quick else (60, 100)
    problem, settings = linear_problem(stations, events)
    report = Report(
        "Trade-off: truths drawn from a prior",
        {
            "residuals": stations * events,
            "blocks": problem.model.grid.block_count,
            "true standard deviation (%)": STD_PERCENT,
            "true correlation length (km)": LENGTH_KM,
            "priors tried": len(TRIED.prior_std_percent) * 3,
            "threads": THREADS,
        },
    )
    table = report.table(
        "Error of the model recommended over the least of all priors tried",
        "truth",
        "recommended (%)",
        "recommended (km)",
        "ratio over blocks with rays",
        "ratio over all blocks",
        "equally good priors",
        "wall (s)",
        "CPU (s)",
    )
    close = 0
    for seed in range(1, TRUTHS + 1):
        drawn, truth = draw(problem, settings, seed)
        wall_s, cpu_s, found = clock(partial(sweep, drawn, settings, TRIED))
        ratios = error_ratios(drawn, settings, truth, found.model.perturbation_percent)
        close += ratios[1] <= CLOSE
        row = found.recommended
        table.add(
            seed,
            row.prior_std_percent,
            row.correlation_horizontal_km,
            *ratios,
            len(found.equally_good),
            wall_s,
            cpu_s,
        )
    report.bars.append(
        Bar(f"truths of {TRUTHS} with a ratio of at most {CLOSE}", float(close), 9.0, True)
    )
    return report


def linear_problem(stations: int, events: int) -> tuple[LinearisedProblem, InversionSettings]:
    """Trace reference rays and freeze them; the data are replaced later."""
    earth = rl.ReferenceEarth("ak135")
    grid = box_grid((28, 28, 12), BLOCK_KM, sphere=True, top_km=-3.0)
    model = rl.SlownessModel.from_earth(grid, earth)
    places = network(grid.frame, stations, (1.2, 1.2), seed=71)
    sources = distant_events(grid.frame, events, DISTANCES_DEG, seed=72)
    rays = trace_distant(model, earth, sources, places, threads=THREADS)
    kept = np.flatnonzero(rays.traced)
    noise_s = np.random.default_rng(73).normal(0.0, 0.05, kept.size)
    data = residual_table(rays, kept, noise_s, (earth, sources, places))
    settings = InversionSettings(
        method="reference",
        robust="none",
        prior_std_percent=STD_PERCENT,
        correlation_km=(LENGTH_KM, LENGTH_KM),
        trace_probes=0,
        station_term_errors=False,
        threads=THREADS,
    )
    return linearise(invert(data, model, settings), settings), settings


def draw(
    problem: LinearisedProblem, settings: InversionSettings, seed: int
) -> tuple[LinearisedProblem, Floats]:
    """Draw all unknowns from their priors, and noise; return the data and the truth, percent."""
    random = np.random.default_rng(seed)
    white = random.standard_normal(problem.system.shape[1])
    noise_s = random.standard_normal(problem.rows.count) * problem.rows.uncertainty_s
    target_s = problem.system.seconds(white) + noise_s
    return replace(problem, target_s=target_s), problem.perturbation_percent(white)


def error_ratios(
    problem: LinearisedProblem, settings: InversionSettings, truth: Floats, found: Floats
) -> tuple[float, float]:
    """Error of a model over the least of all priors, over blocks with rays and over all."""
    volumes = np.broadcast_to(problem.model.grid.volumes_km3, truth.shape)
    crossed = np.zeros(truth.size, dtype=bool)
    crossed[problem.system.groups[0].matrix.indices] = True
    weights = [volumes * crossed.reshape(truth.shape), volumes]

    def errors(percent: Floats) -> list[float]:
        return [float(np.sqrt(np.sum(w * (percent - truth) ** 2))) for w in weights]

    every = np.array([errors(percent) for percent in all_models(problem, settings)])
    ratios = np.array(errors(found)) / every.min(axis=0)
    return float(ratios[0]), float(ratios[1])


def all_models(problem: LinearisedProblem, settings: InversionSettings) -> list[Floats]:
    """Estimates under every prior tried, percent."""
    whole = MarginalSystem.of_system(problem.system, threads=THREADS)
    accuracy, models = Accuracy(), []
    for pair in TRIED.lengths_km((LENGTH_KM, LENGTH_KM)):
        prior = block_prior(problem.model.grid, prior_settings(settings, 1.0, pair))
        system = whole.with_prior(prior)
        basis = bidiagonalise(
            system,
            system.right_hand_side(problem.target_s),
            damping=1.0 / max(TRIED.prior_std_percent),
            tolerance=accuracy.tolerance,
            max_steps=accuracy.max_steps,
        )
        for std in TRIED.prior_std_percent:
            final = system.final_residual(basis.residual(1.0 / std))
            fractional = system.blocks.parameters(system.unknowns(final, damping=1.0 / std))[0]
            percent = 100.0 * (1.0 / (1.0 + fractional) - 1.0)
            models.append(percent.reshape(problem.model.grid.shape))
    return models

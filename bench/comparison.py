"""Straight, reference and bent rays at equal χ², on times of a known structure.

A slow column and a fast body of equal strength; their times are traced on blocks finer
than those inverted and turned against them. What each kind of rays recovers is set
beside the truth as the data resolve it: the truth after the resolution filter of bent rays.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

import rayloom as rl
from bench.inversion import DISTANCES_DEG, THREADS, residual_table
from bench.models import box_grid
from bench.report import Bar, Report
from bench.surveys import distant_events, network
from rayloom.appraisal.bodies import relative_to_layers
from rayloom.forward import Rays, trace_distant
from rayloom.inversion import InversionResult, InversionSettings, invert, linearise, solve
from rayloom.inversion.comparison import RayInversion, compare_rays
from rayloom.survey import Events, Stations
from rayloom.units import KM_PER_DEGREE

Floats = NDArray[np.float64]
PERCENT = 3.0
NOISE_S = 0.05
BLOCK_KM, FINE_KM = 20.0, 13.0
TURN_DEG = 24.0
LEAST_DELAY_S = 0.05
USABLE_HITS = 5
COLUMN_SHARE = 0.9


@dataclass(frozen=True)
class Structure:
    """Two bodies, each of one strength, whose edges fall off over about a block.

    Attributes
    ----------
    slow, fast : float
        Perturbations of the column and of the body, percent.
    """

    slow: float
    fast: float

    def percent(self, east_km: Floats, north_km: Floats, depth_km: Floats) -> Floats:
        """Velocity perturbation at places."""
        lean = np.clip((depth_km - 50.0) / 150.0, 0.0, 1.0)
        column = np.hypot(east_km + 70.0 - 40.0 * lean, north_km + 30.0) / 40.0
        inside = 1.0 / (1.0 + np.exp(-(depth_km - 50.0) / 6.0))
        inside = inside / (1.0 + np.exp((depth_km - 200.0) / 6.0))
        body = np.sqrt(
            ((east_km - 80.0) / 55.0) ** 2
            + ((north_km - 40.0) / 55.0) ** 2
            + ((depth_km - 125.0) / 60.0) ** 2
        )
        return np.asarray(
            self.slow * inside * np.exp2(-(column**6)) + self.fast * np.exp2(-(body**6))
        )


BOTH = Structure(-PERCENT, PERCENT)


def run(*, quick: bool, output: Path) -> Report:
    """Measure what each kind of rays recovers."""
    stations, events = (25, 36) if quick else (50, 80)
    report = Report(
        "Straight, reference and bent rays at equal χ²",
        {
            "residuals": stations * events,
            "noise (s)": NOISE_S,
            "bodies (%)": f"-{PERCENT:g} and +{PERCENT:g}",
            "blocks inverted (km)": BLOCK_KM,
            "blocks of the times (km)": FINE_KM,
            "threads": THREADS,
        },
    )
    case = Case.of(stations, events)
    settings = InversionSettings(threads=THREADS, mislocation=False, max_iterations=6)
    result = invert(case.data, case.model, settings)
    entries = compare_rays(result, settings)
    shares = _table_of_rays(report, case, result, settings, entries)
    _table_of_asymmetry(report, case)
    slow = {entry.method: share[0] for entry, share in zip(entries, shares, strict=True)}
    report.bars += [
        Bar("column by bent rays over its resolvable amplitude", slow["bent"], COLUMN_SHARE, True),
        Bar(
            "column by straight rays over that by bent rays", slow["straight"] / slow["bent"], 1.0
        ),
        *(
            Bar(f"χ² per row of {entry.method} rays over that of bent rays, less 1", off, 0.02)
            for entry, off in zip(entries, _chi2_differences(entries), strict=True)
        ),
    ]
    return report


@dataclass(frozen=True)
class Case:
    """A survey of a known structure.

    Attributes
    ----------
    data : Residuals
        Times of the fine truth less those of the fine reference, with noise.
    model : SlownessModel
        Reference on the blocks inverted.
    fine : SlownessModel
        Reference on the fine blocks.
    events, stations : Events and Stations
        The survey.
    """

    data: rl.Residuals
    model: rl.SlownessModel
    fine: rl.SlownessModel
    events: Events
    stations: Stations

    @classmethod
    def of(cls, stations: int, events: int) -> Case:
        """Trace the truth."""
        earth = rl.ReferenceEarth("ak135")
        grid = box_grid((32, 32, 12), BLOCK_KM, sphere=True, top_km=-3.0)
        turned = box_grid((52, 52, 19), FINE_KM, sphere=True, top_km=-3.0)
        frame = rl.Frame(
            longitude=grid.frame.longitude_deg,
            latitude=grid.frame.latitude_deg,
            azimuth_deg=grid.frame.azimuth_deg + TURN_DEG,
        )
        fine = rl.SlownessModel.from_earth(
            rl.BlockGrid(frame, turned.x_edges, turned.y_edges, turned.depth_edges_km), earth
        )
        places = network(grid.frame, stations, (1.4, 1.4), seed=91)
        sources = distant_events(grid.frame, events, DISTANCES_DEG, seed=92)
        reference = _traced(fine, sources, places, "bent")
        true = _traced(with_structure(fine, grid.frame, BOTH), sources, places, "bent")
        kept = np.flatnonzero(reference.traced & true.traced)
        noise_s = np.random.default_rng(93).normal(0.0, NOISE_S, kept.size)
        delay_s = (true.time_s - reference.time_s)[kept]
        data = residual_table(reference, kept, delay_s + noise_s, (earth, sources, places))
        return cls(data, rl.SlownessModel.from_earth(grid, earth), fine, sources, places)


def with_structure(
    model: rl.SlownessModel, frame: rl.Frame, structure: Structure
) -> rl.SlownessModel:
    """Put a structure, laid out in km about a frame's centre, on any blocks."""
    centres = model.grid.centres
    x, y = frame.local_coordinates(
        *model.grid.frame.geographic_coordinates(centres[:, 0], centres[:, 1])
    )
    percent = structure.percent(
        KM_PER_DEGREE * np.asarray(x), KM_PER_DEGREE * np.asarray(y), centres[:, 2]
    )
    return model.with_slowness(model.reference / (1.0 + percent.reshape(model.grid.shape) / 100.0))


def _traced(model: rl.SlownessModel, events: Events, stations: Stations, method: Any) -> Rays:
    return trace_distant(
        model, rl.ReferenceEarth("ak135"), events, stations, method=method, threads=THREADS
    )


def _chi2_differences(entries: tuple[RayInversion, ...]) -> list[float]:
    per_row = [entry.chi2 / entry.data_count for entry in entries]
    return [abs(value / per_row[-1] - 1.0) for value in per_row]


def _table_of_rays(
    report: Report,
    case: Case,
    result: InversionResult,
    settings: InversionSettings,
    entries: tuple[RayInversion, ...],
) -> list[tuple[float, float]]:
    """Share of the resolvable amplitude that each kind of rays recovers."""
    grid = case.model.grid
    usable = result.model.fields["hits"] >= USABLE_HITS
    truth = with_structure(case.model, grid.frame, BOTH)
    resolvable = relative_to_layers(grid, _resolvable(result, settings, truth), usable)
    percent = truth.perturbation_percent
    bodies = [usable & (sign * percent >= 0.5 * PERCENT) for sign in (-1, 1)]
    table = report.table(
        "What each kind of rays recovers",
        "rays",
        "prior (%)",
        "χ² per row",
        "rms (ms)",
        "variance reduction (%)",
        "column over resolvable",
        "body over resolvable",
        "correlation with the truth",
        "seconds",
    )
    shares = []
    for entry in entries:
        found = relative_to_layers(grid, entry.model.perturbation_percent, usable)
        share = [
            float(found[body] @ resolvable[body] / (resolvable[body] @ resolvable[body]))
            for body in bodies
        ]
        shares.append((share[0], share[1]))
        table.add(
            entry.method,
            entry.prior_std_percent,
            entry.chi2 / entry.data_count,
            1e3 * entry.rms_s,
            entry.variance_reduction_percent,
            *share,
            float(np.corrcoef(found[usable], percent[usable])[0, 1]),
            entry.seconds,
        )
    means = [float(np.mean(resolvable[body]) / np.mean(percent[body])) for body in bodies]
    report.remarks.append(
        f"Of the true amplitude the data resolve {means[0]:.2f} in the column and "
        f"{means[1]:.2f} in the body (mean over their blocks, relative to the layers)."
    )
    return shares


def _resolvable(
    result: InversionResult, settings: InversionSettings, truth: rl.SlownessModel
) -> Floats:
    """Filter the truth as bent rays without noise would show it, percent."""
    linear = linearise(result, settings)
    fractional = (truth.slowness_s_per_km / truth.reference).ravel() - 1.0
    seconds = linear.system.groups[0].matrix @ fractional
    found = solve(
        linear.system, linear.system.whiten_rows(seconds), tolerance=1e-6, max_iterations=2000
    )
    return linear.perturbation_percent(found.white)


def _table_of_asymmetry(report: Report, case: Case) -> None:
    """Delays of each body alone: bent rays against rays that stay where they were."""
    table = report.table(
        "Delay by bent rays over that by the rays of the reference (Fermat)",
        "body",
        "rays delayed by 50 ms or more",
        "ratio of delays",
        "largest delay by reference rays (s)",
    )
    frame = case.model.grid.frame
    still = _traced(case.fine, case.events, case.stations, "bent")
    for name, structure in (
        ("slow column", Structure(-PERCENT, 0.0)),
        ("fast body", Structure(0.0, PERCENT)),
    ):
        model = with_structure(case.fine, frame, structure)
        bent_s = _traced(model, case.events, case.stations, "bent").time_s - still.time_s
        first_s = still.predict_s(model.slowness_s_per_km) - still.time_s
        much = np.abs(np.nan_to_num(first_s)) >= LEAST_DELAY_S
        much &= np.isfinite(bent_s)
        ratio = float(bent_s[much] @ first_s[much] / (first_s[much] @ first_s[much]))
        table.add(name, int(much.sum()), ratio, float(np.max(np.abs(first_s[much]))))

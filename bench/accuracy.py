"""Times against exact ones in homogeneous, layered and gradient models."""

from __future__ import annotations

from pathlib import Path

import numpy as np
from numpy.typing import NDArray

import rayloom as rl
from bench.closed_forms import gradient_s, homogeneous_s, layers_s
from bench.errors import ERROR_COLUMNS, ErrorSummary, summarise
from bench.models import KM_PER_DEGREE, box_grid, layered, random_points
from bench.report import Report, Table
from rayloom.forward import trace

Floats = NDArray[np.float64]
QUALITIES = ("standard", "thorough")
SURFACE_KM_S, GRADIENT_PER_S = 5.8, 0.01


def run(*, quick: bool, output: Path) -> Report:
    """Measure the errors of both quality levels."""
    count = 8 if quick else 24
    report = Report("Accuracy against exact times", {"rays per line": count * count})
    table = report.table(
        "Errors", "model", "exact for", "block (km)", "quality", "rays", *ERROR_COLUMNS
    )
    for quality in QUALITIES:
        _homogeneous(report, table, quality, count, sphere=False)
        _homogeneous(report, table, quality, count, sphere=True)
        _two_layers(report, table, quality, count)
        _gradient_in_blocks(report, table, quality, count)
    _convergence(report, table, count, (20.0, 10.0) if quick else (20.0, 10.0, 5.0))
    return report


def _homogeneous(report: Report, table: Table, quality: str, count: int, *, sphere: bool) -> None:
    grid = box_grid((40, 30, 20), 15.0, sphere=sphere)
    model = layered(grid, lambda depth: np.full_like(depth, 8.0))
    sources = random_points(grid, count, (1.0, 299.0), seed=1)
    receivers = random_points(grid, count, (0.0, 299.0), seed=2)
    rays = trace(model, sources, receivers, quality=quality)
    place = _cartesian if sphere else np.asarray
    errors = summarise(rays.time_s, homogeneous_s(place(sources), place(receivers), 8.0))
    where = "sphere" if sphere else "flat"
    _line(table, f"homogeneous, {where}", "blocks", 15.0, quality, errors, count)
    report.at_most(f"homogeneous, {where}, {quality}: max (ms)", errors.maximum, 0.05)


def _cartesian(points: Floats) -> Floats:
    longitude, latitude = np.radians(points[:, :2]).T
    radius = KM_PER_DEGREE * 180.0 / np.pi - points[:, 2]
    directions = [
        np.cos(latitude) * np.cos(longitude),
        np.cos(latitude) * np.sin(longitude),
        np.sin(latitude),
    ]
    return np.asarray((radius * directions).T)


def _two_layers(report: Report, table: Table, quality: str, count: int) -> None:
    x, y = np.arange(41) * 15.0, np.arange(21) * 15.0
    depth = np.array([0.0, 17.5, 35.0, 52.5, 70.0, 87.5, 105.0])
    model = layered(
        rl.BlockGrid(rl.Frame.flat(), x, y, depth), lambda z: np.where(z < 35.0, 6.0, 8.0)
    )
    errors = _against_layers(model, quality, count, source_depths_km=(0.0, 34.0))
    _line(table, "two layers, 6 and 8 km/s", "blocks", 15.0, quality, errors, count)
    for what, measured, limit in (
        ("mean", errors.mean, 2.0),
        ("p95", errors.p95, 10.0),
        ("max", errors.maximum, 60.0),
    ):
        report.at_most(f"two layers, {quality}: {what} (ms)", measured, limit)


def _gradient_in_blocks(report: Report, table: Table, quality: str, count: int) -> None:
    model = layered(box_grid((40, 30, 20), 15.0), _gradient)
    errors = _against_layers(model, quality, count, source_depths_km=(100.0, 299.0))
    _line(table, "linear gradient", "blocks", 15.0, quality, errors, count)
    limits = (3.0, 15.0) if quality == "standard" else (1.5, 7.5)
    report.at_most(f"gradient, {quality}: mean (ms)", errors.mean, limits[0])
    report.at_most(f"gradient, {quality}: p95 (ms)", errors.p95, limits[1])


def _against_layers(
    model: rl.SlownessModel, quality: str, count: int, source_depths_km: tuple[float, float]
) -> ErrorSummary:
    grid = model.grid
    sources = random_points(grid, count, source_depths_km, seed=3)
    receivers = random_points(grid, count, (0.0, 0.0), seed=4)
    rays = trace(model, sources, receivers, quality=quality)
    column = model.slowness_s_per_km[0, 0]
    return summarise(rays.time_s, layers_s(sources, receivers, grid.depth_edges_km, column))


def _convergence(report: Report, table: Table, count: int, blocks_km: tuple[float, ...]) -> None:
    means = []
    for block_km in blocks_km:
        shape = tuple(round(length / block_km) for length in (300.0, 100.0, 200.0))
        grid = box_grid(shape, block_km)
        sources = random_points(grid, count, (100.0, 199.0), seed=5)
        receivers = random_points(grid, count, (0.0, 0.0), seed=6)
        rays = trace(layered(grid, _gradient), sources, receivers, quality="thorough")
        exact = gradient_s(sources, receivers, SURFACE_KM_S, GRADIENT_PER_S)
        errors = summarise(rays.time_s, exact)
        means.append(errors.mean)
        _line(table, "linear gradient", "continuum", block_km, "thorough", errors, count)
    order = np.polyfit(np.log(blocks_km), np.log(means), 1)[0]
    report.remarks.append(f"Order of convergence to the continuous gradient: {order:.2f}.")


def _gradient(depth_km: Floats) -> Floats:
    return SURFACE_KM_S + GRADIENT_PER_S * depth_km


def _line(
    table: Table,
    model: str,
    exact_for: str,
    block_km: float,
    quality: str,
    errors: ErrorSummary,
    count: int,
) -> None:
    table.add(model, exact_for, block_km, quality, count * count, *errors.cells())

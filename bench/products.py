"""Products with the matrix of path lengths against scipy's and the copy bandwidth."""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array, vstack

from bench.models import box_grid, layered, mantle_like, random_points
from bench.report import Report, Table
from bench.stopwatch import Lap, race
from rayloom._core import SparseProducts
from rayloom.forward import trace

Floats = NDArray[np.float64]
THREADS = 2
BYTES_PER_VALUE = {"rayloom": 8 + 4, "rayloom float32": 4 + 4, "scipy": 8 + 4}
COPY_MIB = 512


def run(*, quick: bool, output: Path) -> Report:
    """Measure matrices of straight rays, from cache size to far beyond it."""
    rays, copies = ((40, 60), (1,)) if quick else ((120, 300), (1, 10, 30))
    matrix = _path_lengths(*rays)
    report = Report(
        "G x and its adjoint on two threads", {"blocks": "75 × 50 × 40", "threads": THREADS}
    )
    table = report.table(
        "Products",
        "product",
        "rays",
        "stored values (million)",
        "matrix (MiB)",
        "program",
        "wall (ms)",
        "CPU (ms)",
        "bandwidth (GB/s)",
        "share of copy (%)",
        "scipy's wall over this",
        "relative difference from scipy",
    )
    for times in copies:
        stacked = csr_array(vstack([matrix] * times, format="csr"))
        _one_matrix(report, table, stacked, quick=quick)
    report.remarks += [
        "Bandwidth counts the matrix's values and column indices once, 12 bytes each (8 with "
        "float32 values); that of "
        f"copying counts bytes read and written by {THREADS} threads, "
        f"{64 if quick else COPY_MIB} MiB each way.",
        "Large matrices are the smallest one several times below itself. A matrix is out of "
        "cache only if it exceeds the last-level cache of the machine.",
    ]
    return report


def _one_matrix(report: Report, table: Table, matrix: csr_array, *, quick: bool) -> None:
    random = np.random.default_rng(61)
    x, y = random.standard_normal(matrix.shape[1]), random.standard_normal(matrix.shape[0])
    own, single = (
        SparseProducts(
            matrix.indptr.astype(np.int64),
            matrix.indices.astype(np.int32),
            matrix.data.astype(dtype),
            matrix.shape[1],
            threads=THREADS,
        )
        for dtype in (np.float64, np.float32)
    )
    laps = race(
        {
            "copy": _copy(64 if quick else COPY_MIB),
            "G x, rayloom": lambda: own.times(x),
            "G x, rayloom float32": lambda: single.times(x),
            "G x, scipy": lambda: matrix @ x,
            "Gᵀ y, rayloom": lambda: own.transposed_times(y),
            "Gᵀ y, rayloom float32": lambda: single.transposed_times(y),
            "Gᵀ y, scipy": lambda: matrix.T @ y,
        },
        repeats=7,
    )
    copied = 2.0 * (64 if quick else COPY_MIB) * 2**20
    copy_gb_s = copied / laps["copy"].timing.wall / 1e9
    for product in ("G x", "Gᵀ y"):
        _lines(report, table, product, matrix, laps, copy_gb_s)


def _lines(
    report: Report,
    table: Table,
    product: str,
    matrix: csr_array,
    laps: dict[str, Lap],
    copy_gb_s: float,
) -> None:
    theirs = laps[f"{product}, scipy"]
    moved = {program: matrix.nnz * width for program, width in BYTES_PER_VALUE.items()}
    for program in moved:
        size = matrix.shape[0], matrix.nnz / 1e6, moved[program] / 2**20
        lap = laps[f"{product}, {program}"]
        speed = moved[program] / lap.timing.wall / 1e9
        difference = np.abs(lap.result - theirs.result).max() / np.abs(theirs.result).max()
        table.add(
            product,
            *size,
            program,
            1e3 * lap.timing.wall,
            1e3 * lap.timing.cpu,
            speed,
            100.0 * speed / copy_gb_s,
            theirs.timing.wall / lap.timing.wall,
            float(difference),
        )
    own = laps[f"{product}, rayloom"].timing
    label = f"{product}, {moved['rayloom'] / 2**20:.0f} MiB"
    report.at_least(f"{label}: faster than scipy", theirs.timing.wall / own.wall, 1.5)
    share = 100.0 * moved["rayloom"] / own.wall / 1e9 / copy_gb_s
    report.at_least(f"{label}: share of the copy bandwidth (%)", share, 50.0)


def _path_lengths(stations: int, deep: int) -> csr_array:
    grid = box_grid((75, 50, 40), 15.0)
    model = layered(grid, mantle_like)
    below = random_points(grid, deep, (560.0, 599.0), seed=62)
    above = random_points(grid, stations, (0.5, 0.5), seed=63)
    return trace(model, below, above, method="straight").path_lengths


def _copy(mebibytes: int) -> Callable[[], None]:
    source = np.ones(mebibytes * 2**17)
    target = np.zeros_like(source)
    halves = list(
        zip(np.array_split(target, THREADS), np.array_split(source, THREADS), strict=True)
    )
    pool = ThreadPoolExecutor(THREADS)

    def copy() -> None:
        list(pool.map(lambda pair: np.copyto(*pair), halves))

    return copy

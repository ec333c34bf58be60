"""Graph search against general graph libraries on explicit graphs."""

from __future__ import annotations

import subprocess
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from statistics import median
from typing import Any

import numpy as np
from numpy.typing import NDArray

import rayloom as rl
from bench.explicit_graph import ExplicitGraph, NodeSet, build
from bench.graph_libraries import LIBRARIES, available
from bench.isolation import run_isolated
from bench.models import box_grid, layered, mantle_like, roughened
from bench.report import Report, Table, join
from bench.stopwatch import Lap, race
from rayloom.forward import trace

Floats = NDArray[np.float64]
BLOCK_KM = 15.0
RECEIVERS = 300
OWN = f"rayloom, {RECEIVERS} rays"
OWN_SEARCH = "rayloom, 1 ray"


@dataclass(frozen=True)
class Case:
    """A model size, a node set and the libraries that can hold its graph."""

    title: str
    shape: tuple[int, int, int]
    node_set: NodeSet
    libraries: tuple[str, ...]


EVERYONE = tuple(LIBRARIES)
FULL = (
    Case("Default node set, 43,000 blocks", (43, 40, 25), "all", ("scipy", "networkit")),
    Case("Default node set, all libraries", (20, 20, 20), "all", EVERYONE),
    Case("Twelve face nodes per block for the libraries", (43, 40, 25), "faces", EVERYONE),
)
QUICK = (
    Case("Default node set, all libraries", (8, 8, 8), "all", EVERYONE),
    Case("Twelve face nodes per block for the libraries", (12, 12, 12), "faces", EVERYONE),
)


def run(*, quick: bool, output: Path) -> Report:
    """Race rayloom's graph method with the libraries on one thread."""
    report = Report(
        "Graph search, one source, one thread",
        {"block (km)": BLOCK_KM, "receivers": RECEIVERS, "face_nodes": 2},
    )
    present, missing = available()
    for case in QUICK if quick else FULL:
        _one_case(report, case, [name for name in case.libraries if name in present])
    _plain_reference(report, (12, 12, 12) if quick else FULL[0].shape)
    report.remarks += [
        f"Not installed and left out: {join(missing)} (optional extra `bench`).",
        "Library times are the search alone, on a graph already built; rayloom's are the "
        "whole call, with its node numbering and the rays of its receivers, lengths included. "
        "With one receiver nearly all of it is the search, which covers the whole model.",
        "rayloom has no node set of faces alone: where the libraries search the smaller graph "
        "of twelve face nodes per block, rayloom searches its default, larger one.",
        "rustworkx and igraph take part on graphs of up to some 12 million links, "
        "which they hold in a few GiB.",
    ]
    return report


def _plain_reference(report: Report, shape: tuple[int, int, int]) -> None:
    """Race the search with a plain bucket Dijkstra of our own, compiled alike."""
    command = ["cargo", "bench", "--quiet", "--bench", "plain_dijkstra", "--", *map(str, shape)]
    root = Path(__file__).parent.parent
    done = subprocess.run(command, stdout=subprocess.PIPE, text=True, check=True, cwd=root)
    runs = [[float(word) for word in line.split()] for line in done.stdout.splitlines()]
    table = report.table(
        f"Own plain bucket Dijkstra on the same nodes, {int(np.prod(shape)):,} blocks",
        "run",
        "plain Dijkstra, wall (s)",
        "rayloom's search, wall (s)",
        "plain over rayloom",
        "largest difference of times (s)",
    )
    for number, (plain_s, own_s, difference_s) in enumerate(runs, start=1):
        table.add(number, plain_s, own_s, plain_s / own_s, difference_s)
    faster = median(plain_s / own_s for plain_s, own_s, _ in runs)
    report.at_least("own plain bucket Dijkstra over rayloom's search (wall)", faster, 8.0)


def rough_model(shape: tuple[int, int, int]) -> rl.SlownessModel:
    """Return the model that is searched."""
    return roughened(layered(box_grid(shape, BLOCK_KM), mantle_like), "independent", 5.0, seed=41)


def ends(shape: tuple[int, int, int]) -> tuple[Floats, Floats]:
    """Return a source at a corner of a middle block and receivers at other block corners."""
    random = np.random.default_rng(42)
    source = np.array([[count // 2 for count in shape]]) * BLOCK_KM
    corners = random.integers(0, np.array(shape) + 1, (RECEIVERS, 3)) * BLOCK_KM
    return source, corners


def _one_case(report: Report, case: Case, libraries: list[str]) -> None:
    model = rough_model(case.shape)
    source, receivers = ends(case.shape)
    graph = build(model.slowness_s_per_km, BLOCK_KM, case.node_set)
    start = int(graph.nearest(source)[0])
    contenders: dict[str, Callable[[], Any]] = {
        OWN: lambda: _trace(model, source, receivers),
        OWN_SEARCH: lambda: _trace(model, source, receivers[:1]),
    }
    for name in libraries:
        contenders[name] = _bound(LIBRARIES[name](graph), start)
    laps = race(contenders)
    table = report.table(
        f"{case.title}: {model.grid.block_count:,} blocks, {graph.node_count:,} nodes, "
        f"{graph.link_count:,} links",
        "program",
        "wall (s)",
        "CPU (s)",
        "slowest / fastest",
        f"CPU / {OWN}",
        f"CPU / {OWN_SEARCH}",
        "largest difference of times (s)",
    )
    for name, lap in laps.items():
        _line(table, name, lap, laps, _difference(case, graph, receivers, laps, name))
    _bars(report, case, graph, laps)


def _bound(search: Callable[[int], Floats], start: int) -> Callable[[], Floats]:
    return lambda: search(start)


def _trace(model: rl.SlownessModel, source: Floats, receivers: Floats) -> Floats:
    rays = trace(model, source, receivers, method="graph", face_nodes=2, threads=1)
    return rays.time_s


def _difference(
    case: Case, graph: ExplicitGraph, receivers: Floats, laps: dict[str, Lap], name: str
) -> float | None:
    """Return the largest difference from rayloom at the receivers, for equal node sets."""
    if name.startswith("rayloom") or case.node_set != "all":
        return None
    times = laps[name].result[graph.nearest(receivers)]
    return float(np.abs(times - laps[OWN].result).max())


def _line(
    table: Table, name: str, lap: Lap, laps: dict[str, Lap], difference: float | None
) -> None:
    timing = lap.timing
    ratios = (timing.cpu / laps[own].timing.cpu for own in (OWN, OWN_SEARCH))
    table.add(name, timing.wall, timing.cpu, timing.spread, *ratios, difference)


def _bars(report: Report, case: Case, graph: ExplicitGraph, laps: dict[str, Lap]) -> None:
    blocks = int(np.prod(case.shape))
    label = f"{case.node_set} nodes, {blocks:,} blocks"
    other = laps["scipy"].timing
    for own in (OWN, OWN_SEARCH):
        faster = other.cpu / laps[own].timing.cpu
        report.at_least(f"{label}: CPU time of scipy over {own}", faster, 40.0)
    csr_mib = graph.matrix_bytes / 2**20
    memory = run_isolated("bench.graph:prepare_memory", shape=list(case.shape))
    report.at_least(
        f"{label}: scipy's CSR ({csr_mib:.0f} MiB) over rayloom's peak increase "
        f"({memory.increase_mib:.1f} MiB)",
        csr_mib / memory.increase_mib,
        40.0,
    )
    if case.node_set == "all":
        receivers = ends(case.shape)[1]
        times = laps["scipy"].result[graph.nearest(receivers)]
        allowed = 1e-5 + 3e-6 * times
        excess = float(np.max(np.abs(times - laps[OWN].result) / allowed))
        report.at_most(f"{label}: difference from scipy over 1e-5 s + 3e-6 T", excess, 1.0)


def prepare_memory(shape: list[int]) -> Callable[[], dict[str, Any]]:
    """Prepare one graph search of rayloom for a process of its own."""
    sizes = (shape[0], shape[1], shape[2])
    model, (source, receivers) = rough_model(sizes), ends(sizes)
    _trace(rough_model((2, 2, 2)), np.ones((1, 3)), np.full((1, 3), 20.0))
    return lambda: {"latest_s": float(_trace(model, source, receivers).max())}

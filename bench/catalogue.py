"""Which benchmarks there are."""

from __future__ import annotations

import importlib
from pathlib import Path
from typing import Protocol, cast

from bench.report import Report

SUBJECTS = {
    "accuracy": "times against exact solutions: homogeneous, two layers, gradient",
    "long_rays": "80-s rays through rough models against the best of many searches",
    "earth_box": "a box filled with the one-dimensional Earth against that Earth",
    "graph": "graph search against general graph libraries",
    "eikonal": "bent rays against scikit-fmm in a velocity gradient",
    "products": "G x and its adjoint against scipy and the copy bandwidth",
    "job": "36,000 rays of distant events through 150,000 blocks",
    "growth": "cost against the number of blocks, rays and threads",
    "reading": "one survey of 18,000 picks read in each format",
    "inversion": "a whole inversion of 5,000 residuals",
    "large_inversion": "36,000 residuals in 150,000 blocks, six retracings, stage by stage",
    "appraisal": "samples, probes, restorations, bootstrap and squeezing of 6,000 residuals",
    "squeezing": "power of squeezing and coverage of body intervals on the demo's survey",
    "comparison": "straight, reference and bent rays at equal misfit on a known structure",
    "tradeoff": "what the trade-off recommends, for truths drawn from a prior",
    "solver": "warm starts, column scaling, merged blocks, errors of station terms",
    "screening": "faults planted in surveys against what the check finds, and clean surveys",
}


class Benchmark(Protocol):
    """What each file of a subject offers."""

    def run(self, *, quick: bool, output: Path) -> Report:
        """Measure; figures may be drawn into the folder ``output``."""


def load(name: str) -> Benchmark:
    """Import one benchmark."""
    return cast(Benchmark, importlib.import_module(f"bench.{name}"))

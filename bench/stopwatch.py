"""Wall and CPU time of rivals, their repeats taken in turn."""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass
from statistics import median
from typing import Any

REPEATS = 3


@dataclass(frozen=True)
class Timing:
    """Times of one contender, s, one entry per repeat."""

    wall_s: tuple[float, ...]
    cpu_s: tuple[float, ...]

    @property
    def wall(self) -> float:
        """Median wall time, s."""
        return median(self.wall_s)

    @property
    def cpu(self) -> float:
        """Median CPU time of all threads, s."""
        return median(self.cpu_s)

    @property
    def spread(self) -> float:
        """Slowest over fastest wall time."""
        return max(self.wall_s) / min(self.wall_s)


@dataclass(frozen=True)
class Lap:
    """Timing and last result of one contender."""

    timing: Timing
    result: Any


def clock(work: Callable[[], Any]) -> tuple[float, float, Any]:
    """Return wall time (s), CPU time (s) and result of one call."""
    wall, cpu = time.perf_counter(), time.process_time()
    result = work()
    return time.perf_counter() - wall, time.process_time() - cpu, result


def race(contenders: dict[str, Callable[[], Any]], *, repeats: int = REPEATS) -> dict[str, Lap]:
    """Time contenders in turn, so that a change of load meets all of them."""
    walls: dict[str, list[float]] = {name: [] for name in contenders}
    cpus: dict[str, list[float]] = {name: [] for name in contenders}
    results: dict[str, Any] = {}
    for _ in range(repeats):
        for name, work in contenders.items():
            results.pop(name, None)
            wall, cpu, results[name] = clock(work)
            walls[name].append(wall)
            cpus[name].append(cpu)
    return {
        name: Lap(Timing(tuple(walls[name]), tuple(cpus[name])), results[name])
        for name in contenders
    }


def measure(work: Callable[[], Any], *, repeats: int = REPEATS) -> Lap:
    """Time one contender alone."""
    return race({"only": work}, repeats=repeats)["only"]

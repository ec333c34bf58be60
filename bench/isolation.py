"""Peak memory of a piece of work, in a process of its own.

``ru_maxrss`` outlives ``exec``: a child begins with the peak of the process that
started it. On Linux the peak of the child's own memory, ``VmHWM``, is read instead.
"""

from __future__ import annotations

import importlib
import json
import resource
import subprocess
import sys
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from bench.stopwatch import clock

STATUS = Path("/proc/self/status")
Job = Callable[[], dict[str, Any]]


@dataclass(frozen=True)
class Isolated:
    """What a piece of work took in its own process.

    Attributes
    ----------
    wall_s, cpu_s : float
        Times of the work without its preparation.
    peak_mib : float
        Peak of the whole process.
    increase_mib : float
        That peak above what was resident when the work began.
    result : dict
        Numbers the work returned.
    """

    wall_s: float
    cpu_s: float
    peak_mib: float
    increase_mib: float
    result: dict[str, Any]


def run_isolated(prepare: str, **arguments: Any) -> Isolated:
    """Prepare and do a piece of work in a fresh interpreter.

    Parameters
    ----------
    prepare : str
        ``module:function``; the function takes the arguments and returns the work,
        a function without arguments that returns a dict of numbers.
    **arguments
        Values that JSON can carry.
    """
    command = [sys.executable, "-m", "bench.isolation", prepare, json.dumps(arguments)]
    root = Path(__file__).parent.parent
    done = subprocess.run(command, stdout=subprocess.PIPE, text=True, check=True, cwd=root)
    return Isolated(**json.loads(done.stdout.splitlines()[-1]))


def _resident_mib(key: str) -> float:
    if STATUS.exists():
        for line in STATUS.read_text().splitlines():
            if line.startswith(key + ":"):
                return int(line.split()[1]) / 1024.0
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    return peak / (1024.0**2 if sys.platform == "darwin" else 1024.0)


def _child(prepare: str, arguments: str) -> None:
    module, name = prepare.split(":")
    job: Job = getattr(importlib.import_module(module), name)(**json.loads(arguments))
    before = _resident_mib("VmRSS")
    earlier_peak = _resident_mib("VmHWM")
    wall, cpu, result = clock(job)
    peak = _resident_mib("VmHWM")
    # An earlier peak that was not exceeded hides the work's own; it counts in full.
    answer = Isolated(wall, cpu, peak, max(peak, earlier_peak) - before, result)
    print(json.dumps(vars(answer)))


if __name__ == "__main__":
    _child(*sys.argv[1:])

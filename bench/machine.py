"""The machine and the versions that a result belongs to."""

from __future__ import annotations

import os
import platform
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path

PACKAGES = (
    "rayloom",
    "numpy",
    "scipy",
    "rustworkx",
    "networkit",
    "igraph",
    "scikit-fmm",
)


def describe() -> dict[str, str]:
    """Return processor, cores, load, system and versions as text."""
    load = ", ".join(f"{value:.2f}" for value in os.getloadavg())
    return {
        "processor": _processor(),
        "cores": str(os.cpu_count()),
        "load average (1, 5, 15 min, at the end)": load,
        "system": f"{platform.system()} {platform.release()}, Python {platform.python_version()}",
        "versions": ", ".join(f"{name} {_version(name)}" for name in PACKAGES),
    }


def _processor() -> str:
    information = Path("/proc/cpuinfo")
    if not information.exists():
        return platform.processor() or platform.machine()
    values = {}
    for line in information.read_text().splitlines():
        key, _, value = line.partition(":")
        values.setdefault(key.strip(), value.strip())
    name = values.get("model name", platform.machine())
    wide = [flag for flag in ("avx2", "avx512f") if flag in values.get("flags", "").split()]
    return (
        f"{name} (family {values.get('cpu family')}, model {values.get('model')}, "
        + (", ".join(wide) or "no wide vectors")
        + ")"
    )


def _version(name: str) -> str:
    try:
        return version(name)
    except PackageNotFoundError:
        return "absent"

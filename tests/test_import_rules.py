"""Rules of importing that the import linter cannot see: the compiled module, heavy libraries."""

from __future__ import annotations

import ast
import subprocess
import sys
from pathlib import Path

import rayloom

PACKAGE = Path(rayloom.__file__).parent
MAY_TOUCH_RUST = {"forward", "earth", "inversion"}
HEAVY = ("pandas", "xarray", "obspy", "matplotlib", "scipy", "pydantic")


def names_imported(path: Path) -> set[str]:
    names = set()
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.ImportFrom) and node.module:
            names |= {f"{node.module}.{alias.name}" for alias in node.names} | {node.module}
        elif isinstance(node, ast.Import):
            names |= {alias.name for alias in node.names}
    return names


def test_only_some_rooms_touch_the_rust_module() -> None:
    touching = {
        path.relative_to(PACKAGE).parts[0]
        for path in PACKAGE.rglob("*.py")
        if "rayloom._core" in names_imported(path)
    }
    assert touching == MAY_TOUCH_RUST


def test_importing_rayloom_imports_nothing_heavy() -> None:
    code = "import rayloom, sys; print(' '.join(sys.modules))"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert not set(HEAVY) & set(done.stdout.split())
